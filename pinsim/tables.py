"""Reading TOML tables strictly: every key is asked for by name, and what is left over is an error."""

import difflib
import tomllib
from collections.abc import Collection
from pathlib import Path
from typing import Any

from pinsim.errors import PinsimError, nearest

# How alike two keys must be to take one for the other misspelt: diametr and diameter are 0.93 alike,
# tone and hole, both right, 0.5.
_SLIP = 0.65


def read_toml(path: Path, error: type[PinsimError], kind: str) -> dict[str, Any]:
    """Read a TOML file; raise `error`, in one line, when it is missing, empty or not TOML."""
    try:
        # Some editors put a byte order mark before the text; "-sig" drops it.
        text = path.read_bytes().decode("utf-8-sig")
    except (FileNotFoundError, NotADirectoryError):
        raise error(f"{path}: no such file; give the path of a {kind}.") from None
    except IsADirectoryError:
        raise error(f"{path} is a folder; give the {kind} inside it.") from None
    except UnicodeDecodeError:
        raise error(f"{path} is not text in UTF-8; a {kind} is a TOML file.") from None
    except OSError as problem:
        raise error(f"{path} cannot be read: {problem.strerror}.") from None
    if not text.strip():
        raise error(f"{path} is empty; a {kind} is a TOML file, see docs/files.md.")
    try:
        return tomllib.loads(text)
    except (ValueError, RecursionError) as problem:
        # What is no TOMLDecodeError is a number or a nesting too long to be meant.
        known = isinstance(problem, tomllib.TOMLDecodeError)
        reason = str(problem) if known else "a value in it is far too long"
        raise error(
            f"{path} is not valid TOML: {reason}. Text values stand in quotation marks."
        ) from None


class Table:
    """One table of a TOML file, with its place for error texts. Keys are taken out one by one."""

    def __init__(self, values: Any, where: str, error: type[PinsimError]) -> None:
        if not isinstance(values, dict):
            raise error(
                f"{where} is {values!r}; it must be a table: its name in brackets on a line of its "
                "own, its keys below."
            )
        self.where = where
        self.error = error
        self._left = dict(values)
        self._asked: set[str] = set()

    def has(self, key: str) -> bool:
        """Tell whether the key is there and not yet taken."""
        self._asked.add(key)
        return key in self._left

    def take(self, key: str, default: Any = None) -> Any:
        """Take a value out, or the default."""
        self._asked.add(key)
        return self._left.pop(key, default)

    def need(self, key: str, example: str) -> Any:
        """Take a value out; a missing one is an error that shows how it would be written."""
        if not self.has(key):
            # A slip of spelling is likelier than a forgotten line, so name it first.
            self.refuse_slip(key)
            raise self.error(f"{self.place(key)} is missing; write for example: {key} = {example}")
        return self.take(key)

    def text(self, key: str, default: str, allowed: Collection[str] | None = None) -> str:
        """Take a text out, from a closed list if one is given."""
        value = self.take(key, default)
        if not isinstance(value, str):
            raise self.error(f"{self.place(key)} is {value!r}; it must be text in quotation marks.")
        if allowed is not None and value not in allowed:
            known = ", ".join(sorted(allowed))
            raise self.error(
                f"{self.place(key)} is {value!r}; it must be one of: {known}."
                + nearest(value, allowed)
            )
        return value

    def table(self, key: str) -> "Table":
        """Take a table out; a missing one is empty."""
        if not self.has(key):
            self.refuse_slip(key)
        return Table(self.take(key, {}), f"{self.where} [{key}]", self.error)

    def place(self, key: str) -> str:
        """Return where a key stands, for error texts."""
        return f"{self.where}: {key}"

    def refuse_slip(self, missing: str) -> None:
        """Raise when a key nobody asked for looks like the missing one misspelt."""
        for key in sorted(self._left.keys() - self._asked):
            if difflib.SequenceMatcher(None, key, missing).ratio() >= _SLIP:
                raise self.error(f"{self.where}: unknown key {key!r}. Did you mean {missing!r}?")

    def refuse_leftovers(self) -> None:
        """Raise for a key nobody asked for, naming the nearest that is known here."""
        known = sorted(self._asked)
        for key in sorted(self._left.keys() - self._asked):
            raise self.error(
                f"{self.where}: unknown key {key!r}.{nearest(key, known)} "
                f"Known here: {', '.join(known)}."
            )
