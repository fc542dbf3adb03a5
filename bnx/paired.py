"""Two ways of predicting compared on the same folds."""

from typing import NamedTuple

import numpy as np
from scipy.special import stdtr, stdtrit

from bnx.errors import DataError

__all__ = ["Chances", "Difference", "bayesian_t", "corrected_t", "edge_verdict"]

_CONFIDENCE = 0.95


class Difference(NamedTuple):
    """A mean difference, its 95 % interval from ``low`` to ``high``, and the two-sided ``p_value`` of no difference."""

    mean: float
    low: float
    high: float
    p_value: float


class Chances(NamedTuple):
    """Probabilities, sum 1, that the mean difference in loss lies below, within and above the region around 0."""

    better: float
    equivalent: float
    worse: float


def corrected_t(differences: np.ndarray, folds: int) -> Difference:
    """Judge the mean of ``differences`` (m,) between fold means, m = folds x repeats, any unit.

    The variance is raised by 1 / (folds - 1), since training sets of folds overlap. Without any variance the mean is
    taken as certain: p is 1 if it is 0, else 0.

    Raises:
        DataError: fewer than 2 differences or 2 folds.

    Source: Nadeau & Bengio 2003, section 4 (corrected resampled t-test).
    """
    mean, scale, freedom = _student(differences, folds)
    if scale == 0:
        return Difference(mean, mean, mean, 1.0 if mean == 0 else 0.0)
    reach = float(stdtrit(freedom, (1 + _CONFIDENCE) / 2)) * scale
    return Difference(mean, mean - reach, mean + reach, 2 * float(stdtr(freedom, -abs(mean) / scale)))


def bayesian_t(differences: np.ndarray, folds: int, region: float) -> Chances:
    """Give the chances that a loss is better, equivalent or worse, from its ``differences`` (m,) to another loss.

    A negative difference is better. ``region``, in the same unit, is the largest mean difference without practical
    meaning. Without any variance the mean is taken as certain, and as equivalent if it lies within the region.

    Raises:
        DataError: fewer than 2 differences or 2 folds.

    Source: Corani & Benavoli 2015 (Bayesian correlated t-test, correlation 1 / folds).
    """
    mean, scale, freedom = _student(differences, folds)
    if scale == 0:
        return Chances(float(mean < -region), float(abs(mean) <= region), float(mean > region))
    better = float(stdtr(freedom, (-region - mean) / scale))
    worse = float(stdtr(freedom, (mean - region) / scale))
    return Chances(better, max(0.0, 1.0 - better - worse), worse)


def edge_verdict(gains_by_fold: np.ndarray, chosen_in: int, folds: int) -> str:
    """Say whether an edge ``gains`` or ``loses`` on held-out rows, or is ``undecided``.

    ``gains_by_fold`` (m,) holds the drop in loss by the edge in every fold of every repeat, 0 where the fold's own
    structure has no such edge; ``chosen_in`` says in how many of the m it was. Decided only if chosen in at least half
    and the corrected 95 % interval leaves 0 out.

    Raises:
        DataError: fewer than 2 folds.
    """
    found = corrected_t(gains_by_fold, folds)
    if 2 * chosen_in < len(gains_by_fold) or found.low <= 0 <= found.high:
        return "undecided"
    return "gains" if found.low > 0 else "loses"


def _student(differences: np.ndarray, folds: int) -> tuple[float, float, int]:
    """Give mean, corrected standard error and degrees of freedom; differences equal to rounding have no variance."""
    number = len(differences)
    if number < 2 or folds < 2:
        raise DataError(f"{number} differences from {folds} folds cannot be compared; at least 2 of each are needed")
    mean = float(np.mean(differences))
    variance = float(np.square(differences - mean).sum()) / (number - 1)
    if variance <= (1e-14 * float(np.abs(differences).max())) ** 2:
        return mean, 0.0, number - 1
    return mean, float(np.sqrt(variance * (1 / number + 1 / (folds - 1)))), number - 1
