"""X2 of all pairs of a few attributes with all after them, given the class and without it, from bit planes alone."""

import math
from typing import NamedTuple

import numpy as np

from bnx.kernels.bits import ones
from bnx.kernels.compiling import inlined, kernel, part
from bnx.kernels.contingency import _variance
from bnx.kernels.skewness import third_moment
from bnx.kernels.wide_counts import EVEN, UNEQUAL

__all__ = ["LEAST", "MEAN", "THIRD", "VARIANCE", "WideRows", "Written", "moments_of_margins", "x2_of_pairs"]

MEAN, VARIANCE, THIRD, LEAST = range(4)  # of X2 given the margins; the least p that they allow

_TILE = 128  # attributes whose counts stand side by side
_X2, _DF, _LEAST, _BELOW = range(4)
_MOVES = EVEN | UNEQUAL
_SLIGHT = 1e-6  # of nats x records, which X2 bounds: what rounding can do, many times over


class WideRows(NamedTuple):
    """Rows of n binary attributes in C classes.

    ``planes`` (n, words) uint64; ``words`` (C + 1,): first word of each class; ``ones`` (C + 1, n) float64: records
    with the second level, ``records`` (C + 1,) float64: all; ``kinds`` (C + 1, n) int8: see
    `wide_counts.kinds_of_margins`. The last of C + 1 is all classes together.
    """

    planes: np.ndarray
    words: np.ndarray
    ones: np.ndarray
    records: np.ndarray
    kinds: np.ndarray


class Written(NamedTuple):
    """What is written of P pairs, each array (2, P): given the class, and without it.

    ``x2``: NaN where it cannot vary; ``df``; ``sparse``: whether it varies and Cochran's rule fails.
    """

    x2: np.ndarray
    df: np.ndarray
    sparse: np.ndarray


@kernel
def x2_of_pairs(
    rows: WideRows,
    start: int,
    stop: int,
    bound: float,
    given: Written,
    without: Written,
    hits: np.ndarray,
    nats: np.ndarray,
) -> int:
    """Test the pairs (i, j), start <= i < stop, i < j < n, in this order.

    bound: nats x records; hits, nats (P,): the places of the pairs that may have as many given the class, in any order,
    and how many they have.

    Returns:
        The number of hits.
    """
    attributes, classes = rows.planes.shape[0], rows.words.size - 1
    tile, joint = np.zeros((rows.planes.shape[1], _TILE), np.uint64), np.zeros((classes + 1, _TILE))
    sums, work, varies = np.zeros(_TILE, np.uint64), np.zeros((4, _TILE)), np.zeros(_TILE, np.int8)
    first, found = int(np.int64(0)), int(np.int64(0))
    for low in range(start + 1, attributes, _TILE):
        width = min(_TILE, attributes - low)
        for w in range(tile.shape[0]):
            for k in range(width):
                tile[w, k] = rows.planes[low + k, w]
        first = int(np.int64(0))
        for i in range(start, min(stop, low + width - 1)):
            skip, place = max(0, i + 1 - low), first + low - i - 1
            first += attributes - i - 1
            _count(rows.planes[i], tile, rows.words, sums, joint)
            _test(rows, joint, classes, classes + 1, i, low, width, work, varies)
            _write(work, varies, skip, width, place, without)
            _test(rows, joint, 0, classes, i, low, width, work, varies)
            _write(work, varies, skip, width, place, given)
            for k in range(skip, width):
                if work[_X2, k] * (1.0 + _SLIGHT) + _SLIGHT >= bound:
                    hits[found], nats[found] = place + k, _nats(rows, joint, i, low, k)
                    found += 1
    return found


@part
def _count(own: np.ndarray, tile: np.ndarray, words: np.ndarray, sums: np.ndarray, joint: np.ndarray) -> None:
    """Count the records that one attribute (words,) and each of a tile (words, tile) share: joint (C + 1, tile)."""
    classes = words.size - 1
    joint[classes] = 0.0
    for c in range(classes):
        sums[:] = 0
        for w in range(words[c], words[c + 1]):
            x, plane = own[w], tile[w]
            for k in range(sums.size):
                sums[k] += ones(plane[k] & x)
        for k in range(sums.size):
            joint[c, k] = np.float64(np.int64(sums[k]))
            joint[classes, k] += joint[c, k]


@part
def _test(
    rows: WideRows,
    joint: np.ndarray,
    begin: int,
    end: int,
    i: int,
    low: int,
    width: int,
    work: np.ndarray,
    varies: np.ndarray,
) -> None:
    """Sum up classes: X2, df, the least expected count and how many lie below 5 in work (4, tile), what can vary."""
    for k in range(width):
        work[_X2, k] = work[_DF, k] = work[_BELOW, k] = 0.0
        work[_LEAST, k] = np.inf
        varies[k] = 0
    for c in range(begin, end):
        records, margin = rows.records[c], rows.ones[c, i]
        if margin > 0.0 and margin < records:
            _add_class(joint[c], rows.ones[c, low : low + width], margin, records, work)
            own, others = rows.kinds[c, i], rows.kinds[c, low : low + width]
            for k in range(width):
                varies[k] |= own & others[k]


@part
def _add_class(
    joint: np.ndarray,
    margins: np.ndarray,
    margin: float,
    records: float,
    work: np.ndarray,
) -> None:
    """Add one class to the sums of ``_test``, in the order of ``contingency``, so that every digit is the same."""
    x2, df, smallest, below = work[_X2], work[_DF], work[_LEAST], work[_BELOW]
    rest = records - margin
    for k in range(margins.size):
        both, right = joint[k], margins[k]
        left = records - right
        live = (right > 0.0) & (left > 0.0)
        e00, e01, e10, e11 = rest * left / records, rest * right / records, margin * left / records, 0.0
        e11 = margin * right / records
        d00, d01, d10, d11 = rest - right + both - e00, right - both - e01, margin - both - e10, both - e11
        total = d00 * d00 * (1.0 / e00)
        total += d01 * d01 * (1.0 / e01)
        total += d10 * d10 * (1.0 / e10)
        total += d11 * d11 * (1.0 / e11)
        x2[k] += total if live else 0.0
        df[k] += 1.0 if live else 0.0
        least = min(e00, e01, e10, e11)
        smallest[k] = min(smallest[k], least) if live else smallest[k]
        few = (
            (1.0 if e00 < 5.0 else 0.0)
            + (1.0 if e01 < 5.0 else 0.0)
            + (1.0 if e10 < 5.0 else 0.0)
            + (1.0 if e11 < 5.0 else 0.0)
        )
        below[k] += few if live else 0.0


@part
def _write(work: np.ndarray, varies: np.ndarray, skip: int, width: int, place: int, out: Written) -> None:
    """Write the pairs of one attribute with a tile; Source: Cochran 1954 (the rule)."""
    x2, df, smallest, below = work[_X2], work[_DF], work[_LEAST], work[_BELOW]
    for k in range(skip, width):
        can = (varies[k] & _MOVES) != 0
        out.x2[place + k] = x2[k] if can else np.nan
        out.df[place + k] = np.int8(df[k])
        out.sparse[place + k] = can & ((smallest[k] < 1.0) | (5.0 * below[k] > 4.0 * df[k]))


@part
def _nats(rows: WideRows, joint: np.ndarray, i: int, low: int, k: int) -> float:
    """Compute nats x records of a pair given the class, in the order of ``contingency``."""
    result = 0.0
    for c in range(rows.words.size - 1):
        records, margin, right, both = rows.records[c], rows.ones[c, i], rows.ones[c, low + k], joint[c, k]
        if min(margin, records - margin) == 0.0 or min(right, records - right) == 0.0:
            continue
        own = _share(records - margin - right + both, (records - margin) * (records - right) / records)
        own += _share(right - both, (records - margin) * right / records)
        own += _share(margin - both, margin * (records - right) / records)
        result += own + _share(both, margin * right / records)
    return max(0.0, result)


@inlined
def _share(count: float, expected: float) -> float:
    return count * np.log(count * (1.0 / expected)) if count > 0.0 else 0.0


@kernel
def moments_of_margins(margins: np.ndarray, records: np.ndarray, left: np.ndarray, right: np.ndarray) -> np.ndarray:
    """Compute MEAN, VARIANCE, THIRD of X2, as in ``contingency``, and LEAST p, as in ``attainable``: (4, k).

    margins (C, n), records (C,) int64: with the second level, and all; left, right (k,): attributes of pairs.
    """
    logs = np.empty(records.max() + 1)
    for k in range(logs.size):
        logs[k] = math.lgamma(k + 1.0)
    result = np.zeros((4, left.size))
    down, across = np.zeros(2, np.int64), np.zeros(2, np.int64)
    for k in range(left.size):
        logarithm = 0.0
        for c in range(records.size):
            total = records[c]
            down[0], down[1] = total - margins[c, left[k]], margins[c, left[k]]
            across[0], across[1] = total - margins[c, right[k]], margins[c, right[k]]
            logarithm += _log_of_least(max(down[0], down[1]), max(across[0], across[1]), total, logs)
            if min(down[0], down[1], across[0], across[1]) > 0:
                result[MEAN, k] += total / (total - 1.0)
                result[VARIANCE, k] += _variance(down, 2, 2, across, 2, 2, float(total))
                result[THIRD, k] += third_moment(down, 2, across, 2, float(total))
        result[LEAST, k] = min(1.0, math.exp(logarithm))
    return result


@part
def _log_of_least(down: int, across: int, total: int, logs: np.ndarray) -> float:
    """Bound ln p of one class from below; down, across: the larger totals."""
    filled = min(_fullest(down, across, total, logs), _fullest(across, down, total, logs))
    lines, caps = logs[down] + logs[total - down], logs[across] + logs[total - across]
    return float(lines + caps - logs[total] - filled)


@part
def _fullest(line: int, cap: int, total: int, logs: np.ndarray) -> float:
    """Sum ln(n!) over two lines that fill two caps, the larger first; line, cap: the larger ones."""
    result = 0.0
    for filled in (line, total - line):
        result += logs[min(cap, filled)]
        if filled > cap:
            result += logs[min(total - cap, filled - cap)]
    return result
