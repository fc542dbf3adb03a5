"""All pairs of very many binary attributes in many training sets, keeping only pairs that could enter a forest.

For one attribute i and a tile of attributes j at a time, the records that have both are counted by block and class
(bit planes), added up for every training set (a plan of sums that the sets share), and compared with what the forests
hold already. What a quick bound cannot rule out is looked at closely; what then remains is kept for the caller.

With D = records x excess of the joint count over its expectation, X2 of a 2 x 2 table is D^2 q q', and its information
in nats x records is at most X2, and at most X2 / 2 - D^3 a a' + D^4 b b', where q, a, b belong to one attribute each:
for f(x) = (1 + x) ln(1 + x) - x <= x^2 / 2 - x^3 / 6 + x^4 / 3 when x >= -1 (the series), summed over cells with
x = +-D / (records E) and weight E.

Source: Karger, Klein & Tarjan 1995 (an edge weaker than all links between its ends enters no strongest forest).
"""

import numpy as np

from bnx.kernels.bits import ones
from bnx.kernels.compiling import kernel, part
from bnx.kernels.forests import bottleneck
from bnx.kernels.skewness import third_moment

__all__ = ["A", "B", "FOREST", "MARGIN", "PARTS", "Q", "TESTED", "UNEVEN", "scan_pairs"]

MARGIN, Q, A, B, UNEVEN = range(5)  # parts of an attribute: records, and what the formulas above take of them
PARTS = 5

FOREST, TESTED = 1, 2  # what a kept pair could enter: the forest of all pairs, that of tested ones

_ROUNDING = np.float32(1.0 + 1e-4)  # of single precision, many times over
_SLIGHT = np.float32(1e-4)


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
def _add_most(counts: np.ndarray, known: np.ndarray, first: int, records: float, i: int, most: np.ndarray) -> None:
    """Add what the information of one class can be at most, nats x records; known (PARTS, n) of this class."""
    margin, own = known[MARGIN, first : first + most.size], np.float64(known[MARGIN, i])
    q, a, b = (
        known[Q, first : first + most.size],
        known[A, first : first + most.size],
        known[B, first : first + most.size],
    )
    scale = np.float32(1.0 / records)
    q_own, a_own, b_own = known[Q, i] * scale, known[A, i] * scale / np.float32(6.0), known[B, i] * scale / np.float32(3.0)
    half = np.float32(0.5)
    for k in range(most.size):
        d = np.float32(np.float64(counts[k]) * records - own * np.float64(margin[k]))
        square = d * d
        x2 = square * (q[k] * q_own)
        near = half * x2 - (square * d) * (a[k] * a_own) + (square * square) * (b[k] * b_own)
        most[k] += min(x2, near)


@part
def _add_excess(counts: np.ndarray, known: np.ndarray, first: int, records: float, i: int, excess: np.ndarray) -> None:
    """Add X2 of one class less its mean under independence."""
    margin, own = known[MARGIN, first : first + excess.size], np.float64(known[MARGIN, i])
    q, q_own = known[Q, first : first + excess.size], known[Q, i] * np.float32(1.0 / records)
    mean = np.float32(records / (records - 1.0)) if q_own > 0 else np.float32(0.0)
    for k in range(excess.size):
        d = np.float32(np.float64(counts[k]) * records - own * np.float64(margin[k]))
        excess[k] += d * d * (q[k] * q_own) - (mean if q[k] > 0 else np.float32(0.0))


@part
def _add_variance(known: np.ndarray, first: int, records: float, i: int, variance: np.ndarray) -> None:
    """Add the variance of X2 of one class under independence, which is linear in UNEVEN of the other attribute."""
    if records < 3 or known[Q, i] == 0:
        return
    q, uneven = known[Q, first : first + variance.size], known[UNEVEN, first : first + variance.size]
    flat, slope = _line(records, np.float64(known[UNEVEN, i]))
    start, rise = np.float32(flat - 1e-6 * (abs(flat) + abs(slope))), np.float32(slope)
    for k in range(variance.size):
        variance[k] += (start if q[k] > 0 else np.float32(0.0)) + rise * uneven[k]


@part
def _line(records: float, uneven: float) -> tuple[float, float]:
    """Write the variance of X2 as flat + slope x UNEVEN of the other attribute.

    Source: Dawson 1954, as in ``contingency``.
    """
    both = (records - 2.0) / (records - 1.0)
    even = 2.0 * records / (records - 3.0) * (both - uneven) if records > 3 else 0.0
    return even * both, records * records / (records - 1.0) * uneven - even


@part
def _screen(
    counts: np.ndarray,
    known: np.ndarray,
    records: np.ndarray,
    i: int,
    first: int,
    width: int,
    low: np.ndarray,
    low_tested: np.ndarray,
    tested: bool,
    limits: np.ndarray,
    work: np.ndarray,
    hits: np.ndarray,
) -> int:
    """Mark the pairs of a tile that the quick bounds cannot rule out, in ``hits`` (width,), and count them.

    counts (C, cells): joint counts; known (C, PARTS, n); records (C,); low, low_tested (n,) float32: weakest links to
    the root, in both forests; limits: least excess of X2, and least square of it in variances, of a pair that could
    pass the test.
    """
    most, excess, variance, mark = work[0, :width], work[1, :width], work[2, :width], hits[:width]
    most[:] = 0
    for c in range(records.size):
        if known[c, Q, i] > 0:
            _add_most(counts[c], known[c], first, records[c], i, most)
    found = 0
    own, others = low[i], low[first : first + width]
    for k in range(width):
        bound = most[k] * _ROUNDING
        mark[k] = (bound > 0) & (bound >= min(own, others[k]))
    if tested:
        excess[:] = 0
        variance[:] = 0
        for c in range(records.size):
            if known[c, Q, i] > 0:
                _add_excess(counts[c], known[c], first, records[c], i, excess)
                _add_variance(known[c], first, records[c], i, variance)
        far, wide = np.float32(limits[0]), np.float32(limits[1])
        own, others = low_tested[i], low_tested[first : first + width]
        for k in range(width):
            over = excess[k] * _ROUNDING + _SLIGHT
            far_out = (over >= far) | ((over > 0) & (over * over >= wide * variance[k]))
            mark[k] |= far_out & (most[k] * _ROUNDING >= min(own, others[k]))
    for k in range(width):
        found += mark[k]
    return found


@part
def _nats(joint: np.ndarray, known: np.ndarray, records: np.ndarray, i: int, j: int, logs: np.ndarray) -> float:
    """Compute nats x records of a pair from a table of n ln n."""
    total = 0.0
    for c in range(records.size):
        rows, left, right, both = int(records[c]), int(known[c, MARGIN, i]), int(known[c, MARGIN, j]), joint[c]
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
        d = joint[c] * rows - left * right
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
            flat, slope = _line(rows, _uneven(left, rows))
            variance += flat + slope * _uneven(right, rows)
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


@part
def _uneven(margin: float, records: float) -> float:
    """Compute UNEVEN of an attribute with so many of the records."""
    gap = records - 2.0 * margin
    return gap * gap / (margin * (records - margin) * (records - 2.0))


@kernel
def scan_pairs(
    planes: np.ndarray,
    words: np.ndarray,
    plan: np.ndarray,
    wanted: np.ndarray,
    nodes: np.ndarray,
    known: np.ndarray,
    records: np.ndarray,
    lows: np.ndarray,
    parents: np.ndarray,
    links: np.ndarray,
    tested: bool,
    limits: np.ndarray,
    tails: np.ndarray,
    deviates: np.ndarray,
    logs: np.ndarray,
    slack: float,
    first: int,
    width: int,
    start: int,
    stop: int,
    kept: np.ndarray,
    joints: np.ndarray,
    numbers: np.ndarray,
) -> int:
    """Go through the pairs (i, j), i from start to stop and first <= j < first + width, i < j, in S training sets.

    Args:
        planes: uint64 (n, words), bit r of word w: whether record r of that word has the attribute.
        words: int64 (G + 1,), first word of each group; group = block x C + class.
        plan: int64 (K, 3), sums over blocks, see ``_add_up``.
        wanted: int64 (S,), the node that holds each set's sum.
        nodes: unsigned (M, C, tile), scratch; the first nodes are the blocks.
        known: float32 (S, C, PARTS, n).
        records: float64 (S, C).
        lows: float32 (2, S, n), weakest links to the root: in the forest of all pairs, in that of tested pairs.
        parents: int32 (2, S, n), trees of joins.
        links: float64 (2, S, n), their links, nats x records.
        tested: whether forests of tested pairs are grown too.
        limits: float64 (S, 2), see ``_screen``.
        tails: float64 (S, C + 1), see ``_may_pass``.
        deviates: float64 (2, K), see ``_may_pass``.
        logs: float64, n ln n.
        slack: what rounding can do to nats x records.
        kept: int32 (S, capacity, 3), out: i, j, what each pair could enter.
        joints: int32 (S, capacity, C), out: joint counts.
        numbers: int64 (S,), how many are kept, added to.

    Returns:
        The first i that was not done: stop, or less where no room was left.
    """
    sets, classes = known.shape[:2]
    blocks = (words.size - 1) // classes
    tile = np.zeros((planes.shape[1], nodes.shape[2]), np.uint64)
    for k in range(width):
        tile[:, k] = planes[first + k]
    sums = np.empty(nodes.shape[2], np.uint64)
    work = np.empty((3, nodes.shape[2]), np.float32)
    hits = np.empty(nodes.shape[2], np.uint8)
    margins = np.zeros((2, 2), np.int64)
    leaves = nodes[:blocks].reshape(blocks * classes, nodes.shape[2])
    flat = nodes.reshape(nodes.shape[0], classes * nodes.shape[2])
    for i in range(start, stop):
        skip = max(0, i + 1 - first)
        if skip >= width:
            return stop
        if numbers.max() + width > kept.shape[1]:
            return i
        _count_tile(planes[i], tile, words, sums, leaves)
        _add_up(plan, flat)
        for s in range(sets):
            counts = nodes[wanted[s]]
            found = _screen(
                counts, known[s], records[s], i, first, width, lows[0, s], lows[1, s], tested, limits[s], work, hits
            )
            if found == 0:
                continue
            for k in range(skip, width):
                if hits[k]:
                    j = first + k
                    at = numbers[s]
                    joint = joints[s, at]
                    for c in range(classes):
                        joint[c] = counts[c, k]
                    nats = _nats(joint, known[s], records[s], i, j, logs) + slack
                    enters = 0
                    if nats >= min(lows[0, s, i], lows[0, s, j]) and nats >= bottleneck(parents[0, s], links[0, s], i, j):
                        enters = 1
                    if (
                        tested
                        and nats >= min(lows[1, s, i], lows[1, s, j])
                        and _may_pass(joint, known[s], records[s], i, j, tails[s], deviates, margins)
                        and nats >= bottleneck(parents[1, s], links[1, s], i, j)
                    ):
                        enters |= 2
                    if enters:
                        kept[s, at, 0], kept[s, at, 1], kept[s, at, 2] = i, j, enters
                        numbers[s] = at + 1
    return stop
