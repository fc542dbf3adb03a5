"""Conditional independence of two attributes: bits shared, and the p-values of tests."""

from dataclasses import dataclass, fields
from typing import NamedTuple

import numpy as np

from bnx.errors import SettingError
from bnx.kernels.contingency import DF
from bnx.tails import chi_square_tail, moment_tail

__all__ = [
    "METHODS",
    "TESTS",
    "Statistics",
    "Tested",
    "p_values",
]

TESTS = ("auto", "chi2", "g", "monte-carlo")
METHODS = ("chi2-tail", "g-tail", "moments", "exact", "monte-carlo", "none")

_CHI2_TAIL, _G_TAIL, _MOMENTS, _EXACT, _, _NONE = range(6)


@dataclass(frozen=True)
class Statistics:
    """Statistics of P pairs, each array float64 (P,); `bnx.kernels.contingency` defines the columns.

    ``chance``: mean of the nats x records if the two are independent; to first order half the degrees of freedom.

    Bits are per record over all strata, those that carry nothing included.
    """

    rows: np.ndarray
    nats: np.ndarray
    nats_squared: np.ndarray
    x2: np.ndarray
    df: np.ndarray
    x2_mean: np.ndarray
    x2_variance: np.ndarray
    x2_third: np.ndarray
    x2_ceiling: np.ndarray
    min_expected: np.ndarray
    below_5: np.ndarray
    cells: np.ndarray
    strata: np.ndarray
    informative: np.ndarray
    levels: np.ndarray
    chance: np.ndarray

    @classmethod
    def of(cls, table: np.ndarray) -> "Statistics":
        """Take the columns that `contingency.table_statistics` returns, (P, COLUMNS)."""
        return cls(*np.vstack([table.T, table.T[DF] / 2.0]))

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
        """Bits less what independent attributes would show on average, (P,): df / (2 rows ln 2) to first order.

        Source: Miller 1955.
        """
        return _to_bits(self.nats - self.chance, self.rows)

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

    @property
    def by_moments(self) -> np.ndarray:
        """Whether p comes from the moments of X2, bool (P,)."""
        return np.asarray(self.method == _MOMENTS)

    @property
    def is_exact(self) -> np.ndarray:
        """Whether p is exact, bool (P,)."""
        return np.asarray(self.method == _EXACT)

    def replaced(self, chosen: np.ndarray, p: np.ndarray, method: str) -> "Tested":
        """Put better p-values in the places ``chosen``, from a method that every sample carries."""
        new, methods, carried = self.p.copy(), self.method.copy(), self.carried.copy()
        new[chosen], methods[chosen], carried[chosen] = p, METHODS.index(method), True
        return Tested(self.statistic, new, methods, carried)

    def without(self, untestable: np.ndarray) -> "Tested":
        """Take the marked pairs out of the family: no p, method ``none``; their statistic stays."""
        p, method = np.where(untestable, np.nan, self.p), np.where(untestable, np.int8(_NONE), self.method)
        return Tested(self.statistic, p, method, self.carried & ~untestable)


def p_values(stats: Statistics, test: str = "auto") -> Tested:
    """Test every pair.

    ``auto`` and ``monte-carlo``: X2 by its chi-square tail where Cochran's rule holds, elsewhere by the shifted gamma
    distribution that has X2's exact mean, variance and skewness given the margins (``refining`` replaces some of
    these). ``chi2`` and ``g``: the chi-square tail of X2 or G everywhere.

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
    method = np.full(statistic.shape, _G_TAIL if test == "g" else _CHI2_TAIL, dtype=np.int8)
    carried = stats.min_expected >= 5.0 * stats.levels if test == "g" else stats.cochran
    if test in ("auto", "monte-carlo"):
        method[~carried] = _MOMENTS
    p = np.empty(statistic.shape)
    tail, moments = method != _MOMENTS, method == _MOMENTS
    p[tail] = chi_square_tail(np.maximum(1.0, stats.df[tail]), np.maximum(0.0, statistic[tail]))
    p[moments] = moment_tail(*(one[moments] for one in (stats.x2, stats.x2_mean, stats.x2_variance, stats.x2_third)))
    untestable = ~stats.varies
    statistic[untestable] = p[untestable] = np.nan
    method[untestable] = _NONE
    return Tested(statistic, p, method, carried & ~untestable)


def _ratio(above: np.ndarray, below: np.ndarray) -> np.ndarray:
    """Divide, with 0 for a denominator of 0."""
    quotient: np.ndarray = np.divide(above, below, out=np.zeros(np.shape(above)), where=np.asarray(below) > 0)
    return quotient


def _to_bits(nats: np.ndarray, rows: np.ndarray) -> np.ndarray:
    """Turn a sum of nats over records into bits per record; 0 without records."""
    return _ratio(nats, rows * np.log(2))
