"""Loops that judge models of growing depth by rows left out of their own tables, one attribute more at a time.

A table without a row is that of all rows less 1 where the row lies, so nothing is counted again. Model k of an
attribute takes the first k of its parents; all models read the counts of the family with all of them.
"""

import numpy as np

from bnx.kernels.compiling import inlined, kernel, part
from bnx.kernels.exponentials import exponentials

__all__ = ["add_left_out"]

_ROWS = 256  # of a block
_LANES = 16  # chances of a block that are multiplied side by side before a logarithm is taken of each product
_ALWAYS = 1e300  # prior odds against a class without another row
_MOST = 170.0  # a quarter of the log odds beyond which a class counts as this much heavier


@kernel
def add_left_out(
    codes: np.ndarray,
    starts: np.ndarray,
    members: np.ndarray,
    sizes: np.ndarray,
    observed: np.ndarray,
    least: int,
    counts: np.ndarray,
    class_counts: np.ndarray,
    strength: float,
    deeper: float,
    weights: np.ndarray,
    floor: np.ndarray,
    terms: np.ndarray,
    out: np.ndarray,
) -> None:
    """Add what one attribute says to the log terms of every model, each row left out, and sum the losses (nats).

    codes (n, N) of the rows judged; starts (S + 1,): first row of each run of one class, which is s % C of run s;
    members, sizes, observed (D + 1,): parents in the order taken, then the child, or none; their codes, and how many of
    these are levels; the codes after them are of cells not observed, for which tables with fewer parents are read;
    least: parents that every model takes; counts (C, cells) int32 of all rows, the child fastest, and class_counts
    (C,); strength, deeper: records of the back-off given the class and given parents too, whose first table is the
    attribute's share in all classes with 1 record a level; weights (C,): rows that each judged row of a class stands
    for; floor (C,): added to each chance, which is scaled down so that all sum to 1; terms (M, C, N): of each of M
    models, whose parents number 0 to M - 1, or as many as there are; out (3, M): sums of losses, the terms multiplied
    by 1, 3/4 and 1/2.

    Source: Martinez, Webb, Chen & Zaidi 2016 (all depths and all numbers of attributes judged by leaving rows out of
    counts made once).
    """
    models, classes, _ = terms.shape
    depth = sizes.size - 1
    first, cells = np.zeros(depth + 2, np.int64), np.zeros(depth + 2, np.int64)
    _lay_out(sizes, classes, first, cells)
    whole, own = np.zeros(first[depth + 1]), np.zeros(first[depth + 1])
    if depth >= 0:
        _write_tables(counts, sizes, observed, strength, deeper, cells, first, whole, own)
    place = np.empty((depth + 1, _ROWS), np.int64)
    known = np.empty(_ROWS, np.int64)  # depth of the deepest table that can be read
    odds, chances, work = np.empty(_ROWS), np.empty((3, _ROWS)), np.empty(3 * _ROWS)
    scale = 1.0
    for c in range(classes):
        scale -= floor[c]
    for k in range(models):
        for t in range(3):
            out[t, k] = 0.0
    prior = np.empty(classes)
    for s in range(starts.size - 1):
        y = s % classes
        for c in range(classes):
            prior[c] = class_counts[c] - (c == y)
        for low in range(starts[s], starts[s + 1], _ROWS):
            rows = min(_ROWS, starts[s + 1] - low)
            if depth >= 0:
                shallowest = _find_cells(codes, members, sizes, observed, low, rows, place, known)
            for k in range(models):
                if depth >= 0:
                    deep = min(max(k, least), depth)
                    at, size = first[deep], cells[deep]
                    if shallowest >= deep:
                        _add_terms(terms, k, y, low, rows, place[deep], whole[at:], own[at:], size)
                    else:
                        _add_known(terms, k, y, low, rows, deep, known, place, first, cells, whole, own)
                _add_losses(terms, prior, k, y, low, rows, scale, floor[y], weights[y], odds, chances, work, out)


@inlined
def _lay_out(sizes: np.ndarray, classes: int, first: np.ndarray, cells: np.ndarray) -> None:
    """Say how many cells the table of each depth has, and where its classes begin, one after the other."""
    size = 1
    for d in range(sizes.size):
        size = size * sizes[d - 1] if d > 0 else sizes[sizes.size - 1]
        cells[d] = size
        first[d + 1] = first[d] + classes * size


@part
def _add_terms(
    terms: np.ndarray,
    k: int,
    y: int,
    low: int,
    rows: int,
    place: np.ndarray,
    whole: np.ndarray,
    own: np.ndarray,
    size: int,
) -> None:
    """Add what the tables of one depth, ``size`` cells a class, say to a block of rows of class ``y``."""
    for c in range(terms.shape[1]):
        line, at = terms[k, c], c * size
        if c == y:
            for row in range(rows):
                line[low + row] += own[at + place[row]]
        else:
            for row in range(rows):
                line[low + row] += whole[at + place[row]]


@part
def _add_known(
    terms: np.ndarray,
    k: int,
    y: int,
    low: int,
    rows: int,
    deep: int,
    known: np.ndarray,
    place: np.ndarray,
    first: np.ndarray,
    cells: np.ndarray,
    whole: np.ndarray,
    own: np.ndarray,
) -> None:
    """Add what the tables of depth ``deep``, or the deepest that can be read, say to a block of rows of class ``y``."""
    for c in range(terms.shape[1]):
        for row in range(rows):
            d = min(deep, known[row])
            if d >= 0:
                at = first[d] + c * cells[d] + place[d, row]
                terms[k, c, low + row] += own[at] if c == y else whole[at]


@part
def _find_cells(
    codes: np.ndarray,
    members: np.ndarray,
    sizes: np.ndarray,
    observed: np.ndarray,
    low: int,
    rows: int,
    place: np.ndarray,
    known: np.ndarray,
) -> int:
    """Number the cell of each row at every depth, and find the deepest one whose members are all observed.

    Returns:
        The least of these depths.
    """
    depth = sizes.size - 1
    least = depth
    size = sizes[depth]
    for row in range(rows):
        level = np.int64(codes[members[depth], low + row])
        context = np.int64(0)
        place[0, row] = level
        known[row] = 0 if level < observed[depth] else -1
        for d in range(1, depth + 1):
            parent = np.int64(codes[members[d - 1], low + row])
            context = context * sizes[d - 1] + parent
            place[d, row] = context * size + level
            if known[row] == d - 1 and parent < observed[d - 1]:
                known[row] = d
        least = min(least, known[row])
    return least


@part
def _add_losses(
    terms: np.ndarray,
    prior: np.ndarray,
    k: int,
    y: int,
    low: int,
    rows: int,
    scale: float,
    floor: float,
    weight: float,
    odds: np.ndarray,
    chances: np.ndarray,
    work: np.ndarray,
    out: np.ndarray,
) -> None:
    """Add the losses of a block of rows of class ``y`` under model ``k`` at each temperature.

    prior (C,): rows of each class, none for a class without another row.
    """
    for t in range(3):
        for row in range(rows):
            chances[t, row] = 1.0
    for c in range(terms.shape[1]):
        if c != y and prior[c] > 0.0:
            before = prior[c] / prior[y] if prior[y] > 0.0 else _ALWAYS
            for row in range(rows):
                odds[row] = min(0.25 * (terms[k, c, low + row] - terms[k, y, low + row]), _MOST)
            exponentials(odds[:rows], work)
            for row in range(rows):
                root = odds[row]
                square = root * root
                chances[0, row] += before * (square * square)
                chances[1, row] += before * (square * root)
                chances[2, row] += before * square
    for t in range(3):
        for row in range(rows):
            chances[t, row] = scale / chances[t, row] + floor
        for row in range(_LANES, rows):
            chances[t, row % _LANES] *= chances[t, row]
        for lane in range(min(_LANES, rows)):
            out[t, k] -= weight * np.log(chances[t, lane])


@part
def _write_tables(
    counts: np.ndarray,
    sizes: np.ndarray,
    observed: np.ndarray,
    strength: float,
    deeper: float,
    cells: np.ndarray,
    first: np.ndarray,
    whole: np.ndarray,
    own: np.ndarray,
) -> None:
    """Write the log shares of every cell at every depth as a row of that cell sees them when it is left out.

    whole: those of the other classes; own: of the row's own. Cells that no row lies in stay 0.
    """
    classes, depth = counts.shape[0], sizes.size - 1
    size, levels = sizes[depth], observed[depth]
    rows = np.zeros(first[depth + 1])
    _sum_up(counts, sizes, cells, first, rows)
    total = 0.0
    general = np.zeros(size)
    for x in range(levels):
        for c in range(classes):
            general[x] += rows[c * size + x]
        total += general[x]
    for x in range(levels):
        general[x] /= total - 1.0 + levels  # 1 record a level, and the row itself taken out
    for d in range(depth + 1):
        s = deeper if d > 0 else strength
        for context in range(classes * (cells[d] // size)):
            here = first[d] + context * size
            wider = first[d - 1] + context // sizes[d - 1] * size if d > 0 else 0
            n = 0.0
            for x in range(levels):
                n += rows[here + x]
            for x in range(levels):
                mine = rows[here + x]
                whole[here + x] = (mine + s * (whole[wider + x] if d > 0 else general[x])) / (n + s)
                if mine > 0.0:
                    own[here + x] = (mine - 1.0 + s * (own[wider + x] if d > 0 else general[x])) / (n - 1.0 + s)
    for k in range(whole.size):
        whole[k] = np.log(whole[k]) if whole[k] > 0.0 else 0.0
        own[k] = np.log(own[k]) if own[k] > 0.0 else 0.0


@inlined
def _sum_up(counts: np.ndarray, sizes: np.ndarray, cells: np.ndarray, first: np.ndarray, rows: np.ndarray) -> None:
    """Count the tables of every depth: each is the next deeper one, summed over its last parent."""
    classes, depth = counts.shape[0], sizes.size - 1
    size = sizes[depth]
    for c in range(classes):
        at = first[depth] + c * cells[depth]
        for cell in range(cells[depth]):
            rows[at + cell] = counts[c, cell]
    for d in range(depth, 0, -1):
        for cell in range(classes * cells[d]):
            rows[first[d - 1] + cell // size // sizes[d - 1] * size + cell % size] += rows[first[d] + cell]
