"""How small a p-value the margins of a stratified table allow at best: plain arrays in, numbers out."""

import math

import numpy as np
from numba import njit

__all__ = ["least_p"]


@njit(nogil=True, cache=True, error_model="numpy")
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
    for s in range(counts.shape[0]):
        table = counts[s].reshape(height, width).astype(np.int64)
        down = -np.sort(-table.sum(axis=1))
        across = -np.sort(-table.sum(axis=0))
        cells = min(_fullest(down, across), _fullest(across, down))
        logarithm += (
            _sum_of_log_factorials(down) + _sum_of_log_factorials(across) - math.lgamma(down.sum() + 1.0) - cells
        )
    return min(1.0, math.exp(logarithm))


@njit(nogil=True, cache=True, error_model="numpy")
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


@njit(nogil=True, cache=True, error_model="numpy")
def _sum_of_log_factorials(totals: np.ndarray) -> float:
    """Sum ln(k!) over totals."""
    result = 0.0
    for total in totals:
        result += math.lgamma(total + 1.0)
    return result
