"""Loops from counts of families to tables of log probabilities, and to what a table says between classes."""

import numpy as np

from bnx.kernels.compiling import inlined, kernel, part
from bnx.kernels.exponentials import logarithms

__all__ = ["drop_parent", "ratio_tables", "smoothed_shares", "smoothed_tables"]


@kernel
def smoothed_tables(
    counts: np.ndarray, sizes: np.ndarray, strengths: np.ndarray, laplace: np.ndarray, out: np.ndarray
) -> None:
    """Write the log table terms (nats) of one family under several smoothings.

    counts (C, cells) int32, cells numbered by ``sizes`` = (parents in the order taken..., child);
    strengths (V, 2), laplace (V,) bool: smoothing v is laplace with pseudo-count ``strengths[v, 0]``, else back-off
    with that many records given the class and ``strengths[v, 1]`` given parents too; out (cells, V * C): column
    ``v * C + c``.
    """
    classes, cells = counts.shape
    shares = np.empty((laplace.size * classes, cells))
    sums, work = np.empty(sizes.size * cells), np.empty(sizes.size * cells)
    smoothed_shares(counts, int(np.int64(0)), sizes, strengths, laplace, sums, work, shares)
    for column in range(shares.shape[0]):
        for cell in range(cells):
            out[cell, column] = np.log(shares[column, cell])


@kernel
def ratio_tables(
    counts: np.ndarray,
    starts: np.ndarray,
    sizes: np.ndarray,
    depths: np.ndarray,
    which: np.ndarray,
    strengths: np.ndarray,
    laplace: np.ndarray,
    out_starts: np.ndarray,
    out: np.ndarray,
) -> None:
    """Write what every cell of some families says for each class against the first: ln of the ratio of probabilities.

    counts (C, cells of all families) int32, family f from ``starts[f]`` on; sizes (F, M), of which the first ``depths``
    (F,) count; which (K,): the families wanted; strengths, laplace as in ``smoothed_tables``; out (rows, at least
    V * (C - 1)): wanted family k from row ``out_starts[k]`` on, column ``v * (C - 1) + c - 1`` for class c.
    """
    classes = counts.shape[0]
    most = 0
    for f in which:
        most = max(most, starts[f + 1] - starts[f])
    columns = laplace.size * classes
    room = np.empty(columns * most)
    sums, work = np.empty(sizes.shape[1] * most), np.empty(sizes.shape[1] * most)
    logs = np.empty(2 * columns * most)
    for k in range(which.size):
        f = which[k]
        cells = starts[f + 1] - starts[f]
        shares = room[: columns * cells].reshape(columns, cells)
        smoothed_shares(counts, starts[f], sizes[f, : depths[f]], strengths, laplace, sums, work, shares)
        _to_ratios(room, laplace.size, classes, cells)
        wanted = laplace.size * (classes - 1)
        logarithms(room[: wanted * cells], logs)
        table = out[out_starts[k] : out_starts[k] + cells]
        for column in range(wanted):
            for cell in range(cells):
                table[cell, column] = room[column * cells + cell]


@inlined
def _to_ratios(room: np.ndarray, options: int, classes: int, cells: int) -> None:
    """Replace the shares of each smoothing's classes by those of all but the first, each divided by the first."""
    for v in range(options):
        first = v * classes * cells
        to = v * (classes - 1) * cells
        # what is written never lies beyond what is read, and the first class of a smoothing is read before it goes
        for cell in range(cells):
            below = room[first + cell]
            for c in range(1, classes):
                room[first + c * cells + cell] /= below
        for k in range((classes - 1) * cells):
            room[to + k] = room[first + cells + k]


@part
def smoothed_shares(
    counts: np.ndarray,
    start: int,
    sizes: np.ndarray,
    strengths: np.ndarray,
    laplace: np.ndarray,
    sums: np.ndarray,
    work: np.ndarray,
    out: np.ndarray,
) -> None:
    """Smooth the family whose cells begin at ``start``: probabilities (V * C, cells).

    sums, work: room for the cells once a member.
    """
    (classes, _), cells = counts.shape, out.shape[1]
    depth = sizes.size - 1
    levels = sizes[depth]
    marginal = np.zeros(levels)
    for c in range(classes):
        x = 0
        for cell in range(cells):
            marginal[x] += counts[c, start + cell]
            x = x + 1 if x + 1 < levels else 0
    total = 0.0
    for x in range(levels):
        total += marginal[x]
    for x in range(levels):
        marginal[x] = (marginal[x] + 1.0) / (total + levels)
    upwards = 0
    for v in range(laplace.size):
        upwards += not laplace[v]
    for c in range(classes):
        first = _sum_up(counts[c], start, cells, sizes, upwards > 0, sums)
        for v in range(laplace.size):
            shares = out[v * classes + c]
            if laplace[v]:
                _laplace(sums[first : first + cells], levels, strengths[v, 0], shares)
            else:
                _back_off(sums, first, sizes, marginal, strengths[v, 0], strengths[v, 1], work, shares)


@inlined
def _sum_up(counts: np.ndarray, start: int, cells: int, sizes: np.ndarray, upwards: bool, sums: np.ndarray) -> int:
    """Lay the counts (cells,) of one class out behind their sums over the last parents, fewest parents first.

    Returns:
        Where the counts themselves begin. The sums are only made ``upwards`` if somebody needs them.
    """
    depth = sizes.size - 1
    levels = sizes[depth]
    first, contexts = 0, 1
    for d in range(depth):
        first += contexts * levels
        contexts *= sizes[d]
    for cell in range(cells):
        sums[first + cell] = counts[start + cell]
    at = first
    for d in range(depth if upwards else 0, 0, -1):
        fewer = contexts // sizes[d - 1]
        below = at - fewer * levels
        for k in range(fewer):
            for x in range(levels):
                together = 0.0
                for j in range(sizes[d - 1]):
                    together += sums[at + (k * sizes[d - 1] + j) * levels + x]
                sums[below + k * levels + x] = together
        at, contexts = below, fewer
    return first


@inlined
def _laplace(counts: np.ndarray, levels: int, amount: float, out: np.ndarray) -> None:
    """Add ``amount`` records to every cell and divide by the records of its context."""
    for at in range(0, counts.size, levels):
        rows = 0.0
        for x in range(levels):
            rows += counts[at + x]
        for x in range(levels):
            out[at + x] = (counts[at + x] + amount) / (rows + amount * levels)


@inlined
def _back_off(
    sums: np.ndarray,
    first: int,
    sizes: np.ndarray,
    marginal: np.ndarray,
    amount: float,
    deeper: float,
    work: np.ndarray,
    out: np.ndarray,
) -> None:
    """Add records spread like the table with one parent less, from the fewest parents on.

    ``amount`` of them given the class, ``deeper`` given parents too.
    """
    depth = sizes.size - 1
    levels = sizes[depth]
    at, before, contexts = 0, 0, 1
    for d in range(depth + 1):
        siblings = sizes[d - 1] if d else 1
        added = deeper if d else amount
        for k in range(contexts):
            here = at + k * levels
            above = before + (k // siblings) * levels
            rows = 0.0
            for x in range(levels):
                rows += sums[here + x]
            for x in range(levels):
                less = work[above + x] if d else marginal[x]
                work[here + x] = (sums[here + x] + added * less) / (rows + added)
        before = at
        at += contexts * levels
        contexts *= sizes[d] if d < depth else 1
    for cell in range(out.size):
        out[cell] = work[first + cell]


@kernel
def drop_parent(
    counts: np.ndarray,
    starts: np.ndarray,
    sizes: np.ndarray,
    depths: np.ndarray,
    which: np.ndarray,
    places: np.ndarray,
    out_starts: np.ndarray,
    out: np.ndarray,
) -> None:
    """Sum the counts of families over the levels of one parent each.

    counts, starts, sizes, depths as in ``ratio_tables``; family ``which[k]`` loses the parent in place ``places[k]``;
    out (C, cells) int32, zeros: the sums from ``out_starts[k]`` on.
    """
    for k in range(which.size):
        f, place = which[k], places[k]
        after = 1
        for m in range(place + 1, depths[f]):
            after *= sizes[f, m]
        step = after * sizes[f, place]
        for c in range(counts.shape[0]):
            for cell in range(starts[f + 1] - starts[f]):
                to = out_starts[k] + (cell // step) * after + cell % after
                out[c, to] += counts[c, starts[f] + cell]
