"""The coded table: every cell a small integer, one contiguous line of codes per attribute."""

from collections.abc import Iterator
from dataclasses import dataclass

import numpy as np

from bnx.cells import stretches
from bnx.domains import Schema

__all__ = ["CodedTable", "LeftOut", "Lines"]


@dataclass(frozen=True)
class LeftOut:
    """A column that takes no part, and why (a phrase that can follow the name in brackets)."""

    name: str
    reason: str


@dataclass(frozen=True)
class Lines:
    """Which of the 0-based lines of data in a source are rows of a table.

    ``read``: lines of the source; ``count``: rows, which are all lines unless ``kept`` (read,) bool marks them (of no
    length if it does not).
    """

    read: int
    count: int
    kept: np.ndarray

    @classmethod
    def all(cls, read: int) -> "Lines":
        """Take every line."""
        return cls(read, read, np.zeros(0, np.bool_))

    @classmethod
    def marked(cls, kept: np.ndarray) -> "Lines":
        """Take the lines that are marked, (read,) bool."""
        count = int(np.count_nonzero(kept))
        return cls(len(kept), count, kept) if count < len(kept) else cls.all(count)

    def pick(self, lines: slice, values: np.ndarray) -> np.ndarray:
        """Take those values of a run of lines that belong to rows."""
        return values[self.kept[lines]] if len(self.kept) else values

    def stretches(self) -> Iterator[slice]:
        """Cut the lines of the source into stretches."""
        return stretches(self.read)

    def parts(self, length: int) -> Iterator[tuple[slice, slice]]:
        """Cut the lines of the source into runs of one length, and tell which rows each holds: (lines, rows)."""
        done = 0
        for first in range(0, self.read, length):
            lines = slice(first, min(first + length, self.read))
            rows = int(np.count_nonzero(self.kept[lines])) if len(self.kept) else lines.stop - first
            yield lines, slice(done, done + rows)
            done += rows

    def of_rows(self, first: int, last: int) -> np.ndarray:
        """List the lines of the rows ``first:last``, int64."""
        return np.flatnonzero(self.kept)[first:last] if len(self.kept) else np.arange(first, last)

    def numbers(self, lines: slice | None = None) -> np.ndarray:
        """List the lines of rows, int64, within a run of lines or all."""
        run = lines or slice(0, self.read)
        if len(self.kept):
            return np.asarray(np.flatnonzero(self.kept[run]) + run.start)
        return np.arange(run.start, run.stop)


@dataclass(frozen=True)
class CodedTable:
    """Rows as codes.

    ``codes`` (n, N) uint8 or uint16, C-contiguous: code of attribute i in row j under ``schema.attributes[i]``.
    ``target`` (N,) uint8: code of the class. ``lines``: where the rows stand in the source.
    Numeric columns hold up to 256 fine bins and columns with very many levels hold all of them; each training fold
    merges those into its own cut points and pooled levels (`Coarsening`). ``weights`` (N,) float64: of rows that do not
    count alike, else None; their mean is 1, and their sums are exact in any order (`weighing.scaled`).
    """

    schema: Schema
    codes: np.ndarray
    target: np.ndarray
    lines: Lines
    weights: np.ndarray | None = None
