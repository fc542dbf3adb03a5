"""One raw column, gathered block by block: as texts with a code each, or as numbers once texts would be too many."""

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
import pyarrow as pa
import pyarrow.compute as pc

from bnx.errors import DataError

__all__ = [
    "Gatherer",
    "NumberColumn",
    "Tally",
    "TextColumn",
    "array_numbers",
    "array_texts",
    "part_numbers",
    "plain_numbers",
    "tally",
    "typed_number",
]

NUMBER = r"^[+-]?(\d+(\.\d*)?|\.\d+)([eE][+-]?\d+)?$"
ZERO_PADDED = r"^[+-]?0\d+$"
TEXTS_AT_MOST = 1000  # distinct texts of a column of numbers that are kept apart; beyond, only their values are
FEW_NUMBERS = 20


@dataclass(frozen=True)
class TextColumn:
    """A column as text: ``codes`` (N,) unsigned, 0 for blank, k for ``texts[k - 1]``; texts in order of appearance."""

    name: str
    texts: tuple[str, ...]
    codes: np.ndarray

    def take(self, rows: np.ndarray) -> "TextColumn":
        """Keep some rows."""
        return TextColumn(self.name, self.texts, self.codes[rows])

    @property
    def blanks(self) -> np.ndarray:
        """Tell which rows are blank, bool (N,)."""
        return np.asarray(self.codes == 0)


@dataclass(frozen=True)
class NumberColumn:
    """A column as numbers: ``values`` (N,) float64, NaN for blank."""

    name: str
    values: np.ndarray

    def take(self, rows: np.ndarray) -> "NumberColumn":
        """Keep some rows."""
        return NumberColumn(self.name, self.values[rows])

    @property
    def blanks(self) -> np.ndarray:
        """Tell which rows are blank, bool (N,)."""
        return np.asarray(np.isnan(self.values))


@dataclass(frozen=True)
class Tally:
    """What a column holds: distinct values with their rows, and the count of blank cells.

    ``values`` (m,) float64 ascending, or for a text column the raw codes (m,) that occur; ``counts`` (m,) int64 rows.
    """

    values: np.ndarray
    counts: np.ndarray
    blanks: int


class Gatherer:
    """Gathers one column over the blocks of a source.

    A column counts as numeric if ``as_numbers`` says so or, when that is None, if every value is a plain number without
    zero padding and more than 20 are distinct. ``spoilt`` turns true when a column of numbers meets a text after its
    own texts were given up: it must be gathered again with ``as_numbers`` false.
    """

    def __init__(self, name: str, as_numbers: bool | None) -> None:
        self.name = name
        self.spoilt = False
        self._wish = as_numbers
        self._numbers = bool(as_numbers)
        self._index: dict[str, int] = {}
        self._chunks: list[np.ndarray] = []
        self._rows = 0
        self._typed = False

    def add(self, array: pa.Array) -> None:
        """Take the next block.

        Raises:
            DataError: a value of a numeric column is not a finite number, or the type of the column cannot be used.
        """
        self._typed = self._typed or (not self._rows and typed_number(array.type))
        if self._numbers and not self.spoilt:
            self._add_numbers(array)
        elif not self.spoilt:
            self._add_texts(array)
        self._rows += len(array)

    def finish(self) -> TextColumn | NumberColumn:
        """Hand over the column; the gatherer is empty afterwards."""
        if self._numbers:
            return NumberColumn(self.name, self._whole())
        if self._wish is None and len(self._index) > FEW_NUMBERS:
            values = self._values(tuple(self._index))
            if values is not None and len(np.unique(values)) > FEW_NUMBERS:
                return NumberColumn(self.name, np.concatenate([[np.nan], values])[self._whole()])
        return self.finish_texts()

    def finish_texts(self) -> TextColumn:
        """Hand over a column that was gathered with ``as_numbers`` false."""
        return TextColumn(self.name, tuple(self._index), self._whole())

    def _whole(self) -> np.ndarray:
        """Join the blocks."""
        chunks, self._chunks = self._chunks, []
        return np.concatenate(chunks) if chunks else np.zeros(0, dtype=np.uint8)

    def _add_texts(self, array: pa.Array) -> None:
        texts, codes = array_texts(array, self.name)
        index = self._index
        known = [0 if text is None else index.setdefault(text, len(index)) + 1 for text in texts]
        self._chunks.append(np.array(known, dtype=_narrowest(len(index)))[codes])
        if self._wish is None and len(index) > TEXTS_AT_MOST:
            self._give_up_texts()

    def _give_up_texts(self) -> None:
        """Go on with numbers if all texts so far are numbers, else stay with texts for good."""
        values = self._values(tuple(self._index))
        if values is None:
            self._wish = False
            return
        lookup = np.concatenate([[np.nan], values])
        self._chunks = [lookup[chunk] for chunk in self._chunks]
        self._index = {}
        self._numbers = True

    def _values(self, texts: tuple[str, ...]) -> np.ndarray | None:
        """Turn the texts so far into numbers if they all are; None if not.

        Raises:
            DataError: the column is one of numbers by type, and one is infinite.
        """
        values = plain_numbers(texts)
        if values is None and self._typed:
            raise DataError(
                f"the numeric column {self.name!r} holds an infinite number; "
                "every cell of it must hold a finite number or be blank"
            )
        return values

    def _add_numbers(self, array: pa.Array) -> None:
        values, wrong = array_numbers(array, self.name, padded=bool(self._wish))
        rows = np.flatnonzero(wrong)
        if not len(rows):
            self._chunks.append(values)
        elif self._wish is None and not self._typed:
            self.spoilt = True
            self._chunks = []
        else:
            value = array[int(rows[0])].as_py()
            raise DataError(
                f"row {self._rows + rows[0] + 1:,} has {str(value)!r} in the numeric column {self.name!r}; "
                "every cell of it must hold a finite number or be blank"
            )


def tally(column: TextColumn | NumberColumn) -> Tally:
    """Count the distinct values of a column."""
    if isinstance(column, NumberColumn):
        blanks = int(column.blanks.sum())
        values, counts = np.unique(column.values[~column.blanks] if blanks else column.values, return_counts=True)
        return Tally(values, counts, blanks)
    rows = np.bincount(column.codes, minlength=len(column.texts) + 1)
    present = np.flatnonzero(rows[1:]) + 1
    return Tally(present, rows[present], int(rows[0]))


def typed_number(kind: pa.DataType) -> bool:
    """Tell whether a type is that of numbers (integers, floats, decimals), also behind a dictionary."""
    if pa.types.is_dictionary(kind):
        return typed_number(kind.value_type)
    return bool(pa.types.is_integer(kind) or pa.types.is_floating(kind) or pa.types.is_decimal(kind))


def array_texts(array: pa.Array, name: str) -> tuple[list[str | None], np.ndarray]:
    """Split a block into its distinct texts and a code per row; None is blank, and the last of the texts.

    Numbers, dates and truth values become their usual text (3.0 becomes 3).

    Raises:
        DataError: the type of the column has no text.
    """
    dictionary, codes = _split(array, name)
    texts = dictionary.to_pylist()
    if typed_number(array.type):
        cells = [None if text in {None, "nan"} else text.removesuffix(".0") for text in texts]
    else:
        cells = [None if not text or text.isspace() else text for text in texts]
    return [*cells, None], codes


def array_numbers(array: pa.Array, name: str, padded: bool) -> tuple[np.ndarray, np.ndarray]:
    """Turn a block into numbers (rows,) float64, NaN where blank, and tell which rows hold something else, bool.

    Zero-padded integers are numbers only if ``padded``.

    Raises:
        DataError: the type of the column has no text.
    """
    if typed_number(array.type) and not pa.types.is_dictionary(array.type):
        values = array.cast(pa.float64(), safe=False).to_numpy(zero_copy_only=False) + 0.0
        return values, np.isinf(values)
    dictionary, codes = _split(array, name)
    trimmed = pc.utf8_trim_whitespace(dictionary)
    values, good = _numbers(trimmed, padded)
    filled = pc.greater(pc.utf8_length(trimmed), 0).fill_null(False).to_numpy(zero_copy_only=False)
    return np.append(values, np.nan)[codes], np.append(filled & ~good, False)[codes]


def _split(array: pa.Array, name: str) -> tuple[pa.Array, np.ndarray]:
    """Split a block into distinct texts and a code per row, one beyond the last text for null.

    A dictionary longer than the block (Parquet hands out that of all rows so far) is cut down to what the block uses.
    """
    try:
        plain = pa.types.is_dictionary(array.type) and len(array.dictionary) > len(array)
        table = array.dictionary_decode() if plain else array
        table = table if pa.types.is_dictionary(table.type) else table.dictionary_encode()
        dictionary, codes = table.dictionary, table.indices
        if dictionary.type != pa.string():
            dictionary = dictionary.cast(pa.string())
    except (pa.ArrowNotImplementedError, pa.ArrowInvalid):
        raise _no_text(name, array.type) from None
    if codes.null_count:
        codes = codes.cast(pa.int32()).fill_null(len(dictionary))
    return dictionary, codes.to_numpy(zero_copy_only=False)


def plain_numbers(texts: Sequence[str]) -> np.ndarray | None:
    """Turn texts into numbers, float64, if all of them are plain finite numbers without zero padding."""
    values, good = _numbers(pc.utf8_trim_whitespace(pa.array(texts, pa.string())), padded=False)
    return values if good.all() else None


def part_numbers(texts: Sequence[str]) -> np.ndarray:
    """Tell which texts are plain finite numbers (zero padding allowed), bool."""
    return _numbers(pc.utf8_trim_whitespace(pa.array(texts, pa.string())), padded=True)[1]


def _numbers(trimmed: pa.Array, padded: bool) -> tuple[np.ndarray, np.ndarray]:
    """Turn trimmed texts into float64, NaN where they are not finite numbers, and tell where they are."""
    fits = pc.match_substring_regex(trimmed, NUMBER)
    if not padded:
        fits = pc.and_not(fits, pc.match_substring_regex(trimmed, ZERO_PADDED))
    plain = pc.if_else(fits, trimmed, pa.scalar(None, pa.string()))
    values = plain.cast(pa.float64()).to_numpy(zero_copy_only=False) + 0.0
    good = np.isfinite(values)
    return np.where(good, values, np.nan), good


def _narrowest(most: int) -> type[np.unsignedinteger]:
    """Choose the narrowest unsigned type for codes up to ``most``."""
    if most < 1 << 8:
        return np.uint8
    return np.uint16 if most < 1 << 16 else np.uint32


def _no_text(name: str, kind: pa.DataType) -> DataError:
    """Say that a type cannot be used."""
    return DataError(
        f"column {name!r} is of type {kind}; "
        "a column must hold text, numbers, dates or truth values, or be named in ignore"
    )
