"""One value per row, gathered and read a stretch of rows at a time, so that no pass needs memory for all rows."""

from bisect import bisect_right
from collections.abc import Iterator

import numpy as np
from numpy.typing import DTypeLike

from bnx.storing import Store

__all__ = ["STRETCH", "Cells", "stretches"]

STRETCH = 1 << 16  # rows handled at a time
_FILLED = 1 << 22  # cells that are filled in before their pages are let go
_LONGEST = 1 << 25  # cells of a piece, at most, while nobody knows how many are to come


def stretches(rows: int) -> Iterator[slice]:
    """Cut rows into stretches."""
    for first in range(0, rows, STRETCH):
        yield slice(first, min(first + STRETCH, rows))


class Cells:
    """A growing line of values of one type, in pieces that are whole stretches, so that a stretch is never split.

    expected: how many are to come, 0 if nobody knows.
    """

    def __init__(self, store: Store, kind: DTypeLike, expected: int = 0) -> None:
        self._store = store
        self._expected = expected
        self.kind = np.dtype(kind)
        self._pieces: list[np.ndarray] = []
        self._starts: list[int] = []
        self._rows = 0
        self._room = 0

    def __len__(self) -> int:
        """Count the values."""
        return self._rows

    def add(self, rows: int) -> Iterator[tuple[slice, np.ndarray]]:
        """Make room for more rows: parts of them, with the values that are to be filled in."""
        done = 0
        while done < rows:
            if self._rows == self._room:
                self._add_piece()
            place = self._rows - self._starts[-1]
            step = min(rows - done, self._room - self._rows)
            self._rows += step
            yield slice(done, done + step), self._pieces[-1][place : place + step]
            done += step
            if (place + step) // _FILLED > place // _FILLED:
                self._store.let_go(self._pieces[-1][(place // _FILLED) * _FILLED : place + step])

    def part(self, rows: slice) -> np.ndarray:
        """Give the values of a stretch, or of rows inside one."""
        number = bisect_right(self._starts, rows.start) - 1
        start = self._starts[number]
        return self._pieces[number][rows.start - start : rows.stop - start]

    def to(self, kind: DTypeLike, lookup: np.ndarray | None = None) -> "Cells":
        """Copy all values to another type, or look each up in a table; this line is empty afterwards."""
        copy = Cells(self._store, kind, self._expected)
        for piece in stretches(self._rows):
            values = self.part(piece)
            for part, room in copy.add(len(values)):
                room[:] = values[part] if lookup is None else lookup[values[part]]
        self.clear()
        return copy

    def clear(self) -> None:
        """Give all memory back."""
        self.let_go()
        self._pieces, self._starts, self._rows, self._room = [], [], 0, 0

    def let_go(self) -> None:
        """Say that the values are not read for a while."""
        for piece in self._pieces:
            self._store.let_go(piece)

    def _add_piece(self) -> None:
        """Take a piece for all rows expected; with more than those, or none, as many as there are already."""
        size = self._expected if not self._room else 0
        size = size or min(max(self._room, STRETCH), _LONGEST)
        size = -(-size // STRETCH) * STRETCH
        self._pieces.append(self._store.empty((size,), self.kind))
        self._starts.append(self._room)
        self._room += size
