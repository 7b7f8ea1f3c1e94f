"""What the contact sheet's command does between its line and its result."""

import sys
import time
from collections.abc import Callable, Iterator, Mapping, Sequence
from contextlib import contextmanager
from dataclasses import dataclass, replace
from pathlib import Path
from typing import Any

from pinsim.batch.draw import Failed, Outcome
from pinsim.batch.estimate import measure, memory_bytes
from pinsim.batch.frames import Frame
from pinsim.batch.needs import check_group, check_sort, read_need
from pinsim.batch.plan_file import is_plan, read_plan
from pinsim.batch.spool import Source
from pinsim.batch.store import Store, read_about
from pinsim.batch.workers import lanes_for, worker_count
from pinsim.camera import Camera
from pinsim.cli.designs import assumed, default_output, input_files, make_camera
from pinsim.cli.scenes import load_scene
from pinsim.errors import DesignError, OutputError, PinsimError
from pinsim.exposure import time_text
from pinsim.files import check_target, keep_inputs
from pinsim.scene import Scene
from pinsim.sheets.contact.layout import page_format
from pinsim.sheets.contact.make import Common, Design, Job, all_frames, check, one_frame
from pinsim.sheets.contact.sheet import ContactSheet, Style
from pinsim.sheets.contact.table import TABLE_SUFFIXES
from pinsim.sheets.lettering import SHEET_SUFFIXES
from pinsim.units import format_length

USUAL_PX = 460
FRAMES_ENDING = ".frames"
_MOST_NOTES = 12

OnOutcome = Callable[[Frame, Outcome], None]


@dataclass(frozen=True, slots=True, kw_only=True)
class Wanted:
    """Everything a sheet is made from, read and checked."""

    scenes: list[Scene]
    frames: list[Frame]
    style: Style
    target: Path
    tables: tuple[Path, ...]
    overwrite: bool
    resume: bool
    keep_frames: bool
    workers: int | None
    dask: str | None
    notes: tuple[str, ...]


def frames_folder(target: Path) -> Path:
    """Return the folder that keeps a sheet's finished frames."""
    return target.with_name(target.name + FRAMES_ENDING)


def wanted(words: Sequence[str], given: Mapping[str, Any]) -> Wanted:
    """Return what the line, and a plan if one stands on it, ask for. Raises PinsimError."""
    words, said, plans = _with_plan(words, dict(given))
    style = Style(
        longer_px=said["width_px"] or USUAL_PX,
        detail=said["detail"] is not False,
        need=read_need(said["need"]) if said["need"] else None,
        sort=check_sort(said["sort"] or ()),
        group=check_group(said["group"]),
        page=page_format(said["page"]),
        columns=said["columns"],
        title=said["title"] or "",
    )
    if said["workers"] is not None:
        worker_count(said["workers"], 1)  # refuses an impossible number before any photo is read
        if said["dask"]:
            raise DesignError("--workers and --dask both say who draws; give one of them.")
    target = Path(said["output"]) if said["output"] else default_output("contact-sheet")
    tables = _tables(target, said)
    one_by_one = said["frames"]
    cameras = tuple(said["cameras"])
    designs = _designs(cameras, said) if not one_by_one or cameras else []
    scene_words = [*words, *(one["scene"] for one in one_by_one if "scene" in one)]
    inputs = input_files(
        *scene_words,
        *plans,
        *cameras,
        *(one.get("camera") for one in one_by_one),
        said["distance_map"],
    )
    _check_targets(target, tables, inputs, said)
    places: dict[str, int] = {}
    scenes: list[Scene] = []
    options = {**said, "distance_mm": (said["distances_mm"] or (None,))[0]}
    for word in scene_words:
        if word not in places:
            places[word] = len(scenes)
            scenes.append(load_scene(word, options))
    if not scenes:
        raise DesignError('which scene? Give one: scenes = ["photo.jpg"], or scene in a [[frame]].')
    for one in (target, *tables):
        keep_inputs(one, [file for scene in scenes for file in scene.files])
    common = Common(
        ev=said["ev"],
        wavelength_nm=said["wavelength_nm"],
        look=said["look"],
        longer_px=style.longer_px,
        detail=style.detail,
    )
    if one_by_one:
        frames = _one_by_one(one_by_one, said, scenes, places, common)
    else:
        frames = all_frames(
            [scenes[places[word]] for word in words],
            designs,
            common,
            distances_mm=said["distances_mm"],
            times_s=said["times_s"],
        )
        # A scene that stands twice on the line is read once.
        frames = [replace(frame, scene=places[words[frame.scene]]) for frame in frames]
    check(frames, style)
    return Wanted(
        scenes=scenes,
        frames=frames,
        style=style,
        target=target,
        tables=tables,
        overwrite=said["overwrite"],
        resume=said["resume"],
        keep_frames=said["keep_frames"],
        workers=said["workers"],
        dask=said["dask"],
        notes=tuple(assumed(cameras or [one.get("camera") for one in one_by_one], said)),
    )


def _with_plan(
    words: Sequence[str], given: dict[str, Any]
) -> tuple[list[str], dict[str, Any], list[str]]:
    """Return the scenes, all that was said, and the plan's own path."""
    plans = [word for word in words if is_plan(word)]
    if len(plans) > 1:
        raise DesignError(f"{plans[0]} and {plans[1]} are both plans; give one of them.")
    given.setdefault("frames", [])
    if not plans:
        return list(words), given, []
    plan = read_plan(plans[0])
    scenes = [word for word in words if word not in plans] or list(plan.pop("scenes", ()))
    plan.pop("scenes", None)
    if "light" in plan:
        if "ev" in plan:
            raise DesignError(
                f"{plans[0]}: ev and light both tell the brightness; keep one of them."
            )
        if given["ev"] is None:
            given["light"] = plan["light"]
            given["ev"] = round(float(plan["light"].ev), 2)
    for key, value in plan.items():
        usual = {"look": "upright"}.get(key)
        if key == "light":
            continue
        if given.get(key) in (None, (), [], False, usual) and not (
            key == "detail" and given.get(key) is False
        ):
            given[key] = value
    return scenes, given, plans


def _tables(target: Path, said: Mapping[str, Any]) -> tuple[Path, ...]:
    if said["no_table"]:
        if said["tables"]:
            raise DesignError("--table and --no-table exclude each other; keep one of them.")
        return ()
    if said["tables"]:
        return tuple(Path(one) for one in said["tables"])
    return tuple(target.with_suffix(suffix) for suffix in TABLE_SUFFIXES)


def _check_targets(
    target: Path, tables: Sequence[Path], inputs: Sequence[Path], said: Mapping[str, Any]
) -> None:
    """Refuse what could not be written at the end, and what would write over an earlier run."""
    folder = frames_folder(target)
    # What an earlier run of this very sheet has left may be replaced by those who go on with it.
    replace_own = said["overwrite"] or said["dry_run"] or (said["resume"] and folder.is_dir())
    check_target(target, overwrite=replace_own, suffixes=SHEET_SUFFIXES, inputs=inputs)
    for table in tables:
        check_target(table, overwrite=replace_own, suffixes=TABLE_SUFFIXES, inputs=inputs)
    if folder.exists() and not folder.is_dir():
        raise OutputError(f"{folder} is in the way; frames are kept there. Give another name.")
    if folder.is_dir() and not (said["resume"] or said["overwrite"] or said["dry_run"]):
        raise OutputError(
            f"{folder} holds frames of an earlier run; go on with --resume, or begin anew with "
            "--overwrite."
        )


def _designs(cameras: Sequence[str], said: Mapping[str, Any]) -> list[Design]:
    """Return every design of the files, depths and holes; those that cannot be built tell why."""
    for path in cameras:
        Camera.load(path)  # what is wrong with a file itself is wrong with all of its frames
    found = [
        _design(path, hole, focal, said)
        for path in cameras or (None,)
        for focal in said["focals_mm"] or (None,)
        for hole in said["holes_mm"] or (None,)
    ]
    if all(isinstance(one, PinsimError) for one in found):
        raise next(one for one in found if isinstance(one, PinsimError))
    combinations = [
        (path, focal, hole)
        for path in cameras or (None,)
        for focal in said["focals_mm"] or (None,)
        for hole in said["holes_mm"] or (None,)
    ]
    return [
        _failed(path, hole, focal, one) if isinstance(one, PinsimError) else Design.of(one)
        for (path, focal, hole), one in zip(combinations, found, strict=True)
    ]


def _design(
    path: str | None, hole_mm: float | None, focal_mm: float | None, said: Mapping[str, Any]
) -> Camera | PinsimError:
    try:
        return make_camera(path, hole_mm=hole_mm, focal_mm=focal_mm, options=said)
    except PinsimError as error:
        return error


def _failed(
    path: str | None, hole_mm: float | None, focal_mm: float | None, error: PinsimError
) -> Design:
    base = Camera.load(path) if path else None
    return Design(
        camera=None,
        name=base.name if base else "typed design",
        hole_mm=hole_mm if hole_mm is not None else base.hole.diameter_mm if base else 0.0,
        focal_mm=focal_mm if focal_mm is not None else base.focal_length_mm if base else 0.0,
        problem=" ".join(str(error).split()),
    )


def _one_by_one(
    tables: Sequence[Mapping[str, Any]],
    said: Mapping[str, Any],
    scenes: Sequence[Scene],
    places: Mapping[str, int],
    common: Common,
) -> list[Frame]:
    """Return the frames that a plan names; what one leaves out is the plan's own single value."""

    def single(key: str, name: str, one: Mapping[str, Any]) -> Any:
        values = said[name]
        if key in one:
            return one[key]
        if len(values) > 1:
            raise DesignError(
                f"{one['where']} does not say its {key.split('_', maxsplit=1)[0]}, and the plan names "
                f"{len(values)}; give it in the frame."
            )
        return values[0] if values else None

    frames = []
    designs: list[Design] = []
    for number, one in enumerate(tables, 1):
        path = single("camera", "cameras", one)
        if path is not None:
            Camera.load(path)
        hole, focal = single("hole_mm", "holes_mm", one), single("focal_mm", "focals_mm", one)
        made = _design(path, hole, focal, said)
        design = (
            _failed(path, hole, focal, made) if isinstance(made, PinsimError) else Design.of(made)
        )
        designs.append(design)
        if "scene" in one:
            place = places[one["scene"]]
        elif len(scenes) == 1:
            place = 0
        else:
            raise DesignError(f"{one['where']} does not say which scene; give it in the frame.")
        frames.append(
            one_frame(
                number,
                place,
                scenes[place],
                design,
                common,
                distance_mm=single("distance_mm", "distances_mm", one),
                time_s=single("time_s", "times_s", one),
                name=one.get("name", ""),
            )
        )
    if all(design.camera is None for design in designs):
        raise DesignError(f"{tables[0]['where']}: {designs[0].problem}")
    return frames


def begin(one: Wanted) -> Job:
    """Return the job, with what an earlier run has left if that is to be used."""
    folder = frames_folder(one.target)
    store = Store(folder)
    if not one.resume and one.overwrite:
        store.remove()
        store = Store(folder)
    return Job(one.frames, one.scenes, store)


def _workers(one: Wanted, left: int) -> int:
    return 0 if one.dask else worker_count(one.workers, left)


def said_before(one: Wanted, job: Job, left: int) -> str:
    """Return the line that says what is about to be done, and what it needs."""
    count = _workers(one, left)
    there = len(one.frames) - left
    if one.dask:
        return f"{_count(left, 'frame')} to draw ({there} there) on {one.dask}"
    who = "one process" if count < 2 else f"{count} processes of one thread each"
    need = memory_bytes(job.missing(), one.scenes, count) / (1 << 20)
    said = f"{_count(left, 'frame')} to draw ({there} there) by {who}"
    return f"{said}; about {_round(need)} MB of memory in all"


def _round(value: float) -> str:
    return f"{float(f'{value:.2g}'):.0f}"


def draw(one: Wanted, job: Job, on_outcome: OnOutcome) -> None:
    """Draw what is missing."""
    left = len(job.missing())
    if not left:
        return
    with lanes_for(one.scenes, job.sums, workers=_workers(one, left), dask=one.dask) as (
        lanes,
        sources,
    ):
        job.draw(lanes, sources, on_outcome)


@contextmanager
def frame_progress(total: int, *, quiet: bool) -> Iterator[OnOutcome]:
    """Give what is told of each frame: a bar on a terminal, else a line each, on standard error."""
    done = 0
    if quiet or total == 0:
        yield lambda frame, outcome: None
        return
    if not sys.stderr.isatty():

        def line(frame: Frame, outcome: Outcome) -> None:
            nonlocal done
            done += 1
            said = f"failed: {outcome.reason}" if isinstance(outcome, Failed) else "done"
            text = f"{done}/{total} {_words(frame)}: {said}"
            print(text.encode("ascii", "backslashreplace").decode(), file=sys.stderr, flush=True)

        yield line
        return
    from rich.console import Console
    from rich.progress import BarColumn, MofNCompleteColumn, TextColumn, TimeRemainingColumn
    from rich.progress import Progress as Bar

    columns = (
        TextColumn("{task.description}"),
        BarColumn(),
        MofNCompleteColumn(),
        TimeRemainingColumn(),
        TextColumn("left"),
    )
    with Bar(*columns, console=Console(stderr=True), transient=True) as bar:
        task = bar.add_task("frames", total=total)

        def step(frame: Frame, outcome: Outcome) -> None:
            if isinstance(outcome, Failed):
                bar.console.print(f"failed: {_words(frame)}: {outcome.reason}", markup=False)
            bar.update(task, advance=1, description=_words(frame)[:60])

        yield step


def _words(frame: Frame) -> str:
    parts = [frame.name, frame.scene_name, frame.camera_name]
    parts += [f"hole {frame.hole_mm:g} mm", f"{frame.focal_mm:g} mm to film"]
    if frame.distance_mm is not None:
        parts.append(f"at {format_length(frame.distance_mm)}")
    if frame.time_s is not None:
        parts.append(time_text(frame.time_s) if isinstance(frame.time_s, float) else "time auto")
    return ", ".join(part for part in parts if part)


def save(one: Wanted, sheet: ContactSheet) -> list[Path]:
    """Write the sheet's pages and its tables; return the pages' files."""
    overwrite = one.overwrite or one.resume
    paths = sheet.save(one.target, overwrite=overwrite)
    for table in one.tables:
        sheet.save_table(table, overwrite=overwrite)
    return paths


def said_after(
    one: Wanted, job: Job, sheet: ContactSheet, paths: Sequence[Path], *, drawn: int
) -> list[str]:
    """Return the lines that say what was written."""
    page = sheet.layout.pages[0]
    size = (round(side * sheet.layout.px_per_mm) for side in (page.width_mm, page.height_mm))
    lines = [
        f"{paths[0]}: {' x '.join(map(str, size))} px, prints {page.width_mm:.0f} x "
        f"{page.height_mm:.0f} mm; {_count(len(sheet.entries), 'frame')}"
        + (f" on {sheet.page_count} pages" if sheet.page_count > 1 else "")
    ]
    if len(paths) > 1:
        lines.append(f"further pages: {paths[1]} to {paths[-1]}")
    if one.tables:
        lines.append(f"figures: {', '.join(str(table) for table in one.tables)}")
    if drawn < len(one.frames) and one.resume:
        lines.append(f"{drawn} drawn now, {len(one.frames) - drawn} were there")
    if sheet.need and sheet.nearest:
        entry = sheet.entries[sheet.nearest[0]]
        where = sheet.layout.places[sheet.nearest[0]]
        lines.append(
            f"{sheet.need}: frame {sheet.nearest[0] + 1}, page {where[0]}: {_words(entry.frame)}"
        )
    if one.keep_frames or sheet.failed:
        lines.append(f"frames kept in {frames_folder(one.target)}")
    failed = [entry for entry in sheet.entries if entry.about is None]
    lines += [f"failed: {_words(entry.frame)}: {entry.reason}" for entry in failed[:_MOST_NOTES]]
    if failed:
        lines.append(f"{_count(len(failed), 'frame')} failed; --resume tries them again")
    notes = list(
        dict.fromkeys(
            f"note: {entry.frame.scene_name}: {note}"
            for entry in sheet.entries
            if entry.about is not None
            for note in entry.about["notes"]
        )
    )
    lines += [f"note: {note}" for note in one.notes]
    lines += notes[:_MOST_NOTES]
    if len(notes) > _MOST_NOTES:
        lines.append(f"note: {len(notes) - _MOST_NOTES} more notes stand in the table")
    return lines


def _count(number: int, thing: str) -> str:
    return f"{number} {thing}" if number == 1 else f"{number} {thing}s"


def tell_plan(one: Wanted) -> None:
    """Print what would be drawn, how long it would take and what is there; write nothing."""
    from pinsim.cli.show import tell

    job = Job(one.frames, one.scenes, Store())
    folder = frames_folder(one.target)
    there = {
        number
        for number, key in job.keys.items()
        if one.resume and key and read_about(folder, key) is not None
    }
    for frame in one.frames:
        state = (
            "there"
            if frame.number in there
            else f"cannot be drawn: {frame.problem}"
            if frame.camera is None
            else "to draw"
        )
        print(f"{frame.number:5d}  {_words(frame)}: {state}".encode("ascii", "replace").decode())
    left = [frame for frame in one.frames if frame.number not in there]
    lines = [
        f"{_count(len(one.frames), 'frame')}: {len(there)} there, {len(left)} to draw"
        + ("" if one.resume or not folder.is_dir() else f" (--resume would use {folder})")
    ]
    if left:
        start = time.perf_counter()
        sources = [Source(key, scene) for key, scene in zip(job.sums, one.scenes, strict=True)]
        expected = measure(left, sources)
        count = _workers(one, len(left))
        if expected.seconds_each is not None:
            each = expected.seconds_each
            whole = each * len(left) / max(1, count)
            lines.append(
                f"time: about {time_text(max(1.0, whole))} with {_count(max(1, count), 'worker')}: "
                f"{_count(expected.measured, 'frame')} drawn just now, in "
                f"{time.perf_counter() - start:.1f} s, the last in {each:.2f} s"
            )
        memory = _round(memory_bytes(left, one.scenes, count) / (1 << 20))
        lines.append(
            f"memory: about {memory} MB in all processes, by the size of the largest frame"
        )
    lines.append(f"would write {one.target}" + "".join(f", {table}" for table in one.tables))
    tell(lines)
