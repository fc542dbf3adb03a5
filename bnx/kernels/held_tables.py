"""Tables of families, each fold's learnt from the rows of the other folds, side by side in one long array.

Rows come sorted by inner fold and class, codes as the training set sees them. Counts without a fold are those of all
less its own.
"""

import numpy as np

from bnx.kernels.compiling import inlined, kernel, part
from bnx.kernels.joint_levels import cells_of, number_levels

__all__ = ["held_tables"]


@kernel
def held_tables(
    codes: np.ndarray,
    starts: np.ndarray,
    classes: int,
    members: np.ndarray,
    sizes: np.ndarray,
    levels: np.ndarray,
    depths: np.ndarray,
    strength: float,
    above: np.ndarray,
    places: np.ndarray,
    pool: np.ndarray,
) -> None:
    """Write the tables of K families, (folds, C, cells) each: the probabilities of the child's levels.

    codes (n, N); starts (folds * C + 1,): first row of each fold and class; members, sizes, levels (K, M): parents in
    the order taken, then the child, of which the first ``depths`` (K,) count; sizes are of codes, of which those from
    ``levels`` on stand for cells not observed. Records in which a member is not observed are not counted; given such a
    parent the child is as it is without this parent and those behind it, and a child not observed has probability 1.
    strength: records spread like the table without the last parent, which begins at ``above`` (K,) of ``pool`` (before
    it is needed); places (K,): where each table begins.
    """
    segments = starts.size - 1
    most = 1
    for k in range(depths.size):
        most = max(most, cells_of(sizes, k, depths[k]))
    cells = np.empty(codes.shape[1], np.uint32)
    counts, whole = np.empty(segments * most, np.int32), np.empty(classes * most, np.int32)
    for k in range(depths.size):
        depth = depths[k]
        size, parents = cells_of(sizes, k, depth), depth - 1
        number_levels(codes, members, sizes, k, depth, 0, cells.size, cells)
        _count(cells, starts, size, counts)
        for m in range(depth):
            if levels[k, m] < sizes[k, m]:
                _forget(counts, segments, size, sizes, levels, k, m, depth)
        for at in range(classes * size):
            whole[at] = 0
            for first in range(0, segments * size, classes * size):
                whole[at] += counts[first + at]
        child, known = sizes[k, parents], levels[k, parents]
        siblings = sizes[k, parents - 1] if parents else 1
        for s in range(segments):
            table = places[k] + s * size
            if parents == 0:
                _marginal(counts, whole, s, classes, size, known, table, pool)
            less = above[k] + s * (size // siblings) if parents else table
            _back_off(counts, whole, s, classes, size, child, known, siblings, strength, less, table, pool)


@part
def _back_off(
    counts: np.ndarray,
    whole: np.ndarray,
    s: int,
    classes: int,
    size: int,
    child: int,
    known: int,
    siblings: int,
    strength: float,
    less: int,
    table: int,
    pool: np.ndarray,
) -> None:
    """Smooth the table of one fold and class; that of one parent less begins at ``less``."""
    mine, everywhere = s * size, s % classes * size
    for context in range(size // child):
        here = context * child
        before = less + context // siblings * child
        rows = 0
        for x in range(known):
            rows += whole[everywhere + here + x] - counts[mine + here + x]
        share = 1.0 / (rows + strength)
        for x in range(known):
            own = whole[everywhere + here + x] - counts[mine + here + x]
            pool[table + here + x] = (own + strength * pool[before + x]) * share
        for x in range(known, child):
            pool[table + here + x] = 1.0


@inlined
def _count(cells: np.ndarray, starts: np.ndarray, size: int, counts: np.ndarray) -> None:
    """Count the rows of every fold, class and cell."""
    for at in range((starts.size - 1) * size):
        counts[at] = 0
    for s in range(starts.size - 1):
        mine = counts[s * size : (s + 1) * size]
        for row in range(starts[s], starts[s + 1]):
            mine[cells[row]] += 1


@inlined
def _forget(
    counts: np.ndarray, segments: int, size: int, sizes: np.ndarray, levels: np.ndarray, k: int, m: int, depth: int
) -> None:
    """Count no record in which member m is not observed."""
    after = 1
    for later in range(m + 1, depth):
        after *= sizes[k, later]
    for at in range(segments * size):
        if at // after % sizes[k, m] >= levels[k, m]:
            counts[at] = 0


@inlined
def _marginal(
    counts: np.ndarray,
    whole: np.ndarray,
    s: int,
    classes: int,
    size: int,
    levels: int,
    table: int,
    pool: np.ndarray,
) -> None:
    """Write the child's own distribution without a fold, one record added to each level."""
    first = (s - s % classes) * size
    rows = levels
    for x in range(levels):
        own = 1
        for c in range(classes):
            own += whole[c * size + x] - counts[first + c * size + x]
        pool[table + x] = own
        rows += own - 1
    for x in range(levels):
        pool[table + x] /= rows
