"""What the information and the test of a pair of binary attributes can be at most, for many pairs at once.

With D = records x excess of the joint count over its expectation, X2 of a 2 x 2 table is D^2 q q', and its information
in nats x records is at most X2, and at most X2 / 2 - D^3 a a' + D^4 b b', where q, a, b belong to one attribute each:
for f(x) = (1 + x) ln(1 + x) - x <= x^2 / 2 - x^3 / 6 + x^4 / 3 when x >= -1 (the series), summed over cells with
x = +-D / (records E) and weight E. All in single precision, with room for its rounding.
"""

import numpy as np

from bnx.kernels.compiling import part

__all__ = ["MARGIN", "PARTS", "UNEVEN", "A", "B", "Q", "screen", "uneven_of", "variance_line"]

MARGIN, Q, A, B, UNEVEN = range(5)  # parts of an attribute: records, and what the formulas above take of them
PARTS = 5

_ROUNDING = np.float32(1.0 + 1e-4)  # of single precision, many times over
_SLIGHT = np.float32(1e-4)
_AMPLE = np.float32(5.0 * (1.0 + 1e-5))  # expected count from which Cochran's rule asks nothing more, and rounding


@part
def screen(
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
    ample: np.ndarray,
    work: np.ndarray,
    hits: np.ndarray,
) -> int:
    """Mark the pairs of a tile that the quick bounds cannot rule out, in ``hits`` (width,), and count them.

    counts (C, cells): joint counts; known (C, PARTS, n); records (C,); low, low_tested (n,) float32: weakest links to
    the root, in both forests; limits: least excess of X2, and least square of it in variances, of a pair that could
    pass the test, the latter only by its moments; ample (n,) float32: a pair whose product of these is at least 5 is
    tested by the chi-square tail.
    """
    most, excess, variance, mark = work[0, :width], work[1, :width], work[2, :width], hits[:width]
    work[:] = 0
    for c in range(records.size):
        if known[c, Q, i] > 0 and tested:
            _add_all(counts[c], known[c], first, records[c], i, most, excess, variance)
        elif known[c, Q, i] > 0:
            _add_most(counts[c], known[c], first, records[c], i, most)
    found = 0
    own, others = low[i], low[first : first + width]
    for k in range(width):
        bound = most[k] * _ROUNDING
        mark[k] = (bound > 0) & (bound >= min(own, others[k]))
    if tested:
        far, wide = np.float32(limits[0]), np.float32(limits[1])
        own, others = low_tested[i], low_tested[first : first + width]
        enough, plenty = ample[i], ample[first : first + width]
        for k in range(width):
            over = excess[k] * _ROUNDING + _SLIGHT
            unusual = (over > 0) & (over * over >= wide * variance[k]) & (enough * plenty[k] < _AMPLE)
            mark[k] |= ((over >= far) | unusual) & (most[k] * _ROUNDING >= min(own, others[k]))
    for k in range(width):
        found += mark[k]
    return found


@part
def _add_most(counts: np.ndarray, known: np.ndarray, first: int, records: float, i: int, most: np.ndarray) -> None:
    """Add what the information of one class can be at most, nats x records; known (PARTS, n) of this class."""
    margin, q, a, b = _of_tile(known, first, most.size)
    own, q_own, a_own, b_own = _of_one(known, records, i)
    for k in range(most.size):
        d = np.float32(np.float64(counts[k]) * records - own * np.float64(margin[k]))
        square = d * d
        most[k] += _most(d, square, square * (q[k] * q_own), a[k] * a_own, b[k] * b_own)


@part
def _add_all(
    counts: np.ndarray,
    known: np.ndarray,
    first: int,
    records: float,
    i: int,
    most: np.ndarray,
    excess: np.ndarray,
    variance: np.ndarray,
) -> None:
    """Add the same, and X2 of one class less its mean under independence, and its variance there.

    The variance is linear in UNEVEN of the other attribute.
    """
    margin, q, a, b = _of_tile(known, first, most.size)
    uneven = known[UNEVEN, first : first + most.size]
    own, q_own, a_own, b_own = _of_one(known, records, i)
    mean = np.float32(records / (records - 1.0)) if q_own > 0 else np.float32(0.0)
    start, rise = np.float32(0.0), np.float32(0.0)
    if records >= 3 and known[Q, i] > 0:
        flat, slope = variance_line(records, np.float64(known[UNEVEN, i]))
        start, rise = np.float32(flat - 1e-6 * (abs(flat) + abs(slope))), np.float32(slope)
    for k in range(most.size):
        d = np.float32(np.float64(counts[k]) * records - own * np.float64(margin[k]))
        square = d * d
        x2 = square * (q[k] * q_own)
        most[k] += _most(d, square, x2, a[k] * a_own, b[k] * b_own)
        varies = q[k] > 0
        excess[k] += x2 - (mean if varies else np.float32(0.0))
        variance[k] += (start if varies else np.float32(0.0)) + rise * uneven[k]


@part
def _of_tile(known: np.ndarray, first: int, width: int) -> tuple[np.ndarray, np.ndarray, np.ndarray, np.ndarray]:
    """Look at the parts of a tile of attributes."""
    stop = first + width
    return known[MARGIN, first:stop], known[Q, first:stop], known[A, first:stop], known[B, first:stop]


@part
def _of_one(known: np.ndarray, records: float, i: int) -> tuple[np.float64, np.float32, np.float32, np.float32]:
    """Scale the parts of the one attribute."""
    scale = np.float32(1.0 / records)
    thirds = (known[A, i] * scale / np.float32(6.0), known[B, i] * scale / np.float32(3.0))
    return np.float64(known[MARGIN, i]), known[Q, i] * scale, *thirds


@part
def _most(d: np.float32, square: np.float32, x2: np.float32, a: np.float32, b: np.float32) -> np.float32:
    """Bound the information of one class from above."""
    near = np.float32(0.5) * x2 - (square * d) * a + (square * square) * b
    return x2 if x2 < near else near


@part
def variance_line(records: float, uneven: float) -> tuple[float, float]:
    """Write the variance of X2 as flat + slope x UNEVEN of the other attribute.

    Source: Dawson 1954, as in ``contingency``.
    """
    both = (records - 2.0) / (records - 1.0)
    even = 2.0 * records / (records - 3.0) * (both - uneven) if records > 3 else 0.0
    return even * both, records * records / (records - 1.0) * uneven - even


@part
def uneven_of(margin: float, records: float) -> float:
    """Compute UNEVEN of an attribute with so many of the records."""
    gap = records - 2.0 * margin
    return gap * gap / (margin * (records - margin) * (records - 2.0))
