"""How small a p-value the margins of a stratified table allow at best: plain arrays in, numbers out."""

import math

import numpy as np

from bnx.kernels.compiling import inlined, kernel
from bnx.kernels.margins import margins

__all__ = ["least_p"]


@kernel
def least_p(counts: np.ndarray, height: int, width: int) -> float:
    """Bound from below the probability of every table with these margins, hence the p of every exact test of them.

    A table has the probability (product of R! of the rows) (product of C! of the columns) / (N! product of n! of the
    cells). Each cell is at most R and at most C, so a row has its greatest product of n! when it fills the largest
    columns first; so has a column. Of the bounds by rows and by columns the sharper is taken, and the strata multiply.
    For strata of 2 x 2 with a row of one record it is the least p itself.

    Args:
        counts: records, int32 (S, height * width), every stratum row by row.
        height: rows of every table.
        width: columns of every table.

    Source: Tarone 1990 (the use of such a bound).
    """
    logarithm = 0.0
    down, across = np.empty(height, np.int64), np.empty(width, np.int64)
    for s in range(counts.shape[0]):
        total = margins(counts, s, int(np.int64(0)), height, width, down, across)
        _sort_falling(down)
        _sort_falling(across)
        cells = min(_fullest(down, across), _fullest(across, down))
        logarithm += _sum_of_log_factorials(down) + _sum_of_log_factorials(across) - math.lgamma(total + 1.0) - cells
    return min(1.0, math.exp(logarithm))


@inlined
def _sort_falling(totals: np.ndarray) -> None:
    """Sort a few totals in place, the largest first."""
    for k in range(1, totals.size):
        total, place = totals[k], k
        while place > 0 and totals[place - 1] < total:
            totals[place] = totals[place - 1]
            place -= 1
        totals[place] = total


@inlined
def _fullest(lines: np.ndarray, caps: np.ndarray) -> float:
    """Sum ln(n!) over lines that each fill the largest caps first; caps fall."""
    result = 0.0
    for line in lines:
        left = line
        for cap in caps:
            if left <= 0:
                break
            result += math.lgamma(min(cap, left) + 1.0)
            left -= cap
    return result


@inlined
def _sum_of_log_factorials(totals: np.ndarray) -> float:
    """Sum ln(k!) over totals."""
    result = 0.0
    for total in totals:
        result += math.lgamma(total + 1.0)
    return result
