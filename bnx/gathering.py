"""A column gathered block by block: as texts with a code each, or as numbers once texts would be too many."""

from collections.abc import Callable
from dataclasses import dataclass
from itertools import islice

import numpy as np
import pyarrow as pa

from bnx.blocks import (
    array_numbers,
    distinct_texts,
    infinite_numbers,
    part_numbers,
    plain_numbers,
    split,
    typed_number,
)
from bnx.cells import Cells, stretches
from bnx.columns import Column, NumberColumn, TextColumn
from bnx.errors import DataError
from bnx.storing import Store

__all__ = ["Gatherer"]

TEXTS_AT_MOST = 1000  # distinct texts of a column of numbers that are kept apart; beyond, only their values are
FEW_NUMBERS = 20
_FIRST = 64  # texts that tell most columns of words from those of numbers


@dataclass(frozen=True)
class Known:
    """The distinct texts of the latest block, and the codes of these and of null: blocks often share their texts."""

    dictionary: pa.Array
    codes: np.ndarray


class Gatherer:
    """Gathers one column over the blocks of a source.

    A column counts as numeric if ``as_numbers`` says so or, when that is None, if every value is a plain number without
    zero padding and more than 20 are distinct. ``spoilt`` turns true when a column of numbers meets a text after its
    own texts were given up: it must be gathered again with ``as_numbers`` false. ``row_of`` finds the row of the source
    that a refusal names.
    """

    def __init__(
        self,
        name: str,
        as_numbers: bool | None,
        store: Store,
        expected: int,
        row_of: Callable[[int], int] = lambda row: row,
    ) -> None:
        self.name = name
        self.spoilt = False
        self._row_of = row_of
        self._wish = as_numbers
        self._numbers = bool(as_numbers)
        self._index: dict[str, int] = {}
        self._cells = Cells(store, np.float64 if as_numbers else np.uint8, expected)
        self._typed = False
        self._known = Known(pa.array([], pa.string()), np.zeros(1, np.uint8))

    def add(self, array: pa.Array) -> None:
        """Take the next block.

        Raises:
            DataError: a value of a numeric column is not a finite number, or the type of the column cannot be used.
        """
        self._typed = self._typed or (not self._cells and typed_number(array.type))
        if self._numbers and not self.spoilt:
            self._add_numbers(array)
        elif not self.spoilt:
            self._add_texts(array)

    def finish(self) -> Column:
        """Hand over the column."""
        if self._numbers:
            return NumberColumn(self.name, np.zeros(0), self._cells)
        if self._wish is None and len(self._index) > FEW_NUMBERS:
            values = self._values(tuple(self._index))
            if values is not None and len(np.unique(values)) > FEW_NUMBERS:
                return NumberColumn(self.name, np.concatenate([[np.nan], values]), self._cells)
        return self.finish_texts()

    def finish_texts(self) -> TextColumn:
        """Hand over a column that was gathered with ``as_numbers`` false."""
        return TextColumn(self.name, tuple(self._index), self._cells)

    def refuse_infinite(self) -> None:
        """Refuse a column that is text by type and would be numeric, were it not for infinite numbers.

        Raises:
            DataError: naming the first of them.
        """
        some = list(islice(self._index, _FIRST))
        if self._typed or not (part_numbers(some) | infinite_numbers(some)).all():
            return
        texts = list(self._index)
        infinite = infinite_numbers(texts)
        if not infinite.any():
            return
        values = plain_numbers([text for text, one in zip(texts, infinite.tolist(), strict=True) if not one])
        if values is not None and len(np.unique(values)) > FEW_NUMBERS:
            plain = self._no_number(*self._first(infinite))
            raise DataError(f"{plain}; --categorical {self.name} would take its values as levels")

    def _add_texts(self, array: pa.Array) -> None:
        dictionary, codes = split(array, self.name)
        if not dictionary.equals(self._known.dictionary):
            self._known = Known(dictionary, self._learn(dictionary, typed_number(array.type)))
        known = self._known.codes
        for part, room in self._cells.add(len(codes)):
            np.take(known, codes[part], out=room, mode="clip")
        if self._wish is None and len(self._index) > TEXTS_AT_MOST:
            self._give_up_texts()

    def _learn(self, dictionary: pa.Array, typed: bool) -> np.ndarray:
        """Give each text its code, new ones the next; cells take a wider type once they must."""
        index = self._index
        texts = distinct_texts(dictionary, typed)
        codes = [0 if text is None else index.setdefault(text, len(index)) + 1 for text in texts]
        kind = np.dtype(_narrowest(len(index)))
        if kind != self._cells.kind:
            self._cells = self._cells.to(kind)
        return np.array(codes, kind)

    def _give_up_texts(self) -> None:
        """Go on with numbers if all texts so far are numbers, else stay with texts for good."""
        values = self._values(tuple(self._index))
        if values is None:
            self._wish = False
            return
        self._cells = self._cells.to(np.float64, np.concatenate([[np.nan], values]))
        self._index = {}
        self._numbers = True

    def _values(self, texts: tuple[str, ...]) -> np.ndarray | None:
        """Turn the texts so far into numbers if they all are; None if not.

        Raises:
            DataError: the column is one of numbers by type, and one is infinite.
        """
        values = plain_numbers(texts)
        if values is None and self._typed:
            raise self._no_number(*self._first(~part_numbers(texts)))
        return values

    def _first(self, marked: np.ndarray) -> tuple[int, str]:
        """Find the first cell whose text is among those marked: its record, and the text."""
        texts = list(self._index)
        codes = np.flatnonzero(marked) + 1
        for rows in stretches(len(self._cells)):
            cells = self._cells.part(rows)
            found = np.flatnonzero(np.isin(cells, codes))
            if len(found):
                return rows.start + int(found[0]), texts[int(cells[found[0]]) - 1]
        raise AssertionError("every text has a cell")

    def _no_number(self, record: int, text: str) -> DataError:
        """Say which cell of a numeric column holds something else."""
        return DataError(
            f"row {self._row_of(record) + 1:,} has {text!r} in the numeric column {self.name!r}; "
            "every cell of it must hold a finite number or be blank"
        )

    def _add_numbers(self, array: pa.Array) -> None:
        values, wrong = array_numbers(array, self.name, padded=bool(self._wish))
        rows = np.flatnonzero(wrong)
        if not len(rows):
            for part, room in self._cells.add(len(values)):
                room[:] = values[part]
        elif self._wish is None and not self._typed:
            self.spoilt = True
            self._cells.clear()
        else:
            raise self._no_number(len(self._cells) + int(rows[0]), str(array[int(rows[0])].as_py()))


def _narrowest(most: int) -> type[np.unsignedinteger]:
    """Choose the narrowest unsigned type for codes up to ``most``."""
    if most < 1 << 8:
        return np.uint8
    return np.uint16 if most < 1 << 16 else np.uint32
