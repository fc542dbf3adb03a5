"""Conditional independence of two attributes: bits shared, tests, intervals and detectable effects."""

from dataclasses import dataclass, fields
from typing import NamedTuple

import numpy as np
from scipy.special import chdtrc, chdtri, chndtrinc, gammaincc, ndtri

from bnx.errors import SettingError

__all__ = [
    "METHODS",
    "TESTS",
    "Statistics",
    "Tested",
    "bits_interval",
    "bits_upper",
    "detectable_bits",
    "p_values",
]

TESTS = ("auto", "chi2", "g")
METHODS = ("chi2-tail", "g-tail", "moments", "exact", "none")

_CHI2_TAIL, _G_TAIL, _MOMENTS, _EXACT, _NONE = range(5)
_POWER = 0.8
_SMALL_BITS = 0.05
_LARGE_STATISTIC = 9000.0
_TINY = 1e-300


@dataclass(frozen=True)
class Statistics:
    """Statistics of P pairs, each array float64 (P,); `bnx.contingency` defines the columns.

    Bits are per record over all strata, those that carry nothing included.
    """

    rows: np.ndarray
    nats: np.ndarray
    nats_squared: np.ndarray
    x2: np.ndarray
    df: np.ndarray
    x2_mean: np.ndarray
    x2_variance: np.ndarray
    x2_ceiling: np.ndarray
    min_expected: np.ndarray
    below_5: np.ndarray
    cells: np.ndarray
    strata: np.ndarray
    informative: np.ndarray
    levels: np.ndarray

    @classmethod
    def of(cls, table: np.ndarray) -> "Statistics":
        """Take the columns that `contingency.table_statistics` returns, (P, COLUMNS)."""
        return cls(*np.ascontiguousarray(table.T))

    def take(self, chosen: np.ndarray) -> "Statistics":
        """Keep the chosen pairs (indices or a mask)."""
        return Statistics(*(getattr(self, field.name)[chosen] for field in fields(self)))

    @property
    def g(self) -> np.ndarray:
        """The likelihood-ratio statistic, (P,): 2 x rows x nats."""
        return 2.0 * self.nats

    @property
    def bits(self) -> np.ndarray:
        """Plug-in bits per record that the two attributes share within the strata, (P,)."""
        return _to_bits(self.nats, self.rows)

    @property
    def bits_corrected(self) -> np.ndarray:
        """Bits less what independent attributes would show on average, df / (2 rows ln 2), (P,).

        Source: Miller 1955.
        """
        return _to_bits(self.nats - self.df / 2.0, self.rows)

    @property
    def bits_error(self) -> np.ndarray:
        """Standard error of the bits by the delta method, (P,)."""
        nats = _ratio(self.nats, self.rows)
        variance = _ratio(self.nats_squared, self.rows) - nats * nats
        return _to_bits(np.sqrt(np.maximum(0.0, variance)), np.sqrt(self.rows))

    @property
    def share_below_5(self) -> np.ndarray:
        """Share of the expected counts of informative strata that lie below 5, (P,); NaN without such a stratum."""
        return np.where(self.cells > 0, _ratio(self.below_5, self.cells), np.nan)

    @property
    def cochran(self) -> np.ndarray:
        """Whether every expected count is at least 1 and at most 20 % lie below 5, bool (P,).

        Source: Cochran 1954, Biometrics 10.
        """
        return (self.min_expected >= 1.0) & (5.0 * self.below_5 <= self.cells)

    @property
    def varies(self) -> np.ndarray:
        """Whether the statistic can take more than one value under these margins, bool (P,)."""
        return (self.df > 0) & (self.x2_variance > 0)

    @property
    def cramers_v(self) -> np.ndarray:
        """Cramer's V pooled over strata, 0 to 1, (P,); NaN without an informative stratum.

        V^2 is the mean of the strata's V_s^2 = X2_s / (N_s (fewer used levels - 1)), weighted by its denominators;
        with one stratum it is the usual V.

        Source: Cramer 1946.
        """
        return np.where(self.x2_ceiling > 0, np.sqrt(np.minimum(1.0, _ratio(self.x2, self.x2_ceiling))), np.nan)


class Tested(NamedTuple):
    """Tests of P pairs, each array (P,): ``statistic`` and ``p``, NaN where nothing can be tested; ``method`` as index
    into METHODS; ``carried``: whether the sample supports that method.
    """

    statistic: np.ndarray
    p: np.ndarray
    method: np.ndarray
    carried: np.ndarray

    def in_doubt(self, stats: Statistics, low: float, high: float) -> np.ndarray:
        """Find the pairs, as indices, whose p by moments lies from ``low`` to ``high`` and could be made exact.

        Those are the pairs whose strata all use two rows and two columns. The tail by moments is too light there.
        """
        doubtful = (self.method == _MOMENTS) & (self.p >= low) & (self.p <= high) & (stats.levels == 2)
        return np.flatnonzero(doubtful)

    def made_exact(self, chosen: np.ndarray, p: np.ndarray) -> "Tested":
        """Put exact p-values in the places ``chosen``."""
        new, method, carried = self.p.copy(), self.method.copy(), self.carried.copy()
        new[chosen], method[chosen], carried[chosen] = p, _EXACT, True
        return Tested(self.statistic, new, method, carried)


def p_values(stats: Statistics, test: str = "auto") -> Tested:
    """Test every pair.

    ``auto``: X2 by its chi-square tail where Cochran's rule holds, elsewhere by the gamma distribution that has X2's
    exact mean and variance given the margins. ``chi2`` and ``g``: the chi-square tail of X2 or G everywhere.

    Returns:
        The statistic, its p-value (both NaN where nothing can be tested: no degree of freedom, or a statistic that
        these margins fix), the method as index into METHODS, and whether the sample carries the method: Cochran's rule,
        for ``g`` every expected count at least 5 x the most levels. Each (P,).

    Raises:
        SettingError: the test is not known.
    """
    if test not in TESTS:
        raise SettingError(f"test is {test!r}; it must be one of {', '.join(TESTS)}")
    statistic = stats.g if test == "g" else stats.x2.copy()
    p = chdtrc(np.maximum(1.0, stats.df), np.maximum(0.0, statistic))
    method = np.full(p.shape, _G_TAIL if test == "g" else _CHI2_TAIL, dtype=np.int8)
    carried = stats.min_expected >= 5.0 * stats.levels if test == "g" else stats.cochran
    if test == "auto":
        method[~carried] = _MOMENTS
        p[~carried] = _moment_p(stats.take(~carried))
    untestable = ~stats.varies
    statistic[untestable] = p[untestable] = np.nan
    method[untestable] = _NONE
    return Tested(statistic, p, method, carried & ~untestable)


def _moment_p(stats: Statistics) -> np.ndarray:
    """Compute the tail of the gamma distribution with X2's exact conditional mean and variance, (P,).

    Source: Haldane 1940; Dawson 1954, Biometrika 41.
    """
    rate = stats.x2_mean / np.where(stats.x2_variance > 0, stats.x2_variance, 1.0)
    return np.asarray(gammaincc(np.maximum(rate * stats.x2_mean, 1e-9), rate * stats.x2))


def bits_interval(stats: Statistics, level: float = 0.95) -> tuple[np.ndarray, np.ndarray]:
    """Bound the bits from both sides; NaN where Cochran's rule fails. Two arrays, (P,)."""
    tail = (1.0 - level) / 2.0
    return _bound(stats, 1.0 - tail), _bound(stats, tail)


def bits_upper(stats: Statistics, level: float = 0.95) -> np.ndarray:
    """Bound the bits from above only; NaN where Cochran's rule fails. (P,)."""
    return _bound(stats, 1.0 - level)


def _bound(stats: Statistics, probability: float) -> np.ndarray:
    """Find the bits at which a statistic as small as the observed one has this probability, (P,).

    Below .05 (corrected) bit the non-central chi-square distribution of X2 is inverted, because G's runs high on tables
    with many levels; above, or where X2 is so large that it is as good as normal, the delta method around those bits.
    """
    result = np.full(stats.rows.shape, np.nan)
    carried = stats.cochran & stats.varies
    small = carried & (stats.bits_corrected < _SMALL_BITS) & (stats.x2 < _LARGE_STATISTIC)
    few = stats.take(small)
    noncentrality = chndtrinc(np.maximum(few.x2, _TINY), few.df, probability)
    result[small] = _to_bits(np.where(noncentrality > _TINY, noncentrality, 0.0), 2.0 * few.rows)
    many = stats.take(carried & ~small)
    bound = many.bits_corrected - ndtri(probability) * many.bits_error
    result[carried & ~small] = np.maximum(0.0, bound)
    return result


def detectable_bits(at: float, df: np.ndarray, rows: np.ndarray) -> np.ndarray:
    """Find the fewest bits that a test at the threshold ``at`` rejects with power .80, (P,); NaN without a df.

    The statistic is then non-central chi-square with non-centrality 2 x rows x bits x ln 2.

    Source: Cohen 1988, chapter 7 (power of chi-square tests).
    """
    kinds, which = np.unique(np.asarray(df, dtype=np.float64), return_inverse=True)
    usable = np.maximum(1.0, kinds)
    noncentrality = chndtrinc(chdtri(usable, at), usable, 1.0 - _POWER)
    noncentrality[kinds <= 0] = np.nan
    bits: np.ndarray = noncentrality[which] / (2.0 * rows * np.log(2))
    return bits


def _ratio(above: np.ndarray, below: np.ndarray) -> np.ndarray:
    """Divide, with 0 for a denominator of 0."""
    quotient: np.ndarray = np.divide(above, below, out=np.zeros(np.shape(above)), where=np.asarray(below) > 0)
    return quotient


def _to_bits(nats: np.ndarray, rows: np.ndarray) -> np.ndarray:
    """Turn a sum of nats over records into bits per record; 0 without records."""
    return _ratio(nats, rows * np.log(2))
