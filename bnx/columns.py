"""One raw column, as texts with a code each or as numbers, and what it holds."""

import math
from dataclasses import dataclass

import numpy as np

from bnx.cells import Cells, stretches
from bnx.discretising import fine_cuts, ordered_cuts
from bnx.kernels import count_cells
from bnx.storing import Store
from bnx.tables import Lines

__all__ = ["FINE_LEVELS", "Column", "Extent", "NumberColumn", "Tally", "TextColumn", "tally"]

FINE_LEVELS = 256
_NO_RECODE = np.zeros((1, 1), np.int32)


@dataclass(frozen=True)
class TextColumn:
    """A column as text: code 0 for blank, k for ``texts[k - 1]``; texts in order of appearance."""

    name: str
    texts: tuple[str, ...]
    cells: Cells

    def blanks(self, rows: slice) -> np.ndarray:
        """Tell which rows of a stretch are blank, bool."""
        return np.asarray(self.cells.part(rows) == 0)


@dataclass(frozen=True)
class NumberColumn:
    """A column as numbers, NaN for blank: float64 themselves, or if ``values`` has any, codes into those."""

    name: str
    values: np.ndarray
    cells: Cells

    @property
    def coded(self) -> bool:
        """Tell whether the cells are codes."""
        return len(self.values) > 0

    def numbers(self, rows: slice) -> np.ndarray:
        """Give the numbers of a stretch, float64."""
        cells = self.cells.part(rows)
        return np.asarray(self.values[cells]) if self.coded else cells

    def blanks(self, rows: slice) -> np.ndarray:
        """Tell which rows of a stretch are blank, bool."""
        return np.asarray(np.isnan(self.numbers(rows)))


Column = TextColumn | NumberColumn


@dataclass(frozen=True)
class Extent:
    """How many different values a column holds; the lowest and the highest of numbers, NaN without any."""

    distinct: int
    lowest: float = math.nan
    highest: float = math.nan

    @classmethod
    def of(cls, ordered: np.ndarray, distinct: int) -> "Extent":
        """Take the ends of sorted numbers."""
        return cls(distinct, float(ordered[0]), float(ordered[-1])) if len(ordered) else cls(distinct)


@dataclass(frozen=True)
class Tally:
    """What a column holds: distinct values with their rows, and the count of blank cells.

    ``values`` (m,) float64 ascending, or for a text column the raw codes (m,) that occur; ``counts`` (m,) int64 rows.
    Of measurements of more than 256 values, only the ``extent``, ``whole`` (whether all are whole numbers) and the fine
    ``cuts`` are kept.
    """

    values: np.ndarray
    counts: np.ndarray
    blanks: int
    extent: Extent
    filled: int
    whole: bool
    cuts: np.ndarray

    @property
    def distinct(self) -> int:
        """Count the different values."""
        return self.extent.distinct


def tally(column: Column, lines: Lines, store: Store) -> Tally:
    """Count the distinct values of a column in the rows used."""
    if isinstance(column, NumberColumn):
        return _tally_numbers(column, lines, store)
    rows = _count_codes(column.cells, len(column.texts) + 1, lines)
    present = np.flatnonzero(rows[1:]) + 1
    counts = rows[present]
    return Tally(present, counts, int(rows[0]), Extent(len(present)), int(counts.sum()), False, np.zeros(0))


def _count_codes(cells: Cells, size: int, lines: Lines) -> np.ndarray:
    """Count the rows of each code, int64 (size,)."""
    total = np.zeros(size, np.int64)
    for rows in lines.stretches():
        codes = lines.pick(rows, cells.part(rows))
        if cells.kind.itemsize > 2:
            np.add.at(total, codes, 1)
            continue
        found = np.zeros((1, size), np.int32)
        ends = np.array([0, len(codes)])
        count_cells(codes[None], _NO_RECODE, True, np.array([0]), np.array([size]), ends, np.array([0]), found)
        total += found[0]
    return total


def _tally_numbers(column: NumberColumn, lines: Lines, store: Store) -> Tally:
    if column.coded:
        rows = _count_codes(column.cells, len(column.values), lines)
        used = np.flatnonzero(rows[1:]) + 1
        values, place = np.unique(column.values[used], return_inverse=True)
        counts = np.zeros(len(values), np.int64)
        np.add.at(counts, place, rows[used])
        cuts = fine_cuts(values, counts, FINE_LEVELS - (rows[0] > 0))
        whole = bool(np.all(values == np.floor(values)))
        extent = Extent.of(values, len(values))
        return Tally(values, counts, int(rows[0]), extent, int(counts.sum()), whole, cuts)
    ordered = _in_order(column.cells, lines, store)
    blanks = lines.count - len(ordered)
    distinct, whole = _described(ordered)
    cuts = ordered_cuts(ordered, distinct, FINE_LEVELS - (blanks > 0))
    few = ordered[: len(ordered) if distinct <= FINE_LEVELS else 0]
    values, counts = np.unique(few, return_counts=True)
    return Tally(values, counts, blanks, Extent.of(ordered, distinct), len(ordered), whole, cuts)


def _described(ordered: np.ndarray) -> tuple[int, bool]:
    """Count the different numbers among sorted ones, and tell whether all are whole."""
    distinct, whole = int(len(ordered) > 0), True
    for rows in stretches(len(ordered)):
        own = ordered[rows]
        distinct += int(np.count_nonzero(own[1:] != own[:-1]))
        distinct += int(rows.start > 0 and own[0] != ordered[rows.start - 1])
        whole = whole and bool(np.all(own == np.floor(own)))
    return distinct, whole


def _in_order(cells: Cells, lines: Lines, store: Store) -> np.ndarray:
    """Sort the numbers that are not blank."""
    ordered = store.empty((lines.count,), np.float64)
    filled = 0
    for rows in lines.stretches():
        numbers = lines.pick(rows, cells.part(rows))
        numbers = numbers[~np.isnan(numbers)]
        ordered[filled : filled + len(numbers)] = numbers
        filled += len(numbers)
    ordered[:filled].sort()
    return ordered[:filled]
