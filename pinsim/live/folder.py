"""The private folder: only this user can enter it, and it goes with the server."""

import contextlib
import os
import shutil
import tempfile
from pathlib import Path

_NAME = "pinsim-live-"


def private_folder() -> Path:
    """Make a folder that only this user can enter, and sweep up those of servers that were killed."""
    _sweep(Path(tempfile.gettempdir()))
    return Path(tempfile.mkdtemp(prefix=f"{_NAME}{os.getpid()}-"))


def _sweep(parent: Path) -> None:
    for old in parent.glob(f"{_NAME}*-*"):
        number = old.name.removeprefix(_NAME).partition("-")[0]
        # What is another user's, or is a link, is not ours to remove.
        with contextlib.suppress(OSError):
            ours = old.lstat().st_uid == os.getuid() and old.is_dir() and not old.is_symlink()
            if number.isdecimal() and ours and not _alive(int(number)):
                shutil.rmtree(old, ignore_errors=True)


def _alive(number: int) -> bool:
    try:
        os.kill(number, 0)
    except ProcessLookupError:
        return False
    except OSError:
        return True
    return True
