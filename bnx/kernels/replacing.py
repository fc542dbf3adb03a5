"""Loops that say what held-out class log loss becomes when one family is replaced by others, one at a time.

Rows come sorted by inner fold and class, codes as the training set sees them. Each fold's rows are judged by tables
counted on the rows of the other folds: counts without a fold are those of all less its own.
"""

import numpy as np

from bnx.kernels.compiling import inlined, kernel, part
from bnx.kernels.smoothing import smoothed_shares

__all__ = ["add_held_terms", "class_weights", "replaced_losses"]

_JOINED = 16  # rows whose chances are multiplied before one logarithm is taken


@kernel
def replaced_losses(
    codes: np.ndarray,
    starts: np.ndarray,
    members: np.ndarray,
    sizes: np.ndarray,
    depths: np.ndarray,
    strength: float,
    quarters: int,
    rest: np.ndarray,
    floor: np.ndarray,
    out: np.ndarray,
) -> None:
    """Sum the held-out log losses (nats) of all rows once for each of K families, everything else as it is.

    codes (n, N), all of one training set; starts (folds * C + 1,): first row of each fold and class; members, sizes
    (K, M): parents in the order taken, then the child, of which the first ``depths`` (K,) count, 0 for no family;
    strength: records of the back-off; quarters: temperature in quarters, 1 to 4; rest (N, C): weight of each class by
    everything but this family, 0 for a class without a row in the other folds, whose rows are skipped; floor (C,): added
    to each chance, which is scaled down so that all sum to 1; out (K,).
    """
    rows, classes = rest.shape
    folds = (starts.size - 1) // classes
    most = _most_cells(sizes, depths)
    cells, counts, room = _room(rows, folds, classes, most)
    table = np.empty(folds * most * classes)
    scale = 1.0
    for c in range(classes):
        scale -= floor[c]
    for k in range(out.size):
        own = depths[k]
        size = _tables(codes, starts, members[k, :own], sizes[k, :own], strength, cells, counts, room, table, classes)
        _temper(table[: folds * size * classes], quarters)
        total = 0.0
        for f in range(folds):
            for y in range(classes):
                s = f * classes + y
                total += _segment_loss(
                    rest, cells, table, f * size * classes, y, starts[s], starts[s + 1], scale, floor[y]
                )
        out[k] = total


@inlined
def _segment_loss(
    rest: np.ndarray,
    cells: np.ndarray,
    table: np.ndarray,
    first: int,
    truth: int,
    low: int,
    high: int,
    scale: float,
    floor: float,
) -> float:
    """Sum the losses of rows ``low:high``, all of one fold and class, whose table begins at ``first``."""
    classes = rest.shape[1]
    loss, product = 0.0, 1.0
    for row in range(low, high):
        if rest[row, truth] == 0.0:
            break
        at = first + cells[row] * classes
        whole = 0.0
        for c in range(classes):
            whole += rest[row, c] * table[at + c]
        product *= scale * (rest[row, truth] * table[at + truth] / whole) + floor
        if (row - low) % _JOINED == 0:
            loss -= np.log(product)
            product = 1.0
    return loss - np.log(product)


@kernel
def add_held_terms(
    codes: np.ndarray,
    starts: np.ndarray,
    members: np.ndarray,
    sizes: np.ndarray,
    strength: float,
    sign: float,
    out: np.ndarray,
) -> None:
    """Add ``sign`` times the log table terms (nats) of one family to every row, each fold by the other folds' table.

    members, sizes (m,): parents in the order taken, then the child; otherwise as in ``replaced_losses``; out (N, C).
    """
    rows, classes = out.shape
    folds = (starts.size - 1) // classes
    most = 1
    for m in range(sizes.size):
        most *= sizes[m]
    cells, counts, room = _room(rows, folds, classes, most)
    table = np.empty(folds * most * classes)
    size = _tables(codes, starts, members, sizes, strength, cells, counts, room, table, classes)
    for k in range(table.size):
        table[k] = np.log(table[k])
    for f in range(folds):
        for row in range(starts[f * classes], starts[(f + 1) * classes]):
            at = (f * size + cells[row]) * classes
            for c in range(classes):
                out[row, c] += sign * table[at + c]


@kernel
def class_weights(
    terms: np.ndarray, starts: np.ndarray, log_prior: np.ndarray, temperature: float, out: np.ndarray
) -> None:
    """Write the weight of each class in each row (N, C), the heaviest 1, and none below the smallest that counts.

    terms (N, C): summed log terms; log_prior (folds, C): of the rows outside each fold, minus infinity for a class
    without one, whose weight is 0.
    """
    classes = terms.shape[1]
    for f in range(log_prior.shape[0]):
        for row in range(starts[f * classes], starts[(f + 1) * classes]):
            top = -np.inf
            for c in range(classes):
                out[row, c] = log_prior[f, c] + temperature * terms[row, c]
                top = max(top, out[row, c])
            for c in range(classes):
                if log_prior[f, c] > -np.inf:
                    out[row, c] = np.exp(max(out[row, c] - top, -600.0))
                else:
                    out[row, c] = 0.0


@inlined
def _most_cells(sizes: np.ndarray, depths: np.ndarray) -> int:
    """Count the cells of the largest family."""
    most = 1
    for k in range(depths.size):
        cells = 1
        for m in range(depths[k]):
            cells *= sizes[k, m]
        most = max(most, cells)
    return most


@inlined
def _room(rows: int, folds: int, classes: int, most: int) -> tuple[np.ndarray, np.ndarray, np.ndarray]:
    """Make room for the cells of all rows, for counts by fold and in all, and for what smoothing needs."""
    return (
        np.empty(rows, np.int32),
        np.empty((folds + 2) * classes * most, np.int32),
        np.empty((classes + 10) * most),
    )


@part
def _tables(
    codes: np.ndarray,
    starts: np.ndarray,
    members: np.ndarray,
    sizes: np.ndarray,
    strength: float,
    cells: np.ndarray,
    counts: np.ndarray,
    room: np.ndarray,
    table: np.ndarray,
    classes: int,
) -> int:
    """Write the probabilities of a family, learnt without each fold: (folds, cells, C) one after the other.

    Returns:
        How many cells the family has. ``cells`` (N,) takes the cell of each row; counts and room are worked in.
    """
    folds = (starts.size - 1) // classes
    size = _number_all(codes, members, sizes, cells)
    if members.size == 0:
        for k in range(folds * classes):
            table[k] = 1.0
        return size
    whole = folds * classes * size
    without = counts[whole + classes * size : whole + 2 * classes * size].reshape(classes, size)
    for k in range(whole + classes * size):
        counts[k] = 0
    for s in range(starts.size - 1):
        first = s * size
        for row in range(starts[s], starts[s + 1]):
            counts[first + cells[row]] += 1
    for s in range(starts.size - 1):
        for cell in range(size):
            counts[whole + (s % classes) * size + cell] += counts[s * size + cell]
    shares = room[: classes * size].reshape(classes, size)
    sums, work = room[classes * size : (classes + 5) * size], room[(classes + 5) * size :]
    strengths, laplace = np.empty(1), np.zeros(1, np.bool_)
    strengths[0] = strength
    for f in range(folds):
        for c in range(classes):
            for cell in range(size):
                without[c, cell] = counts[whole + c * size + cell] - counts[(f * classes + c) * size + cell]
        smoothed_shares(without, int(np.int64(0)), sizes, strengths, laplace, sums, work, shares)
        for cell in range(size):
            for c in range(classes):
                table[(f * size + cell) * classes + c] = shares[c, cell]
    return size


@inlined
def _number_all(codes: np.ndarray, members: np.ndarray, sizes: np.ndarray, cells: np.ndarray) -> int:
    """Number the joint level of every row, the last member fastest; give how many there are."""
    for row in range(cells.size):
        cells[row] = 0
    total = 1
    for m in range(members.size):
        size = np.int32(sizes[m])
        own = codes[members[m]]
        for row in range(cells.size):
            cells[row] = cells[row] * size + np.int32(own[row])
        total *= sizes[m]
    return total


@inlined
def _temper(table: np.ndarray, quarters: int) -> None:
    """Raise probabilities to 1/4, 1/2, 3/4 or 1."""
    if quarters < 4:
        for k in range(table.size):
            root = np.sqrt(table[k])
            if quarters == 2:
                table[k] = root
            else:
                fourth = np.sqrt(root)
                table[k] = fourth if quarters == 1 else root * fourth
