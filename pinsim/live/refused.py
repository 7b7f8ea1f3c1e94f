"""What is answered to a request that cannot be: a status, one line, and the field that is to blame."""

import re
import unicodedata
from typing import Any

# What a line of the command line is told besides; the page has fields of its own.
_OPTIONS = re.compile(r" \(--[^()]*\)")


class RefusedError(Exception):
    """A request that cannot be answered; its text is one line for people.

    status : HTTP's number. field : the key of the state that is wrong. needs : what the page should ask
    for: "view", "light", "map" or "scene". errors : a text for each field, where several are wrong.
    """

    def __init__(
        self,
        text: str,
        *,
        status: int = 422,
        field: str | None = None,
        needs: str | None = None,
        errors: dict[str, str] | None = None,
    ) -> None:
        super().__init__(text)
        self.status = status
        self.field = field
        self.needs = needs
        self.errors = errors or ({field: text} if field else {})

    def plain(self) -> dict[str, Any]:
        """Return it as JSON takes it."""
        return {
            "error": plain_line(str(self)),
            "field": self.field,
            "needs": self.needs,
            "errors": {key: plain_line(text) for key, text in self.errors.items()},
        }


class SupersededError(Exception):
    """A newer request has come, or nobody waits any more; raised to stop the work."""


def plain_line(text: str) -> str:
    """Return a message for the page: one line of ASCII, of a bounded length, without options' names."""
    line = " ".join(_OPTIONS.sub("", text).split()).encode("ascii", "backslashreplace").decode()
    return line if len(line) <= 600 else f"{line[:600]}..."


def shown_name(name: str) -> str:
    """Return a file's name as messages write it: ASCII, accents dropped, of a bounded length."""
    bare = unicodedata.normalize("NFKD", name.replace("\\", "/").rpartition("/")[2])
    bare = "".join(one for one in bare if one.isprintable() and not unicodedata.combining(one))
    return bare.encode("ascii", "replace").decode()[-80:]
