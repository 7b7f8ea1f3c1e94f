"""Many frames by many hands: processes, an executor, a kill, Ctrl-C, and going on after each."""

import json
import os
import signal
import subprocess
import sys
import time
from concurrent.futures import Future, ThreadPoolExecutor
from pathlib import Path

import numpy as np
import pytest
from conftest import contents, landscape_codes
from PIL import Image

import pinsim
from pinsim import Camera, Film, Hole, Scene
from pinsim.batch import draw as drawing
from pinsim.batch.draw import Failed
from pinsim.batch.frames import Frame
from pinsim.batch.lanes import Beside
from pinsim.batch.run import run as run_frames
from pinsim.batch.spool import Source, spool
from pinsim.cli import main

ROOT = Path(__file__).resolve().parents[1]
HOLES = tuple(part for k in range(4) for part in ("--hole", f"0.{3 + k}mm"))
DEPTHS = ("--focal-length", "20mm", "--focal-length", "25mm", "--focal-length", "30mm")
SHEET = ("--view", "40deg", *HOLES, *DEPTHS, "--film", "8mmx6mm", "--width", "96", "--no-detail")
FRAMES = 12


@pytest.fixture
def plain(run, photo):
    """Return the bytes of the sheet as one process draws it, one frame after another, in itself."""
    scene = Scene.load(photo, horizontal_view_deg=40)
    boxes = [
        Camera(
            name="typed design",
            focal_length_mm=depth,
            hole=Hole(diameter_mm=hole / 10),
            film=Film(width_mm=8.0, height_mm=6.0),
        )
        for depth in (20.0, 25.0, 30.0)
        for hole in range(3, 7)
    ]
    sheet = pinsim.contact_sheet([scene], boxes, width_px=96, detail=False)
    sheet.save(photo.parent / "plain.png")
    return (photo.parent / "plain.png").read_bytes()


def listen_to_ctrl_c():
    signal.signal(signal.SIGINT, signal.SIG_DFL)


def started(folder, *arguments):
    """Start the command line as a process of its own."""
    return subprocess.Popen(
        [sys.executable, "-m", "pinsim", "contact-sheet", *map(str, arguments)],
        cwd=folder,
        env={**os.environ, "PYTHONPATH": str(ROOT)},
        stderr=subprocess.PIPE,
        stdout=subprocess.PIPE,
        text=True,
        # What is started in the background of a shell ignores Ctrl-C, and its children inherit that.
        preexec_fn=listen_to_ctrl_c,  # noqa: PLW1509  (no threads here yet)
    )


def done_lines(text):
    return [line for line in text.splitlines() if line.endswith(": done")]


def after_lines(process, count):
    """Read what a process tells until so many frames are done."""
    told = ""
    while len(done_lines(told)) < count:
        line = process.stderr.readline()
        assert line, told
        told += line
    return told


def children_of(pid):
    """Return the processes whose parent is one, as Linux tells."""
    found = []
    for stat in Path("/proc").glob("[0-9]*/stat"):
        try:
            fields = stat.read_text().rsplit(")", 1)[1].split()
        except OSError:
            continue
        if int(fields[1]) == pid:
            found.append(int(stat.parent.name))
    return found


def alive(pid):
    try:
        state = Path(f"/proc/{pid}/stat").read_text().rsplit(")", 1)[1].split()[0]
    except OSError:
        return False
    return state != "Z"


# Alike, whoever draws ----------------------------------------------------------------------------


@pytest.mark.parametrize("workers", [1, 2])
def test_processes_draw_the_same_sheet(run, photo, plain, workers):
    code, out, err = run("contact-sheet", photo, *SHEET, "--workers", workers, "-o", "sheet.png")
    assert code == 0
    assert len(done_lines(err)) == FRAMES
    assert "12 frames to draw (0 there)" in err
    assert "MB of memory in all" in err
    assert out.splitlines()[0].startswith("sheet.png: ")
    assert (photo.parent / "sheet.png").read_bytes() == plain
    assert not (photo.parent / "sheet.png.frames").exists()


def test_any_executor_draws_the_same_sheet(photo, tmp_path):
    scene = Scene.load(photo, horizontal_view_deg=40)
    boxes = [
        Camera(
            focal_length_mm=20.0,
            hole=Hole(diameter_mm=hole),
            film=Film(width_mm=8.0, height_mm=6.0),
        )
        for hole in (0.3, 0.4, 0.5)
    ]
    one = pinsim.contact_sheet([scene], boxes, width_px=96)
    with ThreadPoolExecutor(2) as executor:
        other = pinsim.contact_sheet([scene], boxes, width_px=96, executor=executor)
        executor.submit(int).result()  # it is still ours to use
    np.testing.assert_array_equal(one.codes, other.codes)


def test_a_picture_does_not_depend_on_how_many_threads_draw_it(tmp_path):
    """A scene with distances, so that hiding and the varied kernels take part."""
    code = (
        "import hashlib, pinsim; s = pinsim.Scene.load('sample:tabletop');"
        "c = pinsim.Camera.load('sample:square-box').with_hole(0.8);"
        "p = pinsim.preview(s, c, width_px=200, averaged=True, time_s='auto', ev=12, grain_seed=3);"
        "print(hashlib.sha256(p.exposure.tobytes() + p.codes().tobytes()).hexdigest())"
    )
    sums = {
        subprocess.run(
            [sys.executable, "-c", code],
            env={**os.environ, "PYTHONPATH": str(ROOT), "PINSIM_THREADS": threads},
            capture_output=True,
            check=True,
            text=True,
        ).stdout
        for threads in ("1", "2", "3", "nonsense")
    }
    assert len(sums) == 1


def test_a_scene_that_is_mapped_is_the_scene(photo, tmp_path):
    scene = Scene.load(photo, horizontal_view_deg=40)
    near = Scene.from_light(
        landscape_codes() / 255.0,
        horizontal_view_deg=40.0,
        distance_mm=np.linspace(300.0, 900.0, 48 * 72).reshape(48, 72),
    )
    for number, one in enumerate((scene, near)):
        source = spool(one, f"key{number}", tmp_path)
        again = source.read(None)
        assert again is source.read(None)
        np.testing.assert_array_equal(again.photo.linear(), one.photo.linear())
        assert not again.photo.codes.flags.writeable
        assert source.read(500.0).distance == 500.0
    places = np.arange(48)[:, None], np.arange(72)[None, :]
    np.testing.assert_array_equal(
        again.distance.inverse_mm(*places), near.distance.inverse_mm(*places)
    )


# Going on ----------------------------------------------------------------------------------------


def test_after_a_kill_only_what_is_missing_is_drawn(run, photo, plain):
    process = started(photo.parent, photo, *SHEET, "--workers", 2, "-o", "sheet.png")
    told = after_lines(process, 3)
    workers = children_of(process.pid)
    assert len(workers) >= 2
    os.kill(process.pid, signal.SIGKILL)
    process.wait()
    process.stderr.close()
    process.stdout.close()
    end = time.monotonic() + 20.0
    while any(alive(pid) for pid in workers) and time.monotonic() < end:
        time.sleep(0.05)
    assert not any(alive(pid) for pid in workers), "workers outlive their parent"
    assert not (photo.parent / "sheet.png").exists()
    kept = len(list((photo.parent / "sheet.png.frames").glob("*.json")))
    assert len(done_lines(told)) <= kept < FRAMES
    # Without a word about the earlier run nothing is touched.
    before = contents(photo.parent)
    code, _, err = run("contact-sheet", photo, *SHEET, "-o", "sheet.png")
    assert code == 2
    assert "holds frames of an earlier run; go on with --resume" in err
    assert contents(photo.parent) == before
    code, out, err = run("contact-sheet", photo, *SHEET, "-o", "sheet.png", "--resume")
    assert code == 0
    assert len(done_lines(err)) == FRAMES - kept
    assert f"{FRAMES - kept} drawn now, {kept} were there" in out
    assert (photo.parent / "sheet.png").read_bytes() == plain


@pytest.mark.parametrize("workers", [1, 2])
def test_ctrl_c_leaves_a_whole_sheet_of_what_is_done(run, photo, plain, workers):
    process = started(photo.parent, photo, *SHEET, "--workers", workers, "-o", "sheet.png")
    after_lines(process, 3)
    process.send_signal(signal.SIGINT)
    out, err = process.communicate(timeout=60)
    assert process.returncode == 130  # 128 + SIGINT, as shells count
    assert "Traceback" not in err
    assert "give the same command with --resume" in err
    assert "of 12 frames, stopped" in out
    with Image.open(photo.parent / "sheet.png") as image:
        image.load()
    rows = json.loads((photo.parent / "sheet.json").read_text())["frames"]
    kept = len(list((photo.parent / "sheet.png.frames").glob("*.json")))
    assert 3 <= len(rows) == kept < FRAMES
    code, _, err = run("contact-sheet", photo, *SHEET, "-o", "sheet.png", "--resume")
    assert code == 0
    assert len(done_lines(err)) == FRAMES - kept
    assert (photo.parent / "sheet.png").read_bytes() == plain


def test_a_photo_that_changed_under_its_old_date_is_drawn_anew(run, photo):
    arguments = ("contact-sheet", photo, *SHEET[:6], "--focal-length", "20mm", *SHEET[-5:])
    arguments += ("-o", "sheet.png", "--keep-frames", "--resume")
    assert len(done_lines(run(*arguments)[2])) == 2
    assert done_lines(run(*arguments)[2]) == []
    before = (photo.parent / "sheet.png").read_bytes()
    date = photo.stat()
    codes = landscape_codes()
    codes[10:20, 10:20] = 0
    Image.fromarray(codes).save(photo)
    os.utime(photo, ns=(date.st_atime_ns, date.st_mtime_ns))
    assert photo.stat().st_mtime_ns == date.st_mtime_ns
    assert len(done_lines(run(*arguments)[2])) == 2
    assert (photo.parent / "sheet.png").read_bytes() != before


def test_a_frame_that_was_cut_off_or_changed_is_drawn_anew(run, photo):
    arguments = ("contact-sheet", photo, *SHEET, "-o", "sheet.png", "--keep-frames", "--resume")
    run(*arguments)
    before = (photo.parent / "sheet.png").read_bytes()
    folder = photo.parent / "sheet.png.frames"
    pictures = sorted(folder.glob("*.png"))
    assert len(pictures) == FRAMES
    pictures[0].write_bytes(pictures[0].read_bytes()[:100])
    pictures[1].unlink()
    pictures[2].write_bytes(pictures[3].read_bytes())
    sorted(folder.glob("*.json"))[4].write_text("{")
    (folder / "note.txt").write_text("mine")
    assert len(done_lines(run(*arguments)[2])) == 4
    assert (photo.parent / "sheet.png").read_bytes() == before
    # The folder goes when it is asked to, but for what is not pinsim's.
    run(*[one for one in arguments if one != "--keep-frames"])
    assert [file.name for file in folder.iterdir()] == ["note.txt"]


def test_a_dry_run_knows_what_is_there(run, photo):
    arguments = ("contact-sheet", photo, *SHEET, "-o", "sheet.png", "--keep-frames")
    run(*arguments)
    next((photo.parent / "sheet.png.frames").glob("*.json")).unlink()
    before = contents(photo.parent)
    code, out, _ = run(*arguments, "--resume", "--dry-run")
    assert code == 0
    assert "12 frames: 11 there, 1 to draw" in out
    assert sum(line.endswith(": there") for line in out.splitlines()) == 11
    assert contents(photo.parent) == before


# What fails --------------------------------------------------------------------------------------


def test_a_frame_that_breaks_is_laid_out_with_its_reason(run, photo, monkeypatch):
    honest = drawing.preview

    def breaks(scene, camera, **options):
        if camera.hole.diameter_mm == 0.4 and camera.focal_length_mm == 25.0:
            raise ValueError("a broken   thing\nin it")
        return honest(scene, camera, **options)

    monkeypatch.setattr(drawing, "preview", breaks)
    code, out, err = run(
        "contact-sheet", photo, *SHEET, "--workers", 1, "-o", "no.png", "--dry-run"
    )
    assert code == 0
    scene = Scene.load(photo, horizontal_view_deg=40)
    boxes = [
        Camera(
            focal_length_mm=25.0,
            hole=Hole(diameter_mm=hole),
            film=Film(width_mm=8.0, height_mm=6.0),
        )
        for hole in (0.3, 0.4, 0.5)
    ]
    sheet = pinsim.contact_sheet([scene], boxes, width_px=96, page="A4")
    assert sheet.failed == 1
    assert [entry.reason for entry in sheet.entries] == ["", "ValueError: a broken thing in it", ""]
    words = [t.line for t in sheet.layout.pages[0].things if hasattr(t, "line")]
    assert "not drawn" in words
    assert "not drawn: ValueError: a broken thing in it" in " ".join(words)
    # A sheet with a hole in it says so to scripts, and the frame is tried again.
    monkeypatch.setattr("pinsim.batch.workers.cores", lambda: 1)
    code, out, err = run("contact-sheet", photo, *SHEET, "-o", "sheet.png")
    assert code == 1
    assert "7/12" in err
    assert "failed: ValueError: a broken thing in it" in err
    assert "1 frame failed; --resume tries them again" in out
    monkeypatch.setattr(drawing, "preview", honest)
    code, _, err = run("contact-sheet", photo, *SHEET, "-o", "sheet.png", "--resume")
    assert code == 0
    assert len(done_lines(err)) == 1


class Deadly:
    """A source whose reading ends the process, as want of memory does."""

    key = "deadly"

    def __init__(self, folder, times):
        self.folder, self.times = folder, times

    def read(self, distance_mm):
        count = len(list(self.folder.glob("died*")))
        if count < self.times:
            (self.folder / f"died{count}").touch()
            os.kill(os.getpid(), signal.SIGKILL)
        return Scene.from_light(landscape_codes() / 255.0, horizontal_view_deg=40.0)


@pytest.mark.parametrize(("times", "failed"), [(1, 0), (2, 1)])
def test_a_process_that_is_killed_takes_no_other_frame_along(tmp_path, times, failed):
    """Once is an accident and the frame is drawn again; twice is the frame's own fault."""
    scene = Scene.from_light(landscape_codes() / 255.0, horizontal_view_deg=40.0)
    camera = Camera(
        focal_length_mm=20.0, hole=Hole(diameter_mm=0.5), film=Film(width_mm=8.0, height_mm=6.0)
    )
    frames = [
        Frame(
            number=number,
            scene=number == 2,
            scene_name="place",
            camera=camera,
            camera_name="box",
            hole_mm=0.5,
            focal_mm=20.0,
            wavelength_nm=550.0,
            width_px=64,
            detail=False,
        )
        for number in (1, 2, 3)
    ]
    outcomes = {}
    sources = [Source("one", scene), Deadly(tmp_path, times)]
    run_frames(frames, sources, [Beside()], lambda frame, out: outcomes.update({frame.number: out}))
    assert sorted(outcomes) == [1, 2, 3]
    assert [n for n, out in outcomes.items() if isinstance(out, Failed)] == [2] * failed
    if failed:
        assert "ended from outside, twice" in outcomes[2].reason


class Lost:
    """An executor whose every picture is lost on the way."""

    def submit(self, work, *arguments):
        future = Future()
        future.set_exception(RuntimeError("the line went dead"))
        return future


def test_pictures_that_an_executor_loses_are_failed_frames(photo):
    scene = Scene.load(photo, horizontal_view_deg=40)
    camera = Camera(
        focal_length_mm=20.0, hole=Hole(diameter_mm=0.5), film=Film(width_mm=8.0, height_mm=6.0)
    )
    sheet = pinsim.contact_sheet([scene], [camera], width_px=96, executor=Lost())
    assert [entry.reason for entry in sheet.entries] == ["RuntimeError: the line went dead"]


@pytest.mark.parametrize(
    ("options", "says"),
    [
        (("--workers", "0"), "0 workers are not possible; give 1 to 256"),
        (("--workers", "2", "--dask", "tcp://127.0.0.1:1"), "--workers and --dask both say"),
        (("--columns", "99"), "99 columns are not possible; give 1 to 24"),
        (("--page", "30mmx40mm"), "a page of 30 x 40 mm is not possible; give 60 to 2000 mm"),
        (("--table", "figures.txt"), "figures.txt: a file's ending tells its kind"),
        (("--table", "a.csv", "--no-table"), "exclude each other"),
        (("--group", "colour"), "frames are not grouped by 'colour'"),
    ],
)
def test_wrong_options_are_refused_before_anything_is_drawn(
    photo, monkeypatch, capsys, options, says
):
    monkeypatch.chdir(photo.parent)
    code = main(["contact-sheet", str(photo), *SHEET, "-o", "s.png", *options])
    told = capsys.readouterr()
    assert (code, told.out) == (2, "")
    assert says in told.err
    assert told.err.count("\n") == 1
    assert sorted(contents(photo.parent)) == ["photo.png"]
