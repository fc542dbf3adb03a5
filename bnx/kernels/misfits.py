"""Loops that say how far the classes of records, cell by cell, are from what a classifier makes of them."""

import numpy as np

from bnx.kernels.compiling import inlined, kernel

__all__ = ["misfits"]

_MORE = 0.5  # variance added to every cell and class, so that a lone record tells little


@kernel
def misfits(
    codes: np.ndarray,
    starts: np.ndarray,
    taken: np.ndarray,
    weights: np.ndarray,
    members: np.ndarray,
    sizes: np.ndarray,
    out: np.ndarray,
) -> None:
    """Compare counts of classes with sums of chances, in the cells of T families.

    codes (n, N); starts (folds * C + 1,): first row of each fold and class, of which the first ``taken`` (folds * C,)
    count; weights (C, N): of classes in each row, not all 0; members, sizes (T, M). out (T,): the sum over cells and
    classes of (count - sum of p)^2 / (sum of p (1 - p) + 1/2), less what chance makes of it, in standard deviations.
    """
    classes = weights.shape[0]
    rows = 0
    for s in range(taken.size):
        rows += taken[s]
    chances, index, truth = np.empty((classes, rows)), np.empty(rows, np.int64), np.empty(rows, np.int64)
    _gather(starts, taken, weights, chances, index, truth)
    most = 1
    for k in range(members.shape[0]):
        cells = 1
        for m in range(members.shape[1]):
            cells *= sizes[k, m]
        most = max(most, cells)
    own, residual, variance = np.empty(rows, np.int64), np.empty(most), np.empty(most)
    for k in range(members.shape[0]):
        cells = _number(codes, members, sizes, k, index, own)
        found, mean, spread = 0.0, 0.0, 0.0
        for c in range(classes):
            for cell in range(cells):
                residual[cell] = variance[cell] = 0.0
            for row in range(rows):
                p = chances[c, row]
                residual[own[row]] += (truth[row] == c) - p
                variance[own[row]] += p * (1.0 - p)
            for cell in range(cells):
                share = 1.0 / (variance[cell] + _MORE)
                found += residual[cell] * residual[cell] * share
                mean += variance[cell] * share
                spread += variance[cell] * share * variance[cell] * share
        out[k] = (found - mean) / np.sqrt(2.0 * spread + 1.0)


@inlined
def _gather(
    starts: np.ndarray,
    taken: np.ndarray,
    weights: np.ndarray,
    chances: np.ndarray,
    index: np.ndarray,
    truth: np.ndarray,
) -> None:
    """Write chances (C, rows), places and classes of the rows that count."""
    row = 0
    for s in range(taken.size):
        for at in range(starts[s], starts[s] + taken[s]):
            total = 0.0
            for c in range(weights.shape[0]):
                total += weights[c, at]
            for c in range(weights.shape[0]):
                chances[c, row] = weights[c, at] / total
            index[row], truth[row] = at, s % weights.shape[0]
            row += 1


@inlined
def _number(
    codes: np.ndarray, members: np.ndarray, sizes: np.ndarray, k: int, index: np.ndarray, own: np.ndarray
) -> int:
    """Number the joint level of every row that counts in family k; give how many there are."""
    cells = 1
    for row in range(own.size):
        own[row] = 0
    for m in range(members.shape[1]):
        size, column = sizes[k, m], codes[members[k, m]]
        for row in range(own.size):
            own[row] = own[row] * size + np.int64(column[index[row]])
        cells *= size
    return cells
