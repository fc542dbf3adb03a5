"""Loops that say what held-out class log loss becomes when one family is replaced by others, one at a time.

Rows come sorted by inner fold and class, codes as the training set sees them. Each fold's rows are judged by tables
counted on the rows of the other folds: counts without a fold are those of all less its own.
"""

import numpy as np

from bnx.kernels.compiling import inlined, kernel, part
from bnx.kernels.exponentials import exponentials
from bnx.kernels.smoothing import smoothed_shares

__all__ = ["add_held_terms", "class_weights", "replaced_losses"]

_ROWS = 256  # of a block
_LANES = 16  # chances of a block that are multiplied side by side before a logarithm is taken of each product
_LOWEST = -600.0  # log weight below which a class counts as this heavy


@kernel
def replaced_losses(
    codes: np.ndarray,
    starts: np.ndarray,
    members: np.ndarray,
    sizes: np.ndarray,
    depths: np.ndarray,
    strength: float,
    weights: np.ndarray,
    floor: np.ndarray,
    out: np.ndarray,
) -> None:
    """Sum the held-out log losses (nats) of all rows with each of K families in the place of another.

    codes (n, N), all of one training set; starts (folds * C + 1,): first row of each fold and class; members, sizes
    (1 + K, M): parents in the order taken, then the child, of which the first ``depths`` (1 + K,) count, first the
    family that is replaced; no members: no family; strength: records of the back-off; weights (C, N): of each class
    with the family that is replaced, 0 for a class without a row in the other folds, whose rows are skipped; floor
    (C,): added to each chance, which is scaled down so that all sum to 1; out (K,).
    """
    classes, rows = weights.shape
    folds = (starts.size - 1) // classes
    most = _most_cells(sizes, depths)
    cells, counts, room = _room(rows, folds, classes, most)
    table = np.empty(folds * classes * most)
    rest = np.empty((classes, rows))
    whole, own = np.empty(_ROWS), np.empty(_ROWS)
    scale = 1.0
    for c in range(classes):
        scale -= floor[c]
    for k in range(depths.size):
        depth = depths[k]
        size = _tables(
            codes, starts, members[k, :depth], sizes[k, :depth], strength, cells, counts, room, table, classes
        )
        if k == 0:
            _take_away(weights, starts, cells, table, size, rest)
            continue
        total = 0.0
        for s in range(starts.size - 1):
            y, first = s % classes, (s - s % classes) * size
            if starts[s] < starts[s + 1] and rest[y, starts[s]] > 0.0:
                for low in range(starts[s], starts[s + 1], _ROWS):
                    high = min(low + _ROWS, starts[s + 1])
                    total += _block_loss(rest, cells, table, first, size, y, low, high, scale, floor[y], whole, own)
        out[k - 1] = total


@inlined
def _take_away(
    weights: np.ndarray, starts: np.ndarray, cells: np.ndarray, table: np.ndarray, size: int, rest: np.ndarray
) -> None:
    """Write the weights of classes (C, N) without what a family's table says."""
    classes = weights.shape[0]
    for s in range(starts.size - 1):
        first = (s - s % classes) * size
        for c in range(classes):
            at = first + c * size
            for row in range(starts[s], starts[s + 1]):
                rest[c, row] = weights[c, row] / table[at + cells[row]]


@inlined
def _block_loss(
    rest: np.ndarray,
    cells: np.ndarray,
    table: np.ndarray,
    first: int,
    size: int,
    truth: int,
    low: int,
    high: int,
    scale: float,
    floor: float,
    whole: np.ndarray,
    own: np.ndarray,
) -> float:
    """Sum the losses of a block of rows of one fold and class, whose tables begin at ``first``."""
    rows, mine = high - low, cells[low:high]
    shares, weights = table[first + truth * size : first + (truth + 1) * size], rest[truth, low:high]
    for k in range(rows):
        own[k] = weights[k] * shares[mine[k]]
        whole[k] = own[k]
    for c in range(rest.shape[0]):
        if c != truth:
            others, lighter = table[first + c * size : first + (c + 1) * size], rest[c, low:high]
            for k in range(rows):
                whole[k] += lighter[k] * others[mine[k]]
    for k in range(rows):
        own[k] = scale * (own[k] / whole[k]) + floor
    even = rows - rows % _LANES
    for k in range(_LANES, even, _LANES):
        for lane in range(_LANES):
            own[lane] *= own[k + lane]
    for k in range(max(even, _LANES), rows):
        own[k - even] *= own[k]
    loss = 0.0
    for k in range(min(_LANES, rows)):
        loss -= np.log(own[k])
    return loss


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

    members, sizes (m,): parents in the order taken, then the child; otherwise as in ``replaced_losses``; out (C, N).
    """
    classes, rows = out.shape
    folds = (starts.size - 1) // classes
    most = 1
    for m in range(sizes.size):
        most *= sizes[m]
    cells, counts, room = _room(rows, folds, classes, most)
    table = np.empty(folds * classes * most)
    size = _tables(codes, starts, members, sizes, strength, cells, counts, room, table, classes)
    for k in range(table.size):
        table[k] = np.log(table[k])
    for s in range(starts.size - 1):
        first = (s - s % classes) * size
        for c in range(classes):
            at = first + c * size
            for row in range(starts[s], starts[s + 1]):
                out[c, row] += sign * table[at + cells[row]]


@kernel
def class_weights(terms: np.ndarray, starts: np.ndarray, log_prior: np.ndarray, out: np.ndarray) -> None:
    """Write the weight of each class in each row (C, N), the heaviest 1.

    terms (C, N): summed log terms; log_prior (folds, C): of the rows outside each fold, minus infinity for a class
    without one, whose weight is 0.
    """
    classes, rows = terms.shape
    top = np.empty(rows)
    for row in range(rows):
        top[row] = -np.inf
    for s in range(starts.size - 1):
        for c in range(classes):
            prior = log_prior[s // classes, c]
            for row in range(starts[s], starts[s + 1]):
                out[c, row] = prior + terms[c, row]
                top[row] = max(top[row], out[c, row])
    for c in range(classes):
        for row in range(rows):
            out[c, row] = max(out[c, row] - top[row], _LOWEST)
    work = np.empty(3 * rows)
    for c in range(classes):
        exponentials(out[c], work)
    for s in range(starts.size - 1):
        for c in range(classes):
            if log_prior[s // classes, c] == -np.inf:
                for row in range(starts[s], starts[s + 1]):
                    out[c, row] = 0.0


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
    """Make room for the cells of rows, for counts by fold, in all and without a fold, and for what smoothing needs."""
    return np.empty(rows, np.uint32), np.empty((folds + 2) * classes * most, np.int32), np.empty(10 * most)


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
    """Write the probabilities of a family, learnt without each fold: (folds, C, cells), one after the other.

    Returns:
        How many cells the family has. ``cells`` (N,) takes the cell of each row; counts and room are worked in.
    """
    segments = starts.size - 1
    size = _number_all(codes, members, sizes, cells)
    if members.size == 0:
        for k in range(segments):
            table[k] = 1.0
        return size
    whole = segments * size
    without = counts[whole + classes * size : whole + 2 * classes * size].reshape(classes, size)
    for k in range(whole + classes * size):
        counts[k] = 0
    for s in range(segments):
        mine = counts[s * size : (s + 1) * size]
        for row in range(starts[s], starts[s + 1]):
            mine[cells[row]] += 1
        sums = whole + (s % classes) * size
        for cell in range(size):
            counts[sums + cell] += mine[cell]
    strengths, laplace = np.full((1, 2), strength), np.zeros(1, np.bool_)
    for s in range(0, segments, classes):
        for c in range(classes):
            for cell in range(size):
                without[c, cell] = counts[whole + c * size + cell] - counts[(s + c) * size + cell]
        shares = table[s * size : (s + classes) * size].reshape(classes, size)
        smoothed_shares(
            without, int(np.int64(0)), sizes, strengths, laplace, room[: 5 * size], room[5 * size :], shares
        )
    return size


@inlined
def _number_all(codes: np.ndarray, members: np.ndarray, sizes: np.ndarray, cells: np.ndarray) -> int:
    """Number the joint level of every row, the last member fastest; give how many there are."""
    total = 1
    for row in range(cells.size):
        cells[row] = 0
    for m in range(members.size):
        size, own = np.uint32(sizes[m]), codes[members[m]]
        for row in range(cells.size):
            cells[row] = cells[row] * size + np.uint32(own[row])
        total *= sizes[m]
    return total
