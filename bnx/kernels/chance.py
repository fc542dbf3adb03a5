"""What chance alone shows: the exact mean of the information in tables whose margins are fixed."""

import math

import numpy as np

from bnx.kernels.compiling import inlined, kernel, part
from bnx.kernels.margins import margins, used

__all__ = ["expected_nats"]

_NEGLIGIBLE = 1e-17  # chances that no longer matter


@kernel
def expected_nats(counts: np.ndarray, height: int, width: int) -> float:
    """Find the mean of the sum of n ln(n / E) over strata when rows and columns are independent, in nats x records.

    Every cell is hypergeometric given its margins, and the sum is that of n ln n over cells less what margins fix.
    Where counts are large it is half the degrees of freedom.

    Args:
        counts: records, int32 (S, height * width), every stratum row by row.
        height: rows of every table.
        width: columns of every table.

    Source: Vinh, Epps & Bailey 2010 (the mean of mutual information given the margins).
    """
    result = 0.0
    down, across = np.empty(height, np.int64), np.empty(width, np.int64)
    for s in range(counts.shape[0]):
        total = margins(counts, s, int(np.int64(0)), height, width, down, across)
        if used(down, height) < 2 or used(across, width) < 2:
            continue
        result += _weighed(float(total)) - _all_weighed(down) - _all_weighed(across)
        for row in down:
            for column in across:
                if row > 0 and column > 0:
                    result += _mean_weighed(int(row), int(column), total)
    return result


@inlined
def _weighed(count: float) -> float:
    """Compute n ln n."""
    return count * math.log(count) if count > 0.0 else 0.0


@inlined
def _all_weighed(totals: np.ndarray) -> float:
    """Sum n ln n over totals."""
    result = 0.0
    for total in totals:
        result += _weighed(float(total))
    return result


@part
def _mean_weighed(row: int, column: int, total: int) -> float:
    """Find the mean of n ln n in a cell, outward from the mode so that no chance underflows early."""
    low, high = max(0, row + column - total), min(row, column)
    mode = min(max((row + 1) * (column + 1) // (total + 2), low), high)
    rest = total - row - column
    mass, mean = 1.0, _weighed(float(mode))
    chance = 1.0
    for n in range(mode, high):
        chance *= (row - n) * (column - n) / ((n + 1.0) * (rest + n + 1.0))
        mass += chance
        mean += chance * _weighed(n + 1.0)
        if chance < _NEGLIGIBLE:
            break
    chance = 1.0
    for n in range(mode, low, -1):
        chance *= n * (rest + n) / ((row - n + 1.0) * (column - n + 1.0))
        mass += chance
        mean += chance * _weighed(n - 1.0)
        if chance < _NEGLIGIBLE:
            break
    return mean / mass
