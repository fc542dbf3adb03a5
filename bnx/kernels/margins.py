"""The margins of one stratum of a table."""

import numpy as np

from bnx.kernels.compiling import part

__all__ = ["margins", "used"]


@part
def margins(
    counts: np.ndarray, s: int, offset: int, height: int, width: int, down: np.ndarray, across: np.ndarray
) -> int:
    """Fill the row and column totals of one stratum and return its records.

    counts (S, cells); the stratum lies row by row in ``counts[s, offset:]``.
    """
    for j in range(width):
        across[j] = 0
    total = 0
    cell = offset
    for i in range(height):
        records = 0
        for j in range(width):
            count = counts[s, cell + j]
            across[j] += count
            records += count
        down[i] = records
        total += records
        cell += width
    return total


@part
def used(totals: np.ndarray, size: int) -> int:
    """Count the levels that hold a record."""
    found = 0
    for k in range(size):
        found += totals[k] > 0
    return found
