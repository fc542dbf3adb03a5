"""Do all classes share one pattern? A test of no three-way interaction.

Strata are classes, or combinations of the class and other attributes; ``groups`` then names the class of each stratum.
"""

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from scipy.special import chdtrc

from bnx.errors import SettingError
from bnx.fibre import walked
from bnx.loglinear import Fit, fit_homogeneous

__all__ = ["Homogeneity", "homogeneity"]

_MOST_CELLS = 100_000  # beyond, a walk takes minutes
_ENOUGH = 50  # tables as far out as the observed one, after which the walk may end

Groups = Sequence[int] | np.ndarray


@dataclass(frozen=True)
class Homogeneity:
    """A test that rows and columns are associated alike in all classes; NaN where nothing can be tested.

    ``x2`` and ``g`` have ``df`` degrees of freedom (None: too many strata to find out); ``tail_p`` is the chi-square
    tail of X2. ``carried``: Cochran's rule holds for the fitted counts of the free cells (each at least 1, at most a
    fifth below 5). ``p`` is the p to judge by and ``method`` names it: ``chi2-tail`` where carried, else
    ``monte-carlo`` (exact in size: tables with the same two-way margins, ``draws`` of them), ``none`` with no df,
    without draws to replace a tail that is not carried, or without a fit. ``strata`` counts those with a free cell.
    ``rounds`` of fitting; ``converged`` or not.
    """

    x2: float
    g: float
    df: int | None
    tail_p: float
    p: float
    method: str
    carried: bool
    min_expected: float
    share_below_5: float
    strata: int
    rounds: int
    converged: bool
    draws: int


def homogeneity(counts: np.ndarray, groups: Groups | None = None, *, draws: int = 999, seed: int = 0) -> Homogeneity:
    """Test that the association of rows and columns is the same in all classes.

    One pattern for all strata (fitted E0) is compared with one pattern for the strata of each class (fitted E1; the
    counts themselves where a class has one stratum): X2 = sum (E1 - E0)^2 / E0, G = 2 sum E1 ln(E1 / E0). So other
    attributes in the strata may change the margins of rows and columns freely; of patterns that differ between the
    strata of one class only what they have in common is compared. Leave ``groups`` out to compare all strata.

    Where the sample does not carry the chi-square tail, the p is that of a Monte Carlo test given all two-way margins;
    with several strata in a class it orders tables by X2 of the counts summed over each class's strata.

    Args:
        counts: records, int (S, r, c).
        groups: class of every stratum, int (S,); None where every stratum is a class of its own.
        draws: tables of the Monte Carlo test, 0 for none; none either where there are more than 100,000 cells.
        seed: of the Monte Carlo test.

    Raises:
        SettingError: draws below 0.

    Source: Bartlett 1935 and Bishop, Fienberg & Holland 1975, chapter 3 (no three-way interaction); Agresti 2002,
    section 9.3 (X2 between nested models); Besag & Clifford 1989 (the Monte Carlo p).
    """
    counts = counts[:, counts.any((0, 2))][:, :, counts.any((0, 1))]
    draws = draws if counts.size <= _MOST_CELLS else 0
    if draws < 0:
        raise SettingError(f"draws is {draws}; it must be 0 or more")
    of_stratum = np.arange(len(counts)) if groups is None else np.asarray(groups)
    shared, apart = fit_homogeneous(counts), _fitted_apart(counts, of_stratum)
    cells = shared.expected[shared.free]
    df = None if shared.df is None or apart.df is None else shared.df - apart.df
    fitted = df is None or (shared.converged and apart.converged)  # a rough fit costs a walk power, never size
    usable = fitted and cells.size > 0 and df != 0
    x2, g = _statistics(apart.expected[shared.free], cells) if usable else (np.nan, np.nan)
    tail_p = float(chdtrc(df, x2)) if usable and df is not None else np.nan
    carried = usable and df is not None and _cochran(cells)
    p = _monte_carlo(counts, shared, of_stratum, draws, seed) if usable and not carried else tail_p
    return Homogeneity(
        x2=x2,
        g=g,
        df=df,
        tail_p=tail_p,
        p=p,
        method="none" if np.isnan(p) else "chi2-tail" if carried else "monte-carlo",
        carried=carried,
        min_expected=float(cells.min()) if cells.size else np.nan,
        share_below_5=float((cells < 5.0).mean()) if cells.size else np.nan,
        strata=int(shared.free.any((1, 2)).sum()),
        rounds=shared.rounds,
        converged=shared.converged and apart.converged,
        draws=draws,
    )


def _fitted_apart(counts: np.ndarray, of_stratum: np.ndarray) -> Fit:
    """Fit homogeneous association in each class for itself; a class of one stratum is fitted by its counts."""
    expected, free = counts.astype(np.float64), np.zeros(counts.shape, dtype=bool)
    df: int | None = 0
    rounds, converged = 0, True
    groups, sizes = np.unique(of_stratum, return_counts=True)
    for group in groups[sizes > 1]:
        fit = fit_homogeneous(counts[of_stratum == group])
        expected[of_stratum == group], free[of_stratum == group] = fit.expected, fit.free
        df = None if df is None or fit.df is None else df + fit.df
        rounds, converged = max(rounds, fit.rounds), converged and fit.converged
    return Fit(expected, free, df, rounds, converged)


def _statistics(observed: np.ndarray, expected: np.ndarray) -> tuple[float, float]:
    """Compute Pearson's X2 and G over cells."""
    x2 = float(((observed - expected) ** 2 / expected).sum())
    filled = observed > 0
    g = 2.0 * float((observed[filled] * np.log(observed[filled] / expected[filled])).sum())
    return x2, max(0.0, g)


def _cochran(expected: np.ndarray) -> bool:
    """Tell whether every expected count is at least 1 and at most a fifth lie below 5.

    Source: Cochran 1954, Biometrics 10.
    """
    return bool(expected.min() >= 1.0 and 5 * int((expected < 5.0).sum()) <= expected.size)


def _monte_carlo(counts: np.ndarray, fit: Fit, of_stratum: np.ndarray, draws: int, seed: int) -> float:
    """Find the p among tables with the same margins; NaN where no other table was reached.

    Large tables, which are drawn in blocks, stop once enough drawn tables lie as far out as the observed one.

    Source: Besag & Clifford 1991, Biometrika 78 (the stop).
    """
    members = (of_stratum == np.unique(of_stratum)[:, None]).astype(np.float64)
    observed = float(_distances(counts[None], fit, members)[0])
    made, far, other = 0, 0, False
    for tables in walked(counts, fit, draws, seed):
        as_far = _distances(tables, fit, members) >= observed - 1e-9 * (1.0 + observed)
        other = other or bool((tables != counts).any())
        last = np.flatnonzero(far + np.cumsum(as_far) >= _ENOUGH)
        if last.size and other and len(tables) < draws:
            return _ENOUGH / (made + int(last[0]) + 1)
        made, far = made + len(tables), far + int(as_far.sum())
    return (1 + far) / (1 + draws) if other else np.nan


def _distances(tables: np.ndarray, fit: Fit, members: np.ndarray) -> np.ndarray:
    """Compute X2 of tables (B, S, r, c) summed over the strata of each class, members (classes, S): (B,)."""
    expected = np.where(fit.free, fit.expected, 0.0)
    centre = np.tensordot(members, expected, 1)
    weight = np.divide(1.0, centre, out=np.zeros(centre.shape), where=centre > 0)
    off = (np.where(fit.free, tables, 0.0) - expected).reshape(len(tables), len(expected), -1)
    return np.asarray(((members @ off) ** 2 * weight.reshape(len(members), -1)).sum((1, 2)))
