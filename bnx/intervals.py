"""Bounds of the bits that two attributes share within strata, and the fewest bits that a test would detect.

In nats, 2 x rows x (true information) is called lambda. To first order G is lambda, plus a normal part whose variance
is 4 x rows x the variance of the log ratio over records, plus a chi-square part. The non-central chi-square
distribution has the same parts, but its normal part has variance 4 lambda: right for weak dependence only. Here

    G - lambda (1 - s)  ~  non-central chi-square (df, s lambda),    s = variance of the log ratio / (2 x information)

which has G's mean, df + lambda, and G's variance, 2 df + 4 s lambda, at any strength. Weak dependence gives s = 1.
Along one direction of dependence, s - 1 is to first order proportional to the root of lambda, and so it is taken
wherever a bound is sought. The bounds are the lambdas at which G is as rare as the level says.

Four choices err towards the wider interval. The chi-square part pulls the observed s towards 1; this is undone, at
most by a factor of 2, only where s > 1. Where s < 1 it falls no further above the observed lambda. G runs high on
small counts; its excess is taken off for lower bounds only. A G below df is taken for df when a bound from above is
sought, or a sample that shows less than chance would claim to prove more than any other.

Source: Kullback 1959 (G and the non-central chi-square); Agresti 2002, section 14.1 (variance by the delta
method); Miller 1955 (mean); Williams 1976, Biometrika 63 (excess of G). Putting them together is this program's own;
`tests/test_intervals.py` measures the coverage.
"""

from dataclasses import dataclass, replace

import numpy as np
from scipy.special import chdtri, chndtr, chndtrinc, ndtri

from bnx.independence import Statistics

__all__ = ["bits_interval", "bits_upper", "detectable_bits"]

_POWER = 0.8
_LEAST_NATS = 1e-6  # below, rounding decides the ratio of two sums near 0
_LEAST_SCALE = 0.05
_MOST_STRETCH = 2.0
_LARGE = 2000.0  # beyond (and 10 df), Sankaran errs by less than 1e-6 of lambda at 95 %, and the series grows slow
_FARTHEST = 8.0  # standard deviations
_FLATTEST = -1e-3
_NEAR = 1e-4
_CLOSE = 2e-6  # of lambda; the step after that would be smaller by the error of the slope
_STEPS = 100


def bits_interval(stats: Statistics, level: float = 0.95) -> tuple[np.ndarray, np.ndarray]:
    """Bound the bits from both sides; NaN where Cochran's rule fails. Two arrays, (P,)."""
    tail = (1.0 - level) / 2.0
    return _bound(stats, 1.0 - tail), _bound(stats, tail)


def bits_upper(stats: Statistics, level: float = 0.95) -> np.ndarray:
    """Bound the bits from above only; NaN where Cochran's rule fails. (P,)."""
    return _bound(stats, 1.0 - level)


def detectable_bits(at: float, df: np.ndarray, rows: np.ndarray) -> np.ndarray:
    """Find the fewest bits that a test at the threshold ``at`` rejects with power .80, (P,); NaN without a df.

    The statistic is then non-central chi-square with non-centrality 2 x rows x bits x ln 2. That holds for weak
    dependence, and for G longer than for X2, whose own non-centrality is rows x phi^2: more where a rare cell is too
    full, less where it is too empty.

    Source: Cohen 1988, chapter 7 (power of chi-square tests).
    """
    kinds, which = np.unique(np.asarray(df, dtype=np.float64), return_inverse=True)
    usable = np.maximum(1.0, kinds)
    noncentrality = chndtrinc(chdtri(usable, at), usable, 1.0 - _POWER)
    noncentrality[kinds <= 0] = np.nan
    bits: np.ndarray = noncentrality[which] / (2.0 * rows * np.log(2))
    return bits


@dataclass(frozen=True)
class _Law:
    """How G is distributed given lambda, for P pairs, each array (P,): ``lean`` is s - 1 at lambda = ``g``."""

    statistic: np.ndarray
    df: np.ndarray
    g: np.ndarray
    lean: np.ndarray

    @classmethod
    def of(cls, stats: Statistics, excess: np.ndarray | float) -> "_Law":
        """Read it off the statistics; ``excess`` is taken off G."""
        known = stats.nats > _LEAST_NATS
        g = np.where(known, stats.g, 1.0)
        lean = np.where(known, (stats.nats_squared - stats.nats**2 / stats.rows) / g - 1.0, 0.0)
        stretch = g / np.maximum(g - stats.df, g / _MOST_STRETCH)
        return cls(np.maximum(0.0, stats.g - excess), stats.df, g, np.where(lean > 0, lean * stretch, lean))

    def at_least_chance(self) -> "_Law":
        """Take a G below its mean under independence for that mean: to be unusually small is no evidence."""
        return replace(self, statistic=np.maximum(self.statistic, self.df))

    def take(self, chosen: np.ndarray) -> "_Law":
        """Keep the chosen pairs."""
        return _Law(self.statistic[chosen], self.df[chosen], self.g[chosen], self.lean[chosen])

    def deviates(self, root: np.ndarray, exact: bool) -> np.ndarray:
        """Find the normal deviates that are as rare as the statistics, (P,), if root^2 = lambda + df / 2."""
        information = np.maximum(0.0, root * root - self.df / 2.0)
        grown = np.sqrt(information / self.g)
        scale = np.maximum(_LEAST_SCALE, 1.0 + self.lean * np.where(self.lean < 0, np.minimum(1.0, grown), grown))
        x = np.maximum(0.0, self.statistic - information * (1.0 - scale))
        found = ndtri(chndtr(x, self.df, information * scale)) if exact else _sankaran(x, self.df, information * scale)
        return np.clip(found, -_FARTHEST, _FARTHEST)

    def slope(self, root: np.ndarray) -> np.ndarray:
        """Approximate the slope of the deviates, (P,)."""
        rise = self.deviates(root * (1.0 + _NEAR), False) - self.deviates(root, False)
        slope: np.ndarray = rise / (root * _NEAR)
        return slope


def _bound(stats: Statistics, probability: float) -> np.ndarray:
    """Find the bits at which a G as small as the observed one has this probability, (P,).

    No more bits than the most levels can carry.
    """
    result = np.full(stats.rows.shape, np.nan)
    carried = stats.cochran & stats.varies
    few = stats.take(carried)
    law = _Law.of(few, _excess(few)) if probability > 0.5 else _Law.of(few, 0.0).at_least_chance()
    information = _informations(law, probability)
    result[carried] = np.minimum(information / (2.0 * few.rows * np.log(2)), np.log2(few.levels))
    return result


def _excess(stats: Statistics) -> np.ndarray:
    """Find how much the mean of G exceeds df if all expected counts of a stratum are alike, (P,); else it is more.

    In one stratum of r x c cells and N records (r^2 - 1)(c^2 - 1) / (6 N), which is df (2 r c + 2 - df) / (6 N).

    Source: Williams 1976, Biometrika 63.
    """
    excess: np.ndarray = stats.df * (2.0 * (stats.cells + stats.informative) - stats.df) / (6.0 * stats.rows)
    return excess


def _informations(law: _Law, probability: float) -> np.ndarray:
    """Find the lambdas at which the statistics have this probability, (P,); 0 where even 0 makes it no greater.

    By Sankaran's approximation; from there the distribution itself needs a few steps, and large statistics none.
    """
    target = float(ndtri(probability))
    result = np.zeros(law.df.shape)
    inside = np.flatnonzero(chndtr(law.statistic, law.df, 0.0) > probability)
    law = law.take(inside)
    roots = _solved(law, target, np.sqrt(np.maximum(law.statistic, law.df) - law.df / 2.0) - target, False)
    small = np.flatnonzero(law.statistic < np.maximum(_LARGE, 10.0 * law.df))
    roots[small] = _solved(law.take(small), target, roots[small], True)
    result[inside] = np.maximum(0.0, roots * roots - law.df / 2.0)
    return result


def _solved(law: _Law, target: float, guess: np.ndarray, exact: bool) -> np.ndarray:
    """Solve deviates = target for the root of lambda + df / 2, in which the deviates are nearly a falling line, (P,).

    Secant steps, the first with the slope of Sankaran's approximation. A step out of the bracket goes to its middle
    instead, or twice as far while it has no upper end.
    """
    result, left = guess.copy(), np.arange(guess.size)
    low, high = np.sqrt(law.df / 2.0), np.full(guess.shape, np.inf)
    root = np.maximum(guess, low)
    slope, gap = law.slope(root), law.deviates(root, exact) - target
    for _ in range(_STEPS):
        low, high = np.where(gap > 0, root, low), np.where(gap > 0, high, root)
        aim = root - gap / np.minimum(slope, _FLATTEST)
        middle = np.where(np.isinf(high), 2.0 * low, (low + high) / 2.0)
        aim = np.where((aim >= low) & (aim <= high), aim, middle)
        result[left] = aim
        moving = aim * np.abs(aim - root) > _CLOSE * np.maximum(1.0, aim * aim - law.df / 2.0)
        if not moving.any():
            break
        left, law, low, high = left[moving], law.take(moving), low[moving], high[moving]
        before, last, root = gap[moving], root[moving], aim[moving]
        gap = law.deviates(root, exact) - target
        slope = (gap - before) / (root - last)
    return result


def _sankaran(x: np.ndarray, df: np.ndarray, noncentrality: np.ndarray) -> np.ndarray:
    """Approximate the normal deviates that are as rare as ``x`` under the non-central chi-square, (P,).

    Source: Sankaran 1963, Biometrika 50; Johnson, Kotz & Balakrishnan 1995, section 29.8.
    """
    mean, spread = df + noncentrality, df + 2.0 * noncentrality
    power = 1.0 - 2.0 * mean * (df + 3.0 * noncentrality) / (3.0 * spread * spread)
    p = spread / (mean * mean)
    m = (power - 1.0) * (1.0 - 3.0 * power)
    centre = 1.0 + power * p * (power - 1.0 - 0.5 * (2.0 - power) * m * p)
    deviates: np.ndarray = ((x / mean) ** power - centre) / (power * np.sqrt(2.0 * p) * (1.0 + 0.5 * m * p))
    return deviates
