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
_BUCKETS = 4  # bits: those of one pass are sorted in so many parts


def count_duplicates(columns: Sequence[Column], lines: Lines, jobs: int) -> int:
    """Count the rows that repeat an earlier row in all columns, by sums of 64-bit hashes.

    Many rows are looked through several times, each time for the hashes that begin with certain bits. Among a million
    rows a chance match turns up in about one table of 37 million.

    Source: the mixing function of SplitMix64, Steele, Lea & Flood 2014 (constants from memory).
    """
    tables = [_lookup(position, column) for position, column in enumerate(columns)]
    bits = max(0, (lines.count - 1).bit_length() - (_HASHES - 1).bit_length())
    distinct = 0
    with ThreadPoolExecutor(jobs) as pool:
        for number in range(1 << bits):
            parts = list(pool.map(partial(_different, columns, tables, lines, number, bits), lines.stretches()))
            edges = [(number << _BUCKETS) + bucket << 64 - bits - _BUCKETS for bucket in range(1 << _BUCKETS)]
            distinct += sum(pool.map(partial(_count_different, parts), edges, [*edges[1:], None]))
            for column in columns:
                column.cells.let_go()
    return lines.count - distinct


def _lookup(position: int, column: Column) -> np.ndarray:
    """Hash everything that the cells of a column can be; nothing for numbers, which are hashed as they come."""
    if isinstance(column, NumberColumn):
        return keyed_hash(position, column.values.view(np.uint64))
    return keyed_hash(position, np.arange(len(column.texts) + 1, dtype=np.uint64))


def _different(
    columns: Sequence[Column], tables: Sequence[np.ndarray], lines: Lines, number: int, bits: int, rows: slice
) -> np.ndarray:
    """List the different hashes of a stretch whose first bits are those of a number, in order."""
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
    if bits:
        total = total[total >> np.uint64(64 - bits) == number]
    total.sort()
    return np.asarray(total[_first_of_equals(total)])


def _count_different(parts: Sequence[np.ndarray], low: int, high: int | None) -> int:
    """Count the different hashes of all stretches from ``low`` up to but without ``high``."""
    inside = []
    for part in parts:
        first = int(np.searchsorted(part, np.uint64(low)))
        inside.append(part[first : None if high is None else int(np.searchsorted(part, np.uint64(high)))])
    joined = np.concatenate([np.zeros(0, np.uint64), *inside])
    joined.sort()
    return int(np.count_nonzero(_first_of_equals(joined)))


def _first_of_equals(ordered: np.ndarray) -> np.ndarray:
    """Mark the first of each run of equal values, bool."""
    first = np.ones(len(ordered), np.bool_)
    np.not_equal(ordered[1:], ordered[:-1], out=first[1:])
    return first
