"""Sums over rows that scores are made of."""

import numpy as np

from bnx.kernels.compiling import kernel
from bnx.kernels.exponentials import logarithms, total_of

__all__ = ["tally"]

_ROWS = 256  # of a block
_PER_BIT = 1.4426950408889634  # bits of one nat


@kernel
def tally(p: np.ndarray, first: int, last: int, truth: np.ndarray, confusion: np.ndarray, sums: np.ndarray) -> None:
    """Add rows ``first:last`` of probabilities p (N, C) to a confusion table (C, C) int64 and to sums (4,).

    Sums: rows; log losses in bits; their squared distances from their mean; squared distances of the probabilities from
    the truth. The label of a row is the first class with its largest probability. A probability above 1 counts as 1.

    Source: Chan, Golub & LeVeque 1983 (joining squared distances from means).
    """
    classes = p.shape[1]
    own, square = np.empty(_ROWS), np.empty(_ROWS)
    work = np.empty(2 * _ROWS)
    for low in range(first, last, _ROWS):
        rows = min(_ROWS, last - low)
        least = 1.0
        for k in range(rows):
            label, true = 0, truth[low + k]
            distance, largest = 0.0, -1.0
            for c in range(classes):
                one = p[low + k, c]
                label = c if one > largest else label
                largest = max(one, largest)
                apart = one - 1.0 if c == true else one
                distance += apart * apart
            confusion[true, label] += 1
            square[k] = distance
            own[k] = min(p[low + k, true], 1.0)
            least = min(least, own[k])
        sums[3] += total_of(square[:rows])
        if least > 1e-300:
            logarithms(own[:rows], work)
        else:
            for k in range(rows):
                own[k] = np.log(own[k]) if own[k] > 0.0 else -np.inf
        for k in range(rows):
            own[k] = 0.0 - own[k] * _PER_BIT
        total = total_of(own[:rows])
        mean = total / rows
        for k in range(rows):
            square[k] = (own[k] - mean) * (own[k] - mean)
        before = sums[0]
        apart = mean - sums[1] / before if before > 0.0 else 0.0
        sums[2] += total_of(square[:rows]) + apart * apart * before * rows / (before + rows)
        sums[0] += rows
        sums[1] += total
