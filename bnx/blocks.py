"""A block of a source as distinct texts with a code per row, or as numbers."""

from collections.abc import Sequence

import numpy as np
import pyarrow as pa
import pyarrow.compute as pc

from bnx.errors import DataError

__all__ = [
    "array_numbers",
    "array_texts",
    "distinct_texts",
    "infinite_numbers",
    "part_numbers",
    "plain_numbers",
    "split",
    "typed_number",
]

NUMBER = r"^[+-]?(\d+(\.\d*)?|\.\d+)([eE][+-]?\d+)?$"
ZERO_PADDED = r"^[+-]?0\d+$"
INFINITE = r"(?i)^[+-]?inf(inity)?$"


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
    dictionary, codes = split(array, name)
    return distinct_texts(dictionary, typed_number(array.type)), codes


def distinct_texts(dictionary: pa.Array, typed: bool) -> list[str | None]:
    """List the texts of a dictionary and then that of null; None is blank. Numbers by type become their usual text."""
    texts = dictionary.to_pylist()
    if typed:
        cells = [None if text in {None, "nan"} else text.removesuffix(".0") for text in texts]
    else:
        cells = [None if not text or text.isspace() else text for text in texts]
    return [*cells, None]


def array_numbers(array: pa.Array, name: str, padded: bool) -> tuple[np.ndarray, np.ndarray]:
    """Turn a block into numbers (rows,) float64, NaN where blank, and tell which rows hold something else, bool.

    Zero-padded integers are numbers only if ``padded``.

    Raises:
        DataError: the type of the column has no text.
    """
    if typed_number(array.type) and not pa.types.is_dictionary(array.type):
        values = array.cast(pa.float64(), safe=False).to_numpy(zero_copy_only=False) + 0.0
        return values, np.isinf(values)
    dictionary, codes = split(array, name)
    trimmed = pc.utf8_trim_whitespace(dictionary)
    values, good = _numbers(trimmed, padded)
    filled = pc.greater(pc.utf8_length(trimmed), 0).fill_null(False).to_numpy(zero_copy_only=False)
    return np.append(values, np.nan)[codes], np.append(filled & ~good, False)[codes]


def split(array: pa.Array, name: str) -> tuple[pa.Array, np.ndarray]:
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


def infinite_numbers(texts: Sequence[str]) -> np.ndarray:
    """Tell which texts are numbers, but infinite ones: in words, or too large for float64; bool."""
    trimmed = pc.utf8_trim_whitespace(pa.array(texts, pa.string()))
    words = pc.match_substring_regex(trimmed, INFINITE).to_numpy(zero_copy_only=False)
    digits = pc.match_substring_regex(trimmed, NUMBER).to_numpy(zero_copy_only=False)
    return np.asarray(words | (digits & ~_numbers(trimmed, padded=True)[1]), np.bool_)


def _numbers(trimmed: pa.Array, padded: bool) -> tuple[np.ndarray, np.ndarray]:
    """Turn trimmed texts into float64, NaN where they are not finite numbers, and tell where they are."""
    fits = pc.match_substring_regex(trimmed, NUMBER)
    if not padded:
        fits = pc.and_not(fits, pc.match_substring_regex(trimmed, ZERO_PADDED))
    plain = pc.if_else(fits, trimmed, pa.scalar(None, pa.string()))
    values = plain.cast(pa.float64()).to_numpy(zero_copy_only=False) + 0.0
    good = np.isfinite(values)
    return np.where(good, values, np.nan), good


def _no_text(name: str, kind: pa.DataType) -> DataError:
    """Say that a type cannot be used."""
    return DataError(
        f"column {name!r} is of type {kind}; "
        "a column must hold text, numbers, dates or truth values, or be named in ignore"
    )
