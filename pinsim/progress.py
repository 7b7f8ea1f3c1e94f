"""How a long computation tells how far it is: a callback, which may raise to stop it."""

from collections.abc import Callable
from dataclasses import dataclass


@dataclass(frozen=True, slots=True)
class Progress:
    """`done` of `total` steps are finished; `step` says in words what comes next."""

    done: int
    total: int
    step: str


Reporter = Callable[[Progress], None]


def ignore(progress: Progress) -> None:
    """Report to nobody."""
