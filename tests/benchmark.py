"""Speed and memory as ratios measured in one run: `python tests/benchmark.py`. Not a test.

Absolute times of a shared machine mean little; each figure stands beside what it is measured
against, the two timed in turn, and the median of the pairs is printed with its range.
"""

import math
import os

os.environ.setdefault("OPENBLAS_NUM_THREADS", "1")  # as the command line sets it

import atexit
import shutil
import statistics
import subprocess
import sys
import tempfile
import time
import tracemalloc
from collections.abc import Callable
from pathlib import Path

import numpy as np
from PIL import Image
from scipy import fft

RUNS = 7


def as_installed() -> None:
    """Let commands run from compiled modules, as pip leaves them on a user's machine."""
    folder = tempfile.mkdtemp()
    atexit.register(shutil.rmtree, folder, ignore_errors=True)
    os.environ.pop("PYTHONDONTWRITEBYTECODE", None)
    os.environ["PYTHONPYCACHEPREFIX"] = folder


def timed(work: Callable[[], object]) -> float:
    start = time.perf_counter()
    work()
    return time.perf_counter() - start


def ratio(name: str, ours: Callable[[], object], theirs: Callable[[], object], asked: str) -> None:
    ours(), theirs()  # warm the disk's cache and every lazy import
    pairs = [(timed(ours), timed(theirs)) for _ in range(RUNS)]
    ratios = sorted(a / b for a, b in pairs)
    print(
        f"{name}: ratio {statistics.median(ratios):.2f} ({ratios[0]:.2f} to {ratios[-1]:.2f}); "
        f"medians {statistics.median(a for a, _ in pairs):.3f} s against "
        f"{statistics.median(b for _, b in pairs):.3f} s; asked: {asked}"
    )


def process(*arguments: str) -> None:
    subprocess.run([sys.executable, *arguments], check=True, stdout=subprocess.DEVNULL)


def transfer_functions() -> None:
    from pinsim.material import material
    from pinsim.optics import round_otf

    channels = material("colour").channels
    frequency = np.linspace(0.0, 12.0, 400)

    def work() -> None:
        for channel in channels:
            for wavelength in channel.wavelengths_nm:
                round_otf(
                    frequency, diameter_mm=0.3, focal_length_mm=60.0, wavelength_nm=wavelength
                )

    work()
    times = [timed(work) * 1000.0 for _ in range(RUNS)]
    print(
        f"27 transfer functions of 400 frequencies: {statistics.median(times):.1f} ms "
        f"({min(times):.1f} to {max(times):.1f}); asked: under 30 ms"
    )


PLAIN_SHRINK = """
import sys
from PIL import Image
image = Image.open(sys.argv[1])
width = int(sys.argv[2])
size = (width, round(width * image.height / image.width))
image.convert("RGB").resize(size, Image.Resampling.LANCZOS).save(sys.argv[3])
"""


def phone_photo(path: Path) -> None:
    """Write a 24 megapixel JPEG with an ordinary photo's detail: a sample scene, enlarged."""
    from pinsim.samples import names

    photo = Image.open(names("scene")["courtyard"].parent / "photo.jpg")
    photo.resize((6000, 4000), Image.Resampling.BICUBIC).save(path, quality=92)


def whole_preview(folder: Path) -> None:
    photo = folder / "24mp.jpg"
    phone_photo(photo)
    for camera in ("body-cap", "square-box"):
        for suffix in ("jpg", "png"):
            ours, theirs = folder / f"ours.{suffix}", folder / f"theirs.{suffix}"
            arguments = ("preview", str(photo), f"sample:{camera}", "--view", "75deg")
            process("-m", "pinsim", *arguments, "-o", str(ours), "--overwrite")
            width = Image.open(ours).width
            ratio(
                f"preview of 24 megapixels, {camera}, {width} px .{suffix}",
                lambda a=arguments, o=ours: process(
                    "-m", "pinsim", *a, "-o", str(o), "--overwrite"
                ),
                lambda w=width, t=theirs: process("-c", PLAIN_SHRINK, str(photo), str(w), str(t)),
                "at most 1.0",
            )


def start_up() -> None:
    process("-m", "pinsim", "--help")
    pairs = [
        (timed(lambda: process("-m", "pinsim", "--help")), timed(lambda: process("-c", "pass")))
        for _ in range(RUNS)
    ]
    over = [a - b for a, b in pairs]
    print(
        f"pinsim --help over a bare interpreter: {statistics.median(over):.3f} s "
        f"({min(over):.3f} to {max(over):.3f}); asked: 0.15 s"
    )


def varying_kernel() -> None:
    from pinsim.camera import Camera, Film, Hole
    from pinsim.render import kernels
    from pinsim.render.illuminate import illuminate
    from pinsim.render.plan import make_plan, plan_for
    from pinsim.render.project import project
    from pinsim.render.spread import spread
    from pinsim.scene import Scene

    side = 1500
    rng = np.random.default_rng(1)
    light = rng.random((1600, 1600, 3), np.float32)
    scene = Scene.from_light(light, horizontal_view_deg=52.0)
    camera = Camera(
        focal_length_mm=60.0, hole=Hole(diameter_mm=0.3), film=Film(width_mm=59.5, height_mm=59.5)
    )
    plan = make_plan(scene, camera)
    view = illuminate(project(scene, plan))
    frame = rng.random((3, side, side), np.float32)
    kernel = rng.random((3, side, side), np.float32)

    def plain() -> None:
        # One same-size convolution of three channels: both transforms, product, and back.
        product = fft.rfft2(frame, workers=2)
        product *= fft.rfft2(kernel, workers=2)
        fft.irfft2(product, s=(side, side), workers=2)

    print(f"varying kernel: frame {plan.shape}, with margins {plan.padded}")
    ratio("varying kernel, three channels", lambda: spread(view), plain, "at most 8")

    def prepare() -> None:
        kernels.prepared.cache_clear()
        plan_for.cache_clear()
        make_plan(scene, camera)

    ratio("preparing its kernels", prepare, plain, "at most 8, once for each design")
    tracemalloc.start()
    before = tracemalloc.get_traced_memory()[0]
    tracemalloc.reset_peak()
    spread(view)
    peak = tracemalloc.get_traced_memory()[1] - before
    own = view.light.nbytes
    tracemalloc.stop()
    frame_bytes = plan.shape[0] * plan.shape[1] * 3 * 4
    print(
        f"memory while spreading, scene on the film included: {(peak + own) / frame_bytes:.1f} times "
        "the frame; asked: at most 10"
    )


def material_tones() -> None:
    """What the material adds to a preview, in one process: developing against the whole."""
    from dataclasses import replace

    from pinsim.camera import Camera
    from pinsim.render.develop import develop, develop_material
    from pinsim.render.expose import expose
    from pinsim.render.kept import forget
    from pinsim.render.preview import preview
    from pinsim.scene import Scene

    scene = Scene.load("sample:courtyard")
    box = Camera.load("sample:square-box")
    for name in ("colour-negative", "panchromatic-100"):
        camera = replace(box, material_name=name)
        exposed = expose(camera, time_s=3.0, ev=14.0)
        exposure = preview(scene, camera, width_px=1400).exposure
        ratio(
            f"material's tones of {exposure.shape}, {name}, of the whole preview",
            lambda e=exposure, x=exposed: develop_material(e, exposed=x),
            lambda c=camera: (forget(), preview(scene, c, width_px=1400).codes()),
            "at most 0.2",
        )
        ratio(
            "the same with grain, against tones without a material",
            lambda e=exposure, x=exposed: develop_material(
                e, exposed=x, pitch_mm=0.04, rng=np.random.default_rng(1)
            ),
            lambda e=exposure: develop(e),
            "nothing: only when asked for",
        )


def second_look() -> None:
    """The same photo and box with another hole, in one session, beside the first look."""
    from dataclasses import replace

    from pinsim.camera import Camera, Film, Hole
    from pinsim.render.kept import forget
    from pinsim.render.kernels import _family, prepared
    from pinsim.render.plan import plan_for
    from pinsim.render.preview import preview
    from pinsim.scene import Scene

    scene = Scene.load("sample:courtyard", distance_mm=10_000.0)
    box = Camera(
        focal_length_mm=60.0, hole=Hole(diameter_mm=0.3), film=Film(width_mm=56.0, height_mm=56.0)
    )
    small = Camera(
        focal_length_mm=46.0, hole=Hole(diameter_mm=0.25), film=Film(width_mm=36.0, height_mm=24.0)
    )
    for name, camera, width_px in (("6x6", box, 1000), ("36x24", small, 1225)):
        first, second = [], []
        for turn in range(RUNS):
            forget(), prepared.cache_clear(), _family.cache_clear(), plan_for.cache_clear()
            first.append(
                timed(lambda c=camera, w=width_px: preview(scene, c, width_px=w, averaged=True))
            )
            other = replace(
                camera, hole=Hole(diameter_mm=camera.hole.diameter_mm + 0.01 * (turn + 1))
            )
            second.append(
                timed(lambda c=other, w=width_px: preview(scene, c, width_px=w, averaged=True))
            )
        print(
            f"second look, only the hole changed, one megapixel of {name}: "
            f"{1000 * statistics.median(second):.0f} ms ({1000 * min(second):.0f} to "
            f"{1000 * max(second):.0f}), the first {1000 * statistics.median(first):.0f} ms; "
            "asked: under 100 ms on two cores"
        )


def twelve_layers(folder: Path) -> None:
    """A 24-megapixel photo with a distance map, beside the way it is done by hand.

    By hand: twelve layers of the photo at its full size, each colour convolved with its layer's disc
    by scipy.signal.fftconvolve. One layer is timed, and counted twelve times.
    """
    from scipy import signal

    from pinsim.camera import Camera
    from pinsim.samples import names
    from pinsim.scene import Scene

    photo = folder / "table.jpg"
    sample = names("scene")["tabletop"].parent
    Image.open(sample / "photo.jpg").resize((6000, 4000), Image.Resampling.BICUBIC).save(photo)
    distance = Image.open(sample / "distance.png")
    distance.resize((6000, 4000), Image.Resampling.NEAREST).save(folder / "table.png")
    text = (sample / "scene.toml").read_text().replace("photo.jpg", "table.jpg")
    (folder / "table.toml").write_text(text.replace("distance.png", "table.png"))
    scene = Scene.load(folder / "table.toml")
    camera = Camera.load("sample:square-box")
    light = scene.photo.linear()
    disc_px = 1.2 * camera.hole.diameter_mm / camera.focal_length_mm * scene.focal_length_px
    axis = np.arange(-math.ceil(disc_px), math.ceil(disc_px) + 1)
    kernel = (np.hypot(axis[:, None], axis) < 0.5 * disc_px).astype(np.float64)

    def layer() -> None:
        for colour in range(3):
            signal.fftconvolve(light[..., colour].astype(np.float64), kernel, mode="same")

    arguments = ("preview", str(folder / "table.toml"), "sample:square-box", "--overwrite")
    ours = [
        timed(lambda: process("-m", "pinsim", *arguments, "-o", str(folder / "table-out.png")))
        for _ in range(3)
    ]
    by_hand = 12.0 * statistics.median(timed(layer) for _ in range(2))
    print(
        f"24 megapixels with a distance map, the whole command: {statistics.median(ours):.1f} s; "
        f"twelve layers by hand {by_hand:.0f} s: {by_hand / statistics.median(ours):.0f} times faster; "
        "asked: at least 20"
    )


def tree_bytes(root: int) -> int:
    """Return the memory of a process and all its children, what they share counted once (Linux)."""
    parents: dict[int, int] = {}
    for stat in Path("/proc").glob("[0-9]*/stat"):
        try:
            parents[int(stat.parent.name)] = int(stat.read_text().rsplit(")", 1)[1].split()[1])
        except OSError:
            continue
    tree = {root}
    while more := {pid for pid, parent in parents.items() if parent in tree} - tree:
        tree |= more
    total = 0
    for pid in tree:
        try:
            text = Path(f"/proc/{pid}/smaps_rollup").read_text()
        except OSError:
            continue
        total += sum(int(line.split()[1]) for line in text.splitlines() if line.startswith("Pss:"))
    return 1024 * total


def watched(*arguments: str) -> tuple[float, float, int]:
    """Run a process; return wall seconds, processor seconds of its tree, and its peak bytes."""
    import resource

    before = resource.getrusage(resource.RUSAGE_CHILDREN)
    start, peak = time.perf_counter(), 0
    running = subprocess.Popen(
        [sys.executable, *arguments], stdout=subprocess.DEVNULL, stderr=subprocess.DEVNULL
    )
    while running.poll() is None:
        peak = max(peak, tree_bytes(running.pid))
        time.sleep(0.25)
    wall = time.perf_counter() - start
    assert running.returncode == 0, arguments
    after = resource.getrusage(resource.RUSAGE_CHILDREN)
    return wall, after.ru_utime + after.ru_stime - before.ru_utime - before.ru_stime, peak


def many_frames(folder: Path) -> None:
    """Ten holes by ten depths as a contact sheet: two workers against one, and against previews."""
    holes = [part for k in range(10) for part in ("--hole", f"0.{20 + 3 * k}mm")]
    depths = [part for k in range(10) for part in ("--focal-length", f"{42 + 4 * k}mm")]

    def sheet(*options: str, frames: tuple[list[str], list[str]] = (holes, depths)) -> list[str]:
        where = ("--page", "A4", "--no-table", "-o", str(folder / "many.pdf"), "--overwrite")
        return [
            *("-m", "pinsim", "contact-sheet", "sample:courtyard", "--camera", "sample:square-box"),
            *("--quiet", "--width", "600", *frames[0], *frames[1], *where, *options),
        ]

    alone = ("-m", "pinsim", "preview", "sample:courtyard", "sample:square-box", "--width", "600")
    for name, scene in (("one distance", ("--distance", "10m")), ("a distance map", ())):
        single = statistics.median(
            watched(*alone, *scene, "-o", str(folder / "one.png"), "--overwrite")[1]
            for _ in range(3)
        )
        for detail in ("--no-detail", "--detail"):
            one = watched(*sheet("--workers", "1", detail, *scene))
            two = watched(*sheet("--workers", "2", detail, *scene))
            print(
                f"100 frames of {name}, {detail}: two workers {one[0] / two[0]:.2f} times faster than "
                f"one ({two[0]:.0f} s, {one[0]:.0f} s), asked 1.7; a frame costs "
                f"{two[1] / 100 / single:.2f} of a preview process ({two[1] / 100:.2f} of "
                f"{single:.2f} s of processor time), asked 0.33; peak memory of all processes "
                f"{two[2] / (1 << 20):.0f} MB, asked 1000"
            )
    costs = []
    for count, depth_count in ((10, 1), (100, 10), (500, 50)):
        some = [
            part for k in range(depth_count) for part in ("--focal-length", f"{42 + 0.8 * k}mm")
        ]
        line = sheet("--no-detail", "--distance", "10m", "--workers", "2", frames=(holes, some))
        wall, processor, peak = watched(*line)
        costs.append((count, wall / count, processor / count, peak / (1 << 20)))
    print(
        "a frame among so many costs (wall, processor s; peak MB): "
        + "; ".join(f"{n}: {wall:.2f}, {cpu:.2f}; {peak:.0f}" for n, wall, cpu, peak in costs)
        + "; asked: flat from 10 to 500"
    )


MEASURED = """
import resource, subprocess, sys, time
start = time.perf_counter()
subprocess.run(sys.argv[1:], check=True, stdout=subprocess.DEVNULL)
used = resource.getrusage(resource.RUSAGE_CHILDREN)
print(used.ru_maxrss, used.ru_utime + used.ru_stime, time.perf_counter() - start)
"""


def peak_of(*arguments: str) -> tuple[float, float, float]:
    """Return a process's peak memory in MB, its processor seconds and its seconds."""
    done = subprocess.run(
        [sys.executable, "-c", MEASURED, sys.executable, *arguments],
        check=True,
        capture_output=True,
        text=True,
    )
    peak_kb, busy_s, wall_s = (float(word) for word in done.stdout.split())
    return peak_kb / 1024.0, busy_s, wall_s


def write_panorama(path: Path, rows: int) -> None:
    """Write an equirectangular JPEG of soft waves, gratings and noise."""
    rng = np.random.default_rng(1)
    azimuth = np.linspace(-np.pi, np.pi, 2 * rows, endpoint=False)
    codes = np.empty((rows, 2 * rows, 3), np.uint8)
    for row in range(rows):
        height = np.pi / 2 - (row + 0.5) / rows * np.pi
        east, ahead = np.cos(height) * np.sin(azimuth), np.cos(height) * np.cos(azimuth)
        light = 128.0 + 60.0 * np.sin(40.0 * height) * np.cos(30.0 * east)
        light += 30.0 * np.cos(300.0 * ahead) + rng.integers(-8, 9, azimuth.size)
        codes[row] = np.clip(light[:, None] * [1.0, 0.9, 0.8], 0, 255)
    import imagecodecs

    path.write_bytes(imagecodecs.jpeg8_encode(codes, level=88))


def large_panoramas(folder: Path) -> None:
    """Print memory and time of whole previews, by the photo's size and by the film's."""
    panorama, drawn = folder / "panorama.jpg", folder / "film.jpg"
    # 0.24 mm at 45 mm holds about 27 px/mm; these frames are of 0.5, 1 and 2 megapixels.
    for rows, frames in ((5000, (38,)), (7072, (38,)), (10_000, (26, 38, 53))):
        write_panorama(panorama, rows)
        for side in frames:
            peak_mb, busy_s, wall_s = peak_of(
                *("-m", "pinsim", "preview", str(panorama), "sample:wide-box"),
                *("--film", f"{side}mmx{side}mm", "--projection", "equirectangular"),
                *("-o", str(drawn), "--overwrite"),
            )
            pixels = Image.open(drawn).size
            print(
                f"panorama of {2e-6 * rows * rows:.0f} megapixels to {pixels[0]} x {pixels[1]} px: "
                f"peak {peak_mb:.0f} MB, {busy_s:.1f} s of processor, {wall_s:.1f} s; "
                "asked: under 1500 MB"
            )


def live_server() -> None:
    """The live page's server alone: from a changed hole to the bytes of the picture, over loopback."""
    import json
    import re
    import signal
    import urllib.request

    line = ("live", "sample:courtyard", "sample:square-box", "--distance", "10m", "--no-browser")
    start = time.perf_counter()
    server = subprocess.Popen(
        [sys.executable, "-m", "pinsim", *line], stdout=subprocess.PIPE, text=True
    )
    assert server.stdout is not None
    found = re.search(r"(http\S+)/open\?token=(\S+)", server.stdout.readline())
    assert found is not None
    base, token = found.groups()

    def ask(path: str, body: object = None) -> bytes:
        request = urllib.request.Request(
            base + path,
            None if body is None else json.dumps(body).encode(),
            {"X-Pinsim-Token": token, "Content-Type": "application/json"},
        )
        with urllib.request.urlopen(request) as answer:
            return bytes(answer.read())

    try:
        told = json.loads(ask("/api/start"))
        state, widths = told["state"], told["widths_px"]
        ask("/api/picture", {"state": state, "width_px": widths["coarse"]})
        print(
            f"live: first picture {time.perf_counter() - start:.2f} s after the command; asked: 1.5 s"
        )
        for kind in ("coarse", "fine"):
            ask("/api/picture", {"state": state, "width_px": widths[kind]})
            times = sorted(
                1000.0
                * timed(
                    lambda k=kind, n=n: ask(
                        "/api/picture",
                        {
                            "state": {**state, "hole_mm": 0.26 + 0.004 * n},
                            "width_px": widths[k],
                        },
                    )
                )
                for n in range(1, 41)
            )
            print(
                f"live: another hole, {widths[kind]} px across 6x6, to the picture's bytes: "
                f"{statistics.median(times):.0f} ms, 95 % within {times[37]:.0f} ms; "
                f"asked: {'100' if kind == 'coarse' else '300'} ms"
            )
    finally:
        server.send_signal(signal.SIGTERM)
        server.wait()


def main() -> None:
    as_installed()
    material_tones()
    second_look()
    live_server()
    transfer_functions()
    start_up()
    varying_kernel()
    with tempfile.TemporaryDirectory() as folder:
        whole_preview(Path(folder))
        twelve_layers(Path(folder))
        many_frames(Path(folder))
        large_panoramas(Path(folder))


if __name__ == "__main__":
    main()
