"""From counts by block and class straight to the statistics of every training set; no table is kept."""

from typing import NamedTuple

import numpy as np

from bnx.kernels.compiling import inlined, kernel, part
from bnx.kernels.contingency import add_table
from bnx.kernels.merging import merge_cells

__all__ = [
    "Blocks",
    "Sets",
    "blocks_of_masks",
    "complete_tables",
    "reduce_family",
    "reduce_table",
    "reduce_tile",
    "sum_all",
    "sum_set",
]


class Blocks(NamedTuple):
    """What K training sets hold of B blocks.

    ``blocks`` (K, B), of which the first ``numbers`` (K,) count: the blocks to be added up, or, where ``missing`` (K,)
    bool, those to be taken off all.
    """

    blocks: np.ndarray
    numbers: np.ndarray
    missing: np.ndarray

    def of(self, number: int) -> tuple[np.ndarray, int, bool]:
        """Look up one set."""
        return self.blocks[number], int(self.numbers[number]), bool(self.missing[number])

    def take(self, chosen: np.ndarray) -> "Blocks":
        """Keep some sets, in this order."""
        return Blocks(self.blocks[chosen], self.numbers[chosen], self.missing[chosen])


class Sets(NamedTuple):
    """K training sets over C classes, as the reduction of pairs reads them.

    ``starts`` (n + 1,): first level of each attribute in ``margins`` (K, C, levels) int32 rows, and in ``levels``
    (K, levels) int32: what a set takes it for, of ``sizes`` (K, n), -1 if its rows do not count; ``plain`` (n,) bool:
    in every set for itself.
    """

    blocks: Blocks
    starts: np.ndarray
    margins: np.ndarray
    levels: np.ndarray
    sizes: np.ndarray
    plain: np.ndarray


def blocks_of_masks(masks: np.ndarray) -> Blocks:
    """Say which blocks to add up, or to take off all where those are fewer; masks (K, B) bool: blocks of each set."""
    missing = 2 * masks.sum(axis=1) > masks.shape[1]
    named = masks != missing[:, None]
    return Blocks(np.argsort(~named, axis=1, kind="stable"), named.sum(axis=1), missing)


@kernel
def reduce_tile(
    counts: np.ndarray,
    stride: int,
    places: np.ndarray,
    left: np.ndarray,
    right: np.ndarray,
    numbers: np.ndarray,
    sets: Sets,
    first: int,
    last: int,
    out: np.ndarray,
    marginal: np.ndarray,
) -> None:
    """Compute the statistics of the pairs ``first:last`` of a tile in every set.

    counts (B * C, cells) int32: without the last levels, which follow from the margins; places (P,): first cell of each
    pair, the next row ``stride`` further on; left, right (P,): its attributes; numbers (P,): its place in ``out``
    (K, pairs, COLUMNS), zero on entry, and in ``marginal`` (pairs or 0, COLUMNS): the first set without the class.
    """
    groups, classes, blocks = counts.shape[0], sets.margins.shape[1], sets.blocks
    most, levels = int(np.int64(1)), int(np.int64(1))  # numba compiles a part anew for a literal
    for p in range(first, last):
        h = sets.starts[left[p] + 1] - sets.starts[left[p]]
        w = sets.starts[right[p] + 1] - sets.starts[right[p]]
        most, levels = max(most, h * w), max(levels, h, w)
    own = np.empty(groups * most, np.int32)
    total, some = np.empty((classes, most), np.int32), np.empty((classes, most), np.int32)
    rooms = _rooms(classes, most, levels)
    for p in range(first, last):
        i, j = left[p], right[p]
        h, w = sets.starts[i + 1] - sets.starts[i] - 1, sets.starts[j + 1] - sets.starts[j] - 1
        cells = h * w
        mine = own[: groups * cells].reshape(groups, cells)
        for g in range(groups):
            for a in range(h):
                for b in range(w):
                    mine[g, a * w + b] = counts[g, places[p] + a * stride + b]
        sum_all(mine, classes, total)
        for k in range(blocks.numbers.size):
            sum_set(mine, classes, blocks.blocks[k], blocks.numbers[k], blocks.missing[k], total, some)
            for c in range(classes):
                down = sets.margins[k, c, sets.starts[i] : sets.starts[i + 1]]
                across = sets.margins[k, c, sets.starts[j] : sets.starts[j + 1]]
                _complete(some[c], h + 1, w + 1, down, across, rooms[0][c])
            _finish(sets, k, i, j, rooms, out[k, numbers[p]])
            if k == 0 and marginal.shape[0]:
                _marginal(sets, i, j, rooms, marginal[numbers[p]])


@kernel
def reduce_table(counts: np.ndarray, i: int, j: int, sets: Sets, out: np.ndarray, marginal: np.ndarray) -> None:
    """Compute the statistics of one pair of attributes in every set from whole tables (B * C, cells) int32.

    out (K, COLUMNS), zero on entry; marginal (1 or 0, COLUMNS): the first set without the class.
    """
    classes, cells, blocks = sets.margins.shape[1], counts.shape[1], sets.blocks
    height, width = sets.starts[i + 1] - sets.starts[i], sets.starts[j + 1] - sets.starts[j]
    total = np.empty((classes, cells), np.int32)
    rooms = _rooms(classes, cells, max(height, width))
    sum_all(counts, classes, total)
    for k in range(blocks.numbers.size):
        sum_set(counts, classes, blocks.blocks[k], blocks.numbers[k], blocks.missing[k], total, rooms[0])
        _finish(sets, k, i, j, rooms, out[k])
        if k == 0 and marginal.shape[0]:
            _marginal(sets, i, j, rooms, marginal[0])


@kernel
def reduce_family(
    counts: np.ndarray,
    total: np.ndarray,
    blocks: Blocks,
    sizes: np.ndarray,
    starts: np.ndarray,
    levels: np.ndarray,
    seen: np.ndarray,
    plain: bool,
    out: np.ndarray,
) -> None:
    """Compute the statistics of the last two members of a family given the class and the members before, in K sets.

    counts (B * C, cells) int32 and total (C, cells): joint levels of ``sizes`` (m,), the last fastest; unless
    ``plain``, set k takes level x of member m for ``levels[k, starts[m] + x]``, of ``seen`` (K, m); out (K, COLUMNS),
    of zeros.
    """
    classes, cells = total.shape
    whole, merged = np.empty((classes, cells), np.int32), np.empty(classes * cells, np.int32)
    members = sizes.size
    down, across = np.empty(sizes[members - 2], np.int64), np.empty(sizes[members - 1], np.int64)
    for k in range(blocks.numbers.size):
        sum_set(counts, classes, blocks.blocks[k], blocks.numbers[k], blocks.missing[k], total, whole)
        height, width = seen[k, members - 2], seen[k, members - 1]
        if plain:
            tables = whole.reshape(classes * cells // (height * width), height * width)
        else:
            own = 1
            for size in seen[k]:
                own *= size
            flat = merged[: classes * own]
            for x in range(flat.size):
                flat[x] = 0
            merge_cells(whole, sizes, starts, levels[k], seen[k], flat.reshape(classes, own))
            tables = flat.reshape(classes * own // (height * width), height * width)
        add_table(tables, int(np.int64(0)), height, width, down, across, out[k])


@kernel
def complete_tables(
    counts: np.ndarray,
    stride: int,
    places: np.ndarray,
    left: np.ndarray,
    right: np.ndarray,
    starts: np.ndarray,
    margins: np.ndarray,
    offsets: np.ndarray,
    first: int,
    last: int,
    out: np.ndarray,
) -> None:
    """Write out the whole tables of a tile's pairs in the groups ``first:last``.

    margins (G, levels): rows of each level, those of attribute i from ``starts[i]`` on; offsets (P,): where pair p's
    table begins in out (G, cells); else as ``reduce_tile``.
    """
    compact = np.empty(1, np.int32)
    for g in range(first, last):
        for p in range(places.size):
            i, j = left[p], right[p]
            h, w = starts[i + 1] - starts[i] - 1, starts[j + 1] - starts[j] - 1
            if compact.size < h * w:
                compact = np.empty(h * w, np.int32)
            for a in range(h):
                for b in range(w):
                    compact[a * w + b] = counts[g, places[p] + a * stride + b]
            down, across = margins[g, starts[i] : starts[i + 1]], margins[g, starts[j] : starts[j + 1]]
            _complete(compact, h + 1, w + 1, down, across, out[g, offsets[p] :])


@inlined
def _rooms(classes: int, cells: int, levels: int) -> tuple[np.ndarray, np.ndarray, np.ndarray, np.ndarray, np.ndarray]:
    """Make room for whole tables, merged tables, a pooled table and two margins."""
    whole, merged = np.empty((classes, cells), np.int32), np.empty((classes, cells), np.int32)
    pooled = np.empty((1, cells), np.int32)
    return whole, merged, pooled, np.empty(levels, np.int64), np.empty(levels, np.int64)


@kernel
def sum_all(counts: np.ndarray, classes: int, total: np.ndarray) -> None:
    """Add up all blocks by class."""
    cells = counts.shape[1]
    for c in range(classes):
        mine = total[c, :cells]
        for x in range(cells):
            mine[x] = 0
        for g in range(c, counts.shape[0], classes):
            more = counts[g]
            for x in range(cells):
                mine[x] += more[x]


@kernel
def sum_set(
    counts: np.ndarray, classes: int, blocks: np.ndarray, number: int, missing: bool, total: np.ndarray, out: np.ndarray
) -> None:
    """Add up the blocks of one set by class; where fewer are left out, take those off all."""
    cells = counts.shape[1]
    for c in range(classes):
        mine = out[c, :cells]
        for x in range(cells):
            mine[x] = 0
        for at in range(number):
            more = counts[blocks[at] * classes + c]
            for x in range(cells):
                mine[x] += more[x]
        if missing:
            for x in range(cells):
                mine[x] = total[c, x] - mine[x]


@inlined
def _complete(
    compact: np.ndarray, height: int, width: int, down: np.ndarray, across: np.ndarray, out: np.ndarray
) -> None:
    """Write a whole table from the cells of all levels but the last and its margins."""
    last = width - 1
    for a in range(height - 1):
        seen = 0
        for b in range(last):
            count = compact[a * last + b]
            out[a * width + b] = count
            seen += count
        out[a * width + last] = down[a] - seen
    for b in range(width):
        seen = 0
        for a in range(height - 1):
            seen += out[a * width + b]
        out[(height - 1) * width + b] = across[b] - seen


@part
def _finish(
    sets: Sets,
    k: int,
    i: int,
    j: int,
    rooms: tuple[np.ndarray, np.ndarray, np.ndarray, np.ndarray, np.ndarray],
    row: np.ndarray,
) -> None:
    """See the whole tables as set k does, and compute their statistics."""
    whole, merged, _, down, across = rooms
    height, width = sets.sizes[k, i], sets.sizes[k, j]
    if sets.plain[i] and sets.plain[j]:
        add_table(whole, int(np.int64(0)), height, width, down, across, row)
        return
    first, second = sets.starts[i], sets.starts[j]
    rows, columns = sets.starts[i + 1] - first, sets.starts[j + 1] - second
    for c in range(whole.shape[0]):
        for x in range(height * width):
            merged[c, x] = 0
        for a in range(rows):
            x = sets.levels[k, first + a]
            for b in range(columns):
                y = sets.levels[k, second + b]
                if x >= 0 and y >= 0:
                    merged[c, x * width + y] += whole[c, a * columns + b]
    add_table(merged, int(np.int64(0)), height, width, down, across, row)


@part
def _marginal(
    sets: Sets,
    i: int,
    j: int,
    rooms: tuple[np.ndarray, np.ndarray, np.ndarray, np.ndarray, np.ndarray],
    row: np.ndarray,
) -> None:
    """Compute the statistics of the first set's tables added up over the classes."""
    whole, merged, pooled, down, across = rooms
    height, width = sets.sizes[0, i], sets.sizes[0, j]
    tables = whole if sets.plain[i] and sets.plain[j] else merged
    for x in range(height * width):
        pooled[0, x] = 0
    for c in range(tables.shape[0]):
        for x in range(height * width):
            pooled[0, x] += tables[c, x]
    add_table(pooled, int(np.int64(0)), height, width, down, across, row)
