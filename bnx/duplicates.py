"""Rows that repeat an earlier one: found by a hash of 64 bits per row, in bounded memory."""

from collections.abc import Sequence
from concurrent.futures import ThreadPoolExecutor
from functools import partial

import numpy as np

from bnx.columns import Column, NumberColumn
from bnx.folds import keyed_hash
from bnx.tables import Lines

__all__ = ["count_duplicates"]

_HASHES = 1 << 25  # hashes that are held at a time, at most, if they are spread as they should be


def count_duplicates(columns: Sequence[Column], lines: Lines, jobs: int) -> int:
    """Count the rows that repeat an earlier row in all columns, by sums of 64-bit hashes.

    Many rows are looked through several times, each time for the hashes of one range. Among a million rows a chance
    match turns up in about one table of 37 million.

    Source: the mixing function of SplitMix64, Steele, Lea & Flood 2014 (constants from memory).
    """
    tables = [_lookup(position, column) for position, column in enumerate(columns)]
    ranges = max(1, -(-lines.count // _HASHES))
    distinct = 0
    with ThreadPoolExecutor(jobs) as pool:
        for number in range(ranges):
            look = partial(_different, columns, tables, lines, number, ranges)
            distinct += _count_different(list(pool.map(look, lines.stretches())))
    return lines.count - distinct


def _lookup(position: int, column: Column) -> np.ndarray:
    """Hash everything that the cells of a column can be; nothing for numbers, which are hashed as they come."""
    if isinstance(column, NumberColumn):
        return keyed_hash(position, column.values.view(np.uint64))
    return keyed_hash(position, np.arange(len(column.texts) + 1, dtype=np.uint64))


def _different(
    columns: Sequence[Column], tables: Sequence[np.ndarray], lines: Lines, number: int, ranges: int, rows: slice
) -> np.ndarray:
    """List the different hashes of a stretch that lie in one of several ranges."""
    total = np.zeros(rows.stop - rows.start, np.uint64)
    terms = np.empty_like(total)
    for position, (column, table) in enumerate(zip(columns, tables, strict=True)):
        cells = column.cells.part(rows)
        if len(table):
            total += np.take(table, cells, out=terms, mode="clip")
        else:
            blank = np.isnan(cells)
            total += keyed_hash(position, np.where(blank, np.nan, cells).view(np.uint64))
    total = lines.pick(rows, total)
    if ranges > 1:
        total = total[total % np.uint64(ranges) == number]
    total.sort()
    return np.asarray(total[_first_of_equals(total)])


def _count_different(parts: list[np.ndarray]) -> int:
    """Count the different hashes of all stretches; the parts are used up, so that hardly more than one copy is held."""
    joined = np.empty(sum(map(len, parts)), np.uint64)
    filled = 0
    while parts:
        part = parts.pop()
        joined[filled : filled + len(part)] = part
        filled += len(part)
    joined.sort()
    return int(np.count_nonzero(_first_of_equals(joined)))


def _first_of_equals(ordered: np.ndarray) -> np.ndarray:
    """Mark the first of each run of equal values, bool."""
    first = np.ones(len(ordered), np.bool_)
    np.not_equal(ordered[1:], ordered[:-1], out=first[1:])
    return first
