"""What the command line prints: progress on a terminal, results and notes on standard output."""

import sys
from collections.abc import Iterator, Sequence
from contextlib import contextmanager

from pinsim.progress import Progress, Reporter, ignore


@contextmanager
def progress_bar(title: str) -> Iterator[Reporter]:
    """Give a reporter that draws a bar, on a terminal only."""
    if not sys.stderr.isatty():
        yield ignore
        return
    from rich.console import Console
    from rich.progress import BarColumn, TextColumn, TimeElapsedColumn
    from rich.progress import Progress as Bar

    columns = (TextColumn("{task.description}"), BarColumn(), TimeElapsedColumn())
    with Bar(*columns, console=Console(stderr=True), transient=True) as bar:
        task = bar.add_task(title, total=None)

        def report(progress: Progress) -> None:
            bar.update(
                task,
                description=f"{title}: {progress.step}",
                completed=progress.done,
                total=progress.total,
            )

        yield report


def tell(lines: Sequence[str]) -> None:
    """Print lines once each, in ASCII, so that no console is broken by a letter."""
    for line in dict.fromkeys(lines):
        print(line.encode("ascii", "backslashreplace").decode())
