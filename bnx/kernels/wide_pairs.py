"""All pairs of very many binary attributes in many training sets, keeping only pairs that could enter a forest.

For one attribute i and a tile of attributes j at a time, the records that have both are counted by block and class
(bit planes), added up for every training set (a plan of sums that the sets share), and compared with what the forests
hold already. What quick bounds cannot rule out is looked at closely; what then remains is kept for the caller.

Source: Karger, Klein & Tarjan 1995 (an edge weaker than all links between its ends enters no strongest forest).
"""

from typing import NamedTuple

import numpy as np

from bnx.kernels.bits import ones
from bnx.kernels.compiling import kernel, part
from bnx.kernels.forests import bottleneck
from bnx.kernels.skewness import third_moment
from bnx.kernels.wide_bounds import MARGIN, screen, uneven_of, variance_line

__all__ = ["FOREST", "TESTED", "Forests", "Kept", "Table", "Tests", "scan_pairs"]

FOREST, TESTED = 1, 2  # what a kept pair could enter: the forest of all pairs, that of tested ones


class Table(NamedTuple):
    """What is known of the records of S training sets.

    ``planes`` uint64 (n, words): bit r of word w: whether record r of that word has the attribute; ``words`` (G + 1,):
    first word of each group, group = block x C + class; ``plan`` int64 (K, 3): sums over blocks, see ``_add_up``;
    ``wanted`` (S,): the node that holds each set's sum; ``part`` float32 (S, C, PARTS, n): parts of the quick bounds;
    ``records`` float64 (S, C); ``logs``: n ln n; ``slack``: what rounding can do to nats x records.
    """

    planes: np.ndarray
    words: np.ndarray
    plan: np.ndarray
    wanted: np.ndarray
    part: np.ndarray
    records: np.ndarray
    logs: np.ndarray
    slack: float


class Forests(NamedTuple):
    """What S training sets hold, of all pairs (0) and of tested pairs (1).

    ``lows`` float32 (2, S, n): weakest links to the root; ``parents`` int32, ``links`` float64 (2, S, n): trees of
    joins, links in nats x records.
    """

    lows: np.ndarray
    parents: np.ndarray
    links: np.ndarray


class Tests(NamedTuple):
    """What a pair must reach to pass: ``limits`` (S, 2), ``ample`` (S, n), see ``screen``; ``tails``, ``deviates``, see
    ``_may_pass``.

    ``wanted``: whether forests of tested pairs are grown at all.
    """

    wanted: bool
    limits: np.ndarray
    ample: np.ndarray
    tails: np.ndarray
    deviates: np.ndarray


class Kept(NamedTuple):
    """What is written by one thread.

    ``nodes`` unsigned (M, C, tile): scratch; the first nodes are the blocks; ``kept`` int32 (S, room, 3): i, j, what
    the pair could enter; ``joints`` int32 (S, room, C): joint counts; ``numbers`` int64 (S,): how many are kept.
    """

    nodes: np.ndarray
    kept: np.ndarray
    joints: np.ndarray
    numbers: np.ndarray


@kernel
def scan_pairs(
    table: Table, forests: Forests, tests: Tests, out: Kept, first: int, width: int, start: int, stop: int
) -> int:
    """Go through the pairs (i, j), i from start to stop and first <= j < first + width, i < j, in S training sets.

    Returns:
        The first i that was not done: stop, or less where no room was left.
    """
    tile = np.zeros((table.planes.shape[1], out.nodes.shape[2]), np.uint64)
    for k in range(width):
        for w in range(tile.shape[0]):
            tile[w, k] = table.planes[first + k, w]
    classes, cells = out.nodes.shape[1], out.nodes.shape[2]
    blocks = (table.words.size - 1) // classes
    sums, work, hits = np.empty(cells, np.uint64), np.empty((3, cells), np.float32), np.empty(cells, np.uint8)
    margins = np.zeros((2, 2), np.int64)
    leaves = out.nodes[:blocks].reshape(blocks * classes, cells)
    nodes = out.nodes.reshape(out.nodes.shape[0], classes * cells)
    for i in range(start, stop):
        skip = max(0, i + 1 - first)
        if skip >= width:
            return stop
        if out.numbers.max() + width > out.kept.shape[1]:
            return i
        _count_tile(table.planes[i], tile, table.words, sums, leaves)
        _add_up(table.plan, nodes)
        for s in range(table.records.shape[0]):
            lows = (forests.lows[0, s], forests.lows[1, s])
            counts = out.nodes[table.wanted[s]]
            known, records = table.part[s], table.records[s]
            must = (tests.limits[s], tests.ample[s])
            if screen(counts, known, records, i, first, width, *lows, tests.wanted, *must, work, hits):
                for k in range(skip, width):
                    if hits[k]:
                        _keep(table, forests, tests, out, s, i, first + k, counts[:, k], margins)
    return stop


@part
def _keep(
    table: Table,
    forests: Forests,
    tests: Tests,
    out: Kept,
    s: int,
    i: int,
    j: int,
    joint: np.ndarray,
    margins: np.ndarray,
) -> None:
    """Keep one pair of one set if it could enter a forest. joint (C,): its counts; margins (2, 2): scratch."""
    known, records = table.part[s], table.records[s]
    nats = _nats(joint, known, records, i, j, table.logs) + table.slack
    enters = FOREST if _is_stronger(forests, 0, s, i, j, nats) else 0
    if tests.wanted and nats >= min(forests.lows[1, s, i], forests.lows[1, s, j]):
        may = _may_pass(joint, known, records, i, j, tests.tails[s], tests.deviates, margins)
        if may and _is_stronger(forests, 1, s, i, j, nats):
            enters += TESTED
    if enters:
        at = out.numbers[s]
        out.kept[s, at, 0], out.kept[s, at, 1], out.kept[s, at, 2] = i, j, enters
        for c in range(joint.size):
            out.joints[s, at, c] = joint[c]
        out.numbers[s] = at + 1


@part
def _is_stronger(forests: Forests, kind: int, s: int, i: int, j: int, nats: float) -> bool:
    """Tell whether a pair is at least as strong as the weakest link between its ends."""
    lows, parents, links = forests.lows[kind, s], forests.parents[kind, s], forests.links[kind, s]
    return nats >= min(lows[i], lows[j]) and nats >= bottleneck(parents, links, i, j)


@part
def _count_tile(own: np.ndarray, planes: np.ndarray, words: np.ndarray, sums: np.ndarray, leaves: np.ndarray) -> None:
    """Count the records that one attribute and each of a tile have in common, by group.

    own (words,) uint64: a bit per record of the one attribute; planes (words, tile): of the others; words (G + 1,):
    first word of each group; sums (tile,) uint64: scratch; leaves (G, tile): counts.
    """
    for g in range(words.size - 1):
        sums[:] = 0
        for w in range(words[g], words[g + 1]):
            x, plane = own[w], planes[w]
            for k in range(sums.size):
                sums[k] += ones(plane[k] & x)
        out = leaves[g]
        for k in range(sums.size):
            out[k] = sums[k]


@part
def _add_up(plan: np.ndarray, nodes: np.ndarray) -> None:
    """Fill in the sums of a plan: node plan[k, 0] is the sum of two nodes filled in before; nodes (M, cells)."""
    for k in range(plan.shape[0]):
        out, one, other = nodes[plan[k, 0]], nodes[plan[k, 1]], nodes[plan[k, 2]]
        for cell in range(out.size):
            out[cell] = one[cell] + other[cell]


@part
def _nats(joint: np.ndarray, known: np.ndarray, records: np.ndarray, i: int, j: int, logs: np.ndarray) -> float:
    """Compute nats x records of a pair from a table of n ln n."""
    total = 0.0
    for c in range(records.size):
        rows, left, right = int(records[c]), int(known[c, MARGIN, i]), int(known[c, MARGIN, j])
        both = int(joint[c])
        cells = logs[both] + logs[left - both] + logs[right - both] + logs[rows - left - right + both]
        total += cells - logs[left] - logs[rows - left] - logs[right] - logs[rows - right] + logs[rows]
    return total


@part
def _may_pass(
    joint: np.ndarray,
    known: np.ndarray,
    records: np.ndarray,
    i: int,
    j: int,
    tails: np.ndarray,
    deviates: np.ndarray,
    margins: np.ndarray,
) -> bool:
    """Tell whether a pair could pass: its X2 reaches the tail where Cochran's rule holds, else its standardised X2 the
    deviate of its skewness.

    tails (C + 1,): least X2 by degrees of freedom; deviates (2, K): skewnesses, rising evenly in logarithm, and the
    least deviates at each; margins (2, 2) int64: scratch.
    """
    x2, df, mean, variance, third, below, least = 0.0, 0, 0.0, 0.0, 0.0, 0, np.inf
    for c in range(records.size):
        rows, left, right = records[c], np.float64(known[c, MARGIN, i]), np.float64(known[c, MARGIN, j])
        if min(left, rows - left) == 0.0 or min(right, rows - right) == 0.0:
            continue
        d = float(joint[c]) * rows - left * right
        x2 += d * d * rows / (left * (rows - left) * right * (rows - right))
        df += 1
        mean += rows / (rows - 1.0)
        for first in (left, rows - left):
            for second in (right, rows - right):
                expected = first * second / rows
                least = min(least, expected)
                below += expected < 5.0
        margins[0, 0], margins[0, 1] = np.int64(left), np.int64(rows - left)
        margins[1, 0], margins[1, 1] = np.int64(right), np.int64(rows - right)
        third += third_moment(margins[0], 2, margins[1], 2, rows)
        if rows >= 3:
            flat, slope = variance_line(rows, uneven_of(left, rows))
            variance += flat + slope * uneven_of(right, rows)
    if df == 0:
        return False
    if least >= 1.0 and 5 * below <= 4 * df:
        return bool(x2 >= tails[df])
    if variance <= 1e-12 * mean:
        return x2 > mean
    spread = np.sqrt(variance)
    skewness = third / spread**3
    steps = deviates.shape[1] - 1
    place = 0
    if skewness > deviates[0, 0]:
        place = int(np.log(skewness / deviates[0, 0]) / np.log(deviates[0, steps] / deviates[0, 0]) * steps)
    deviate = deviates[1, max(0, min(place, steps))]
    return bool(x2 - mean >= (deviate - 1e-3 * (1.0 + abs(deviate))) * spread)
