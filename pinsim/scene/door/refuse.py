"""One line for each file that cannot be read: what, where, how to mend it."""

import os
import sys
from collections.abc import Iterator
from contextlib import contextmanager, redirect_stdout
from io import StringIO
from pathlib import Path

from pinsim.errors import SceneError

MAX_PIXELS = (
    300_000_000  # panoramas have 200 million; a file that claims more is likelier an attack
)


def require_file(path: Path, kind: str) -> None:
    """Raise SceneError unless there is a file with something in it."""
    try:
        size = path.stat().st_size
    except OSError as problem:
        if isinstance(problem, FileNotFoundError | NotADirectoryError):
            raise SceneError(f"{path}: no such file; give the path of a {kind}.") from None
        raise SceneError(f"{path} cannot be read: {problem.strerror}.") from None
    if path.is_dir():
        raise SceneError(f"{path} is a folder; give one {kind} in it.")
    if size == 0:
        raise SceneError(f"{path} is empty (0 bytes); copy the {kind} again.")
    if not os.access(path, os.R_OK):
        raise SceneError(f"{path} cannot be read; check its permissions.")


def refuse_large(path: Path, kind: str, pixels: int) -> None:
    """Raise SceneError for a picture of more than MAX_PIXELS."""
    if pixels > MAX_PIXELS:
        raise too_large(path, kind, pixels)


def too_large(path: Path, kind: str, pixels: int) -> SceneError:
    """Return the error for a picture of too many pixels."""
    return SceneError(
        f"{path}: {pixels / 1e6:.0f} megapixels is more than the {MAX_PIXELS / 1e6:.0f} that "
        f"pinsim opens; shrink the {kind} first (6000 px wide is ample)."
    )


def damaged(path: Path, kind: str, problem: BaseException | str) -> SceneError:
    """Return the error for a file whose decoder gave up."""
    return SceneError(
        f"{path} is damaged or cut short ({reason(problem)}); copy or export the {kind} again."
    )


def foreign(path: Path, kind: str) -> SceneError:
    """Return the error for a file of no kind that is known here."""
    return SceneError(
        f"{path} is not a picture that pinsim reads; export the {kind} as JPEG, PNG or TIFF."
    )


def missing_extra(path: Path, what: str, extra: str, instead: str) -> SceneError:
    """Return the error for a kind of file whose package is not installed."""
    return SceneError(f"{path} is {what}: pip install 'pinsim[{extra}]' to read it, or {instead}.")


def reason(problem: BaseException | str) -> str:
    """Return a decoder's own words as one line of ASCII."""
    text = str(problem)
    if isinstance(problem, Exception) and problem.args and isinstance(problem.args[0], bytes):
        text = problem.args[0].decode("ascii", "replace")
    return ascii(" ".join(text.split()) or type(problem).__name__)[1:-1].rstrip(".")


@contextmanager
def quiet() -> Iterator[None]:
    """Keep what C libraries print beside their errors off the user's terminal.

    Two of them write to file descriptor 2 and cannot be told not to; the error itself still comes.
    """
    try:
        sys.stderr.flush()
        kept = os.dup(2)
    except (OSError, ValueError, AttributeError):  # no stderr at all, as in a windowed program
        with redirect_stdout(StringIO()):
            yield
        return
    nowhere = os.open(os.devnull, os.O_WRONLY)
    try:
        os.dup2(nowhere, 2)
        with redirect_stdout(StringIO()):
            yield
    finally:
        os.dup2(kept, 2)
        os.close(kept)
        os.close(nowhere)
