"""pinsim contact-sheet: many frames on as many pages as they need."""

import sys
from typing import TYPE_CHECKING, Any

import click

from pinsim.cli import options

if TYPE_CHECKING:
    from pinsim.cli.many import Wanted

STOPPED = 130  # 128 + SIGINT: what shells give for a command that Ctrl-C ended


@click.command("contact-sheet")
@click.argument("scenes", nargs=-1, required=True, metavar="SCENE...")
@click.option(
    "--camera", "cameras", multiple=True, help="A design file or sample:NAME; repeat for more."
)
@options.scenes_options
@options.cameras_options
@options.lights_options
@click.option(
    "--need",
    metavar="WORDS",
    help="Mark the frame nearest to it: finest, 'finest over the frame', 'shortest time', widest, "
    "'2.5 c/mm in the corner', 60deg, 4s.",
)
@click.option(
    "--sort",
    metavar="KEY",
    multiple=True,
    help="Order: hole, focal-length, detail, detail-in-corner, needed-time, view and more; -KEY for "
    "the greatest first; repeat for the next key.",
)
@click.option(
    "--group",
    metavar="KEY",
    help="Frames together by scene, camera, hole, focal-length, distance, time, or none.",
)
@click.option(
    "--page",
    metavar="SIZE",
    help="A4, 'A4 landscape', letter, 200mmx150mm, or fit: as large as needed (usual).",
)
@click.option("--columns", type=int, help="How many frames lie side by side.")
@click.option("--title", help="The line above the sheet.")
@click.option(
    "--width", "width_px", type=int, help="Pixels of a frame's longer side; 460 if not told."
)
@click.option(
    "--detail/--no-detail",
    default=None,
    help="With the middle of each frame enlarged below it (usual), or without.",
)
@click.option(
    "--table",
    "tables",
    metavar="FILE",
    multiple=True,
    help="Where all figures go, .csv or .json; else both beside the sheet.",
)
@click.option("--no-table", is_flag=True, help="Write no figures.")
@click.option(
    "--workers", type=int, help="Processes that draw; usually as many as there are cores."
)
@click.option("--dask", metavar="ADDRESS", help="Draw on the workers of this Dask scheduler.")
@click.option("--resume", is_flag=True, help="Go on: draw only what is missing or has changed.")
@click.option("--keep-frames", is_flag=True, help="Keep the folder of finished frames.")
@click.option("--dry-run", is_flag=True, help="Tell frames, time and memory; write nothing.")
@click.option("--quiet", is_flag=True, help="Tell nothing of the frames while they are drawn.")
@options.output_options
def command(scenes: tuple[str, ...], **given: Any) -> int:
    """Lay scenes and designs out on sheets, any number of them.

    Every SCENE through every design: each --camera with each --hole and each --focal-length given, at
    each --distance, after each --time. SCENE may be a plan (.toml) that says all this; what is typed
    beside it comes first. Frames that are done are kept in OUTPUT.frames until the sheet is whole.
    """
    from pinsim.cli import many

    wanted = many.wanted(scenes, given)
    if given["dry_run"]:
        many.tell_plan(wanted)
        return 0
    return _drawn(wanted, quiet=given["quiet"])


def _drawn(wanted: "Wanted", *, quiet: bool) -> int:
    """Draw and write the sheet; return the exit code."""
    from pinsim.cli import many
    from pinsim.cli.show import tell

    job = many.begin(wanted)
    left = job.missing()
    if not quiet and left:
        print(many.said_before(wanted, job, len(left)), file=sys.stderr)
    try:
        with many.frame_progress(len(left), quiet=quiet) as on_outcome:
            many.draw(wanted, job, on_outcome)
    except KeyboardInterrupt:
        done = job.entries()
        if not done:
            print("pinsim: stopped; no frame was done.", file=sys.stderr)
            job.store.remove()
            return STOPPED
        sheet = job.sheet(
            wanted.style, [f"stopped: {len(done)} of {len(job.frames)} frames are done"]
        )
        paths = many.save(wanted, sheet)
        tell([f"{paths[0]}: {len(done)} of {len(job.frames)} frames, stopped"])
        print(
            f"pinsim: stopped. To go on, give the same command with --resume; what is done is in "
            f"{many.frames_folder(wanted.target)}.",
            file=sys.stderr,
        )
        return STOPPED
    try:
        job.refuse_all()
    except Exception:
        job.store.remove()
        raise
    sheet = job.sheet(wanted.style)
    paths = many.save(wanted, sheet)
    if not wanted.keep_frames and not sheet.failed:
        job.store.remove()
    tell(many.said_after(wanted, job, sheet, paths, drawn=len(left)))
    return 1 if sheet.failed else 0
