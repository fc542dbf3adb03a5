"""What must be undone if the program is stopped from outside before it is finished."""

from collections.abc import Callable, Iterator
from contextlib import contextmanager

__all__ = ["undo_all", "unfinished"]

_PENDING: list[Callable[[], None]] = []


@contextmanager
def unfinished(undo: Callable[[], None]) -> Iterator[None]:
    """Remember, while the block runs, what ``undo_all`` has to undo; the block's own clean-up is its own affair."""
    _PENDING.append(undo)
    try:
        yield
    finally:
        _PENDING.remove(undo)


def undo_all() -> None:
    """Undo everything that is unfinished, the latest first."""
    for undo in reversed(_PENDING):
        undo()
