"""A contact sheet of any number of frames, on as many pages as they need.

make.py      from scenes and designs to frames, to what is missing of them, to a sheet
captions.py  what is said of each: only what differs
layout.py    where everything lies, in millimetres
paper.py     one layout drawn as a picture or as a PDF
packed.py    pictures that are PNG files already, put into a PDF as they are
sheet.py     the finished sheet, and how it is saved
table.py     its figures as CSV or JSON
"""

from collections.abc import Sequence
from concurrent.futures import Executor
from pathlib import Path

from pinsim.batch.draw import Outcome
from pinsim.batch.frames import Frame
from pinsim.batch.needs import check_group, check_sort, read_need
from pinsim.batch.store import Store
from pinsim.batch.workers import lanes_for, worker_count
from pinsim.camera import Camera
from pinsim.progress import Progress, Reporter, ignore
from pinsim.render.develop import Look
from pinsim.scene import Scene
from pinsim.sheets.contact.layout import page_format
from pinsim.sheets.contact.make import Common, Design, Job, TimeS, all_frames, check
from pinsim.sheets.contact.sheet import ContactSheet, Style

__all__ = ["ContactSheet", "contact_sheet"]


def contact_sheet(
    scenes: Sequence[Scene],
    cameras: Sequence[Camera],
    *,
    distances_mm: Sequence[float] = (),
    time_s: TimeS | Sequence[TimeS] = None,
    ev: float | None = None,
    wavelength_nm: float | None = None,
    look: Look = "upright",
    width_px: int = 460,
    detail: bool = True,
    need: str | None = None,
    sort: Sequence[str] = (),
    group: str | None = None,
    page: str | None = None,
    columns: int | None = None,
    title: str = "",
    workers: int = 0,
    executor: Executor | None = None,
    dask: str | None = None,
    frames_folder: str | Path | None = None,
    report: Reporter = ignore,
) -> ContactSheet:
    """Return a sheet of every scene through every design, at every distance and time.

    distances_mm : in place of the scenes' own. time_s : one or several. width_px : of a frame's longer
    side; each frame is what preview draws of that width with averaged=True. detail : with the middle of
    each enlarged below it. need : see pinsim.batch.needs.read_need; the frame nearest to it is marked.
    sort, group : keys of pinsim.batch.needs. page : "A4", "A4 landscape", "200mmx150mm", or "fit".
    workers : processes beside this one, 0 none; a script that asks for some must do so under
    `if __name__ == "__main__":`. executor : any concurrent.futures executor in place of them; workers
    then is how many frames it is given at once. dask : a scheduler's address, in place of both.
    frames_folder : where finished frames are kept, and looked for; without it they are in memory.
    A frame that fails is laid out as such; DesignError when every frame was refused.
    """
    times = (time_s,) if time_s is None or isinstance(time_s, str | float | int) else tuple(time_s)
    style = Style(
        longer_px=width_px,
        detail=detail,
        need=read_need(need) if need else None,
        sort=check_sort(sort),
        group=check_group(group),
        page=page_format(page),
        columns=columns,
        title=title,
    )
    common = Common(
        ev=ev, wavelength_nm=wavelength_nm, look=look, longer_px=width_px, detail=detail
    )
    frames = all_frames(
        scenes,
        [Design.of(camera) for camera in cameras],
        common,
        distances_mm=distances_mm,
        times_s=times,
    )
    job = Job(frames, scenes, Store(None if frames_folder is None else Path(frames_folder)))
    check(frames, style)
    left = job.missing()
    done = len(frames) - len(left)

    def tell(frame: Frame, outcome: Outcome) -> None:
        nonlocal done
        done += 1
        report(Progress(done, len(frames), frame.scene_name))

    if left:
        count = worker_count(workers, len(left)) if workers else 0
        with lanes_for(scenes, job.sums, workers=count, executor=executor, dask=dask) as (
            lanes,
            sources,
        ):
            job.draw(lanes, sources, tell)
    job.refuse_all()
    return job.sheet(style)
