"""Loops that say what held-out class log loss becomes when one family is replaced by others, one at a time.

Rows come sorted by inner fold and class, codes as the training set sees them; any first part of a fold's rows of one
class is a fair sample of them. Tables are those of ``held_tables``: each fold's are learnt from the others.
"""

import numpy as np

from bnx.kernels.compiling import inlined, kernel, part
from bnx.kernels.exponentials import exponentials
from bnx.kernels.joint_levels import cells_of, number_levels

__all__ = ["held_weights", "present_loss", "replace_family", "replaced_savings"]

_ROWS = 256  # of a block
_LANES = 16  # chances of a block that are multiplied side by side before a logarithm is taken of each product
_LOWEST = -600.0  # log weight below which a class counts as this heavy
_SURE = 2.0  # standard errors by which what a part of the rows says may be off


@kernel
def replaced_savings(
    codes: np.ndarray,
    starts: np.ndarray,
    which: np.ndarray,
    members: np.ndarray,
    sizes: np.ndarray,
    depths: np.ndarray,
    places: np.ndarray,
    pool: np.ndarray,
    weights: np.ndarray,
    floor: np.ndarray,
    present: np.ndarray,
    stages: np.ndarray,
    least: float,
    out: np.ndarray,
) -> None:
    """Sum what each of K families in the place of another saves of the held-out log losses (nats) of all rows.

    codes (n, N); starts (folds * C + 1,): first row of each fold and class; which (1 + K,): numbers of families among
    those of members, sizes (F, M), depths, places (F,), as in ``held_tables``, first the family that is replaced;
    weights (C, N): of each class with this family, 0 for a class without a row in the other folds, whose rows are
    skipped; floor (C,): added to each chance, which is scaled down so that all sum to 1; present (N,): 1 / chance of
    the true class so far.

    stages: rising numbers, the last one the number of parts that all rows are cut into: after so many parts a family is
    given up whose saving is then below ``least`` by two standard errors of what the other rows may change.
    out (K,): saved; of a family given up what the rows seen make of it, scaled up to all.
    """
    classes, rows = weights.shape
    rest = np.empty((classes, rows))
    _take_away(codes, starts, members, sizes, which[0], depths[which[0]], places[which[0]], pool, weights, rest)
    cells, whole, own = np.empty(_ROWS, np.uint32), np.empty(_ROWS), np.empty(_ROWS)
    scale = _scale(floor)
    sums = np.empty(2)
    used = 0
    for s in range(starts.size - 1):
        if starts[s] < starts[s + 1] and weights[s % classes, starts[s]] > 0.0:
            used += starts[s + 1] - starts[s]
    parts = stages[stages.size - 1]
    for k in range(1, which.size):
        f = which[k]
        size = cells_of(sizes, f, depths[f])
        sums[0] = sums[1] = 0.0
        seen = 0
        for stage in range(stages.size):
            begin = stages[stage - 1] if stage else 0
            for s in range(starts.size - 1):
                y, length = s % classes, starts[s + 1] - starts[s]
                if length == 0 or rest[y, starts[s]] == 0.0:
                    continue
                first = places[f] + (s - y) * size
                start, end = starts[s] + length * begin // parts, starts[s] + length * stages[stage] // parts
                seen += end - start
                for low in range(start, end, _ROWS):
                    high = min(low + _ROWS, end)
                    number_levels(codes, members, sizes, f, depths[f], low, high, cells)
                    _add_block(rest, cells, pool, first, size, y, low, high, scale, floor[y], present, whole, own, sums)
            if seen < used and seen > 0:
                scaled = used / seen
                if sums[0] * scaled + _SURE * np.sqrt(sums[1] * scaled * (scaled - 1.0)) < least:
                    break
        out[k - 1] = sums[0] * used / max(seen, 1)


@part
def _add_block(
    rest: np.ndarray,
    cells: np.ndarray,
    pool: np.ndarray,
    first: int,
    size: int,
    truth: int,
    low: int,
    high: int,
    scale: float,
    floor: float,
    present: np.ndarray,
    whole: np.ndarray,
    own: np.ndarray,
    sums: np.ndarray,
) -> None:
    """Add what a block of rows of one fold and class saves, and squares; the fold's tables begin at ``first``.

    Squared are sums over 16 or fewer rows, whose cross products are as often positive as negative.
    """
    rows = high - low
    shares, weights = pool[first + truth * size : first + (truth + 1) * size], rest[truth, low:high]
    for k in range(rows):
        own[k] = weights[k] * shares[cells[k]]
        whole[k] = own[k]
    for c in range(rest.shape[0]):
        if c != truth:
            others, lighter = pool[first + c * size : first + (c + 1) * size], rest[c, low:high]
            for k in range(rows):
                whole[k] += lighter[k] * others[cells[k]]
    inverse = present[low:high]
    for k in range(rows):
        own[k] = (scale * (own[k] / whole[k]) + floor) * inverse[k]
    for lane in range(_multiplied(own, rows)):
        saved = np.log(own[lane])
        sums[0] += saved
        sums[1] += saved * saved


@inlined
def _multiplied(x: np.ndarray, rows: int) -> int:
    """Multiply the first numbers of x into at most 16 products, which take their place; give how many."""
    even = rows - rows % _LANES
    for k in range(_LANES, even, _LANES):
        for lane in range(_LANES):
            x[lane] *= x[k + lane]
    for k in range(max(even, _LANES), rows):
        x[k - even] *= x[k]
    return min(_LANES, rows)


@kernel
def replace_family(
    codes: np.ndarray,
    starts: np.ndarray,
    which: np.ndarray,
    members: np.ndarray,
    sizes: np.ndarray,
    depths: np.ndarray,
    places: np.ndarray,
    pool: np.ndarray,
    weights: np.ndarray,
) -> None:
    """Give weights (C, N) the second of two families in the place of the first; the heaviest is 1 again."""
    classes, rows = weights.shape
    rest = np.empty((classes, rows))
    _take_away(codes, starts, members, sizes, which[0], depths[which[0]], places[which[0]], pool, weights, rest)
    cells, top = np.empty(_ROWS, np.uint32), np.empty(_ROWS)
    f = which[1]
    size, lowest = cells_of(sizes, f, depths[f]), np.exp(_LOWEST)
    for s in range(starts.size - 1):
        first = places[f] + (s - s % classes) * size
        for low in range(starts[s], starts[s + 1], _ROWS):
            high = min(low + _ROWS, starts[s + 1])
            number_levels(codes, members, sizes, f, depths[f], low, high, cells)
            for k in range(high - low):
                top[k] = 0.0
            for c in range(classes):
                for k in range(high - low):
                    rest[c, low + k] *= pool[first + c * size + cells[k]]
                    top[k] = max(top[k], rest[c, low + k])
            for c in range(classes):
                for k in range(high - low):
                    if weights[c, low + k] > 0.0:
                        weights[c, low + k] = max(rest[c, low + k] / top[k], lowest)


@kernel
def present_loss(starts: np.ndarray, weights: np.ndarray, floor: np.ndarray, present: np.ndarray) -> float:
    """Write 1 / chance of the true class (N,), and sum the log losses (nats) of all rows that are not skipped."""
    classes = weights.shape[0]
    scale, loss = _scale(floor), 0.0
    chances = np.empty(_ROWS)
    for s in range(starts.size - 1):
        y = s % classes
        if starts[s] == starts[s + 1] or weights[y, starts[s]] == 0.0:
            continue
        for low in range(starts[s], starts[s + 1], _ROWS):
            rows = min(low + _ROWS, starts[s + 1]) - low
            for k in range(rows):
                chances[k] = 0.0
            for c in range(classes):
                for k in range(rows):
                    chances[k] += weights[c, low + k]
            for k in range(rows):
                chances[k] = scale * (weights[y, low + k] / chances[k]) + floor[y]
                present[low + k] = 1.0 / chances[k]
            for lane in range(_multiplied(chances, rows)):
                loss -= np.log(chances[lane])
    return loss


@kernel
def held_weights(
    codes: np.ndarray,
    starts: np.ndarray,
    which: np.ndarray,
    members: np.ndarray,
    sizes: np.ndarray,
    depths: np.ndarray,
    places: np.ndarray,
    pool: np.ndarray,
    log_prior: np.ndarray,
    out: np.ndarray,
) -> None:
    """Write the weight of each class in each row (C, N) under all of K families, the heaviest 1.

    log_prior (folds, C): of the rows outside each fold, minus infinity for a class without one, whose weight is 0.
    """
    classes, rows = out.shape
    cells, top, work = np.empty(_ROWS, np.uint32), np.empty(rows), np.empty(3 * rows)
    for s in range(starts.size - 1):
        for c in range(classes):
            for row in range(starts[s], starts[s + 1]):
                out[c, row] = log_prior[s // classes, c]
        for f in which:
            size = cells_of(sizes, f, depths[f])
            first = places[f] + (s - s % classes) * size
            logs = np.empty(classes * size)
            for cell in range(logs.size):
                logs[cell] = np.log(pool[first + cell])
            for low in range(starts[s], starts[s + 1], _ROWS):
                high = min(low + _ROWS, starts[s + 1])
                number_levels(codes, members, sizes, f, depths[f], low, high, cells)
                for c in range(classes):
                    for row in range(high - low):
                        out[c, low + row] += logs[c * size + cells[row]]
    _to_weights(out, top, work)
    for s in range(starts.size - 1):
        for c in range(classes):
            if log_prior[s // classes, c] == -np.inf:
                for row in range(starts[s], starts[s + 1]):
                    out[c, row] = 0.0


@inlined
def _to_weights(out: np.ndarray, top: np.ndarray, work: np.ndarray) -> None:
    """Turn log weights (C, N) into weights, the heaviest of each row 1."""
    for row in range(top.size):
        top[row] = -np.inf
    for c in range(out.shape[0]):
        for row in range(top.size):
            top[row] = max(top[row], out[c, row])
    for c in range(out.shape[0]):
        for row in range(top.size):
            out[c, row] = max(out[c, row] - top[row], _LOWEST)
        exponentials(out[c], work)


@part
def _take_away(
    codes: np.ndarray,
    starts: np.ndarray,
    members: np.ndarray,
    sizes: np.ndarray,
    f: int,
    depth: int,
    place: int,
    pool: np.ndarray,
    weights: np.ndarray,
    rest: np.ndarray,
) -> None:
    """Write the weights of classes (C, N) without what the table of the first family says."""
    classes = weights.shape[0]
    size = cells_of(sizes, f, depth)
    cells = np.empty(_ROWS, np.uint32)
    for s in range(starts.size - 1):
        first = place + (s - s % classes) * size
        for low in range(starts[s], starts[s + 1], _ROWS):
            high = min(low + _ROWS, starts[s + 1])
            number_levels(codes, members, sizes, f, depth, low, high, cells)
            for c in range(classes):
                table = pool[first + c * size : first + (c + 1) * size]
                for k in range(high - low):
                    rest[c, low + k] = weights[c, low + k] / table[cells[k]]


@inlined
def _scale(floor: np.ndarray) -> float:
    """Say what is left for the chances beside the floors."""
    scale = 1.0
    for c in range(floor.size):
        scale -= floor[c]
    return scale
