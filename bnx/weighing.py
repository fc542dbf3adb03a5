"""A column of weights: how many records each row stands for, or how much it weighs."""

import math
from dataclasses import dataclass
from typing import Any

import numpy as np
import pyarrow as pa

from bnx.blocks import array_numbers
from bnx.cells import Cells, stretches
from bnx.errors import DataError
from bnx.reading import Source, repeated
from bnx.storing import Store
from bnx.tables import Lines
from bnx.text import count_of

__all__ = ["RowWeights", "as_records", "checked_weights", "read_weights", "records_of", "scaled", "with_weight"]

_MOST = 1e15  # up to here and beyond, whole numbers are exact
_EXACT_BITS = 50  # of a sum of weights, which is at most twice the rows
_ROW_BYTES = 12  # of a row beside its codes: class, block, place


@dataclass(frozen=True)
class RowWeights:
    """The weights of a source, row by row.

    ``counts``: whether all are whole numbers, so that a row stands for so many records; ``total``: their sum;
    ``zeros``: rows of weight 0; ``values``: (rows read,) float64.
    """

    column: str
    counts: bool
    total: float
    zeros: int
    values: Cells

    @property
    def effective_rows(self) -> float:
        """Rows of equal weight that would be worth as much; of counts, the records.

        Source: Kish 1965 (effective sample size; from memory).
        """
        if self.counts:
            return self.total
        squares = sum(math.fsum((self.values.part(rows) / self.total) ** 2) for rows in stretches(len(self.values)))
        return 1 / squares

    @property
    def notes(self) -> list[str]:
        """Say what a reader must know about counts, and which rows are left out."""
        notes = []
        if self.zeros:
            was = "its" if self.zeros == 1 else "their"
            rows = count_of(self.zeros, "row")
            notes.append(f"{rows} of {len(self.values):,} left out because {was} weight in {self.column} is 0")
        if self.counts:
            notes.append(
                f"{count_of(len(self.values) - self.zeros, 'row')} stand for {count_of(int(self.total), 'record')}, as "
                f"{self.column} counts; the tests and the folds take each of these as an independent record: where "
                "they are copies of one, every p is descriptive, and scores are too good unless --group keeps them "
                "together"
            )
        else:
            notes.append(
                f"rows carry the weights of {self.column}; those read are worth {self.effective_rows:,.0f} of equal "
                "weight. Tables, smoothing, calibration and scores use them; structures, cut points, bits and tests "
                "are from rows counted once, so the tests are descriptive"
            )
        return notes

    def to_dict(self) -> dict[str, Any]:
        """Give plain values for JSON."""
        return {
            "column": self.column,
            "kind": "counts" if self.counts else "real",
            "rows": len(self.values),
            "left_out": self.zeros,
            "total": int(self.total) if self.counts else self.total,
            "effective_rows": self.effective_rows,
        }


def read_weights(source: Source, column: str, store: Store) -> RowWeights:
    """Read the weights of all rows.

    Raises:
        DataError: there is no such column, a weight is blank, no finite number or below 0, or all are 0.
    """
    values = Cells(store, np.float64, source.rows)
    whole, zeros = True, 0
    for batch in source.blocks([column]):
        numbers = checked_weights(batch.column(0), column, len(values))
        for part, room in values.add(len(numbers)):
            room[:] = numbers[part]
        whole = whole and bool((numbers == np.floor(numbers)).all())
        zeros += int(np.count_nonzero(numbers == 0))
    if zeros == len(values):
        raise DataError(f"the weight column {column!r} is 0 in every row; at least one row must have a weight above 0")
    total = sum(math.fsum(values.part(rows).tolist()) for rows in stretches(len(values)))
    return RowWeights(column, whole, total, zeros, values)


def checked_weights(array: pa.Array, column: str, before: int) -> np.ndarray:
    """Turn a block into weights; ``before``: rows that came before it.

    Raises:
        DataError: one cannot be used.
    """
    numbers, wrong = array_numbers(array, column, padded=True)
    faults = np.flatnonzero(wrong | ~((numbers >= 0) & (numbers <= _MOST)))
    if not len(faults):
        return numbers
    row = int(faults[0])
    blank = math.isnan(numbers[row]) and not wrong[row]
    what = "is blank" if blank else f"has {str(array[row].as_py())!r}"
    raise DataError(
        f"row {before + row + 1:,} {what} in the weight column {column!r}; "
        f"a weight must be a number from 0 to {_MOST:g}"
    )


def with_weight(weights: RowWeights, lines: Lines) -> Lines:
    """Leave out the rows of weight 0.

    Raises:
        DataError: no other row is left.
    """
    kept = lines.kept.copy() if len(lines.kept) else np.ones(lines.read, np.bool_)
    for rows in lines.stretches():
        kept[rows] &= weights.values.part(rows) > 0
    if not kept.any():
        raise DataError(f"no row is left: the weight in {weights.column} is 0 wherever the class is not blank")
    return Lines.marked(kept)


def scaled(weights: RowWeights, lines: Lines, store: Store) -> np.ndarray:
    """Scale the weights of the rows used to the mean 1, (N,) float64, so that amounts of smoothing keep their meaning.

    All are multiples of one power of 2, at least one of it and so many that every sum of some of them is exact: sums
    depend neither on an order nor on threads, and those of parts can be subtracted. With a billion rows a weight is
    rounded by less than a millionth.
    """
    rows = lines.count
    largest = max(float(weights.values.part(run).max()) for run in lines.stretches())
    parts = (lines.pick(run, weights.values.part(run)) / largest for run in lines.stretches())
    factor = rows / math.fsum(math.fsum(part.tolist()) for part in parts) / largest
    steps = 2.0 ** (_EXACT_BITS - rows.bit_length())
    out, done = store.empty((rows,), np.float64), 0
    for run in lines.stretches():
        own = lines.pick(run, weights.values.part(run))
        out[done : done + len(own)] = np.maximum(np.rint(own * factor * steps), 1.0) / steps
        done += len(own)
    return out


def records_of(source: Source, weights: RowWeights, attributes: int, store: Store) -> Source:
    """Take every row as often as its weight, which counts records.

    attributes: how many there are at most, each of which takes a byte a record at least.

    Raises:
        DataError: there is no room for so many records.
    """
    needed, room = weights.total * (attributes + _ROW_BYTES), store.room()
    if room is not None and needed > room:
        raise DataError(
            f"the whole numbers of the weight column {weights.column!r} count {weights.total:,.0f} records, which take "
            f"about {needed / 1e9:,.1f} GB, but there is room for {room / 1e9:,.1f} GB; --spill takes a folder with "
            "more room, and weights that count nothing should be divided by their mean"
        )
    return repeated(source, weights.column, int(weights.total))


def as_records(source: Source, like: RowWeights | None, attributes: int, store: Store) -> Source:
    """Take a further table as the first one was: by the counts in its column of the same name, if those were counts.

    Raises:
        DataError: there is no such column, or it holds something that cannot be used.
    """
    if like is None:
        return source
    weights = read_weights(source, like.column, store)
    if not like.counts:
        return source
    if not weights.counts:
        raise DataError(
            f"the weight column {like.column!r} of {source.name} holds numbers that are not whole, but it counts "
            "records in the first table; it must count them here too"
        )
    return records_of(source, weights, attributes, store)
