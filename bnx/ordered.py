"""Generalised Cochran-Mantel-Haenszel tests of one pair over strata, sharper where levels have an order.

Both attributes ordered: is there a trend (linear by linear, 1 df)? One ordered: do its mean scores differ between the
levels of the other? None ordered: any association that the strata share. All three ask for a pattern that runs the same
way in the strata; patterns that oppose each other cancel.
"""

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from scipy.special import chdtrc

__all__ = ["OrderedTest", "generalised_cmh"]

_SINGULAR = 1e-9  # eigenvalues of a correlation matrix below this share of the largest are zero
_ROUNDING = 1e-24  # squared distances of scores below this share of the largest are zero


@dataclass(frozen=True)
class OrderedTest:
    """One generalised Cochran-Mantel-Haenszel test.

    ``kind`` is ``linear``, ``mean scores`` or ``general``. ``statistic`` and ``p`` are NaN and ``df`` is 0 where
    nothing varies. ``correlation`` is Pearson's correlation of the scores within strata, pooled over strata, -1 to 1:
    its sign is the direction of the trend; NaN unless both attributes are ordered.
    """

    kind: str
    statistic: float
    df: int
    p: float
    correlation: float


def generalised_cmh(
    counts: np.ndarray,
    row_scores: Sequence[float] | np.ndarray | None = None,
    column_scores: Sequence[float] | np.ndarray | None = None,
) -> OrderedTest:
    """Test conditional independence of rows and columns given the stratum, with the power on the order of scored sides.

    Given the margins of every stratum, the differences between observed and expected counts are summed over strata and
    weighed by the inverse of their exact covariance, that of multiple hypergeometric tables. Where levels are not used
    in all strata the covariance may be singular: it is inverted on its range, and the df is its rank.

    Args:
        counts: records, int (S, r, c).
        row_scores: scores of the rows, (r,), where they are ordered.
        column_scores: scores of the columns, (c,), where they are ordered.

    Source: Landis, Heyman & Koch 1978, International Statistical Review 46; Agresti 2002, section 7.5; Mantel 1963
    (the trend).
    """
    tables = counts[counts.sum((1, 2)) > 1].astype(np.float64)
    if row_scores is not None and column_scores is not None:
        return _linear(tables, np.asarray(row_scores, dtype=np.float64), np.asarray(column_scores, dtype=np.float64))
    if row_scores is not None:
        return _mean_scores(tables.transpose(0, 2, 1), np.asarray(row_scores, dtype=np.float64))
    if column_scores is not None:
        return _mean_scores(tables, np.asarray(column_scores, dtype=np.float64))
    return _general(tables)


def _linear(tables: np.ndarray, u: np.ndarray, v: np.ndarray) -> OrderedTest:
    """Test a trend between scored rows and scored columns."""
    total = tables.sum((1, 2))
    spread_u, spread_v = _spread(tables.sum(2), u), _spread(tables.sum(1), v)
    together = float((_off(tables) @ v @ u).sum())
    variance = float((spread_u * spread_v / (total - 1.0)).sum())
    if variance == 0.0:
        return OrderedTest("linear", np.nan, 0, np.nan, np.nan)
    varying = spread_u * spread_v > 0  # elsewhere one of the scores is constant
    scale = float(np.sqrt(spread_u[varying].sum() * spread_v[varying].sum()))
    statistic = together * together / variance
    correlation = min(1.0, max(-1.0, together / scale))
    return OrderedTest("linear", statistic, 1, float(chdtrc(1, statistic)), correlation)


def _mean_scores(tables: np.ndarray, v: np.ndarray) -> OrderedTest:
    """Test whether the mean score of the columns is the same in all rows."""
    scale = _spread(tables.sum(1), v) / (tables.sum((1, 2)) - 1.0)
    covariance = (scale[:, None, None] * _dispersion(tables.sum(2))).sum(0)
    return _quadratic("mean scores", (_off(tables) @ v).sum(0), covariance)


def _general(tables: np.ndarray) -> OrderedTest:
    """Test any association that the strata share; one used level of each side is left out, as margins give it back."""
    rows, columns = np.flatnonzero(tables.sum((0, 2)))[:-1], np.flatnonzero(tables.sum((0, 1)))[:-1]
    size = rows.size * columns.size
    covariance = np.zeros((size, size))
    for table in tables:
        down = _dispersion(table.sum(1)[None])[0][np.ix_(rows, rows)]
        across = _dispersion(table.sum(0)[None])[0][np.ix_(columns, columns)]
        covariance += np.kron(down, across) / (table.sum() - 1.0)
    off = _off(tables).sum(0)[np.ix_(rows, columns)]
    return _quadratic("general", off.ravel(), covariance)


def _quadratic(kind: str, off: np.ndarray, covariance: np.ndarray) -> OrderedTest:
    """Weigh differences (k,) by the inverse of their covariance (k, k) on its range."""
    variance = np.diagonal(covariance)
    varying = np.flatnonzero(variance > _SINGULAR * variance.max(initial=0.0))
    if not varying.size:
        return OrderedTest(kind, np.nan, 0, np.nan, np.nan)
    scale = np.sqrt(variance[varying])
    values, vectors = np.linalg.eigh(covariance[np.ix_(varying, varying)] / np.outer(scale, scale))
    kept = values > _SINGULAR * values[-1]
    parts = vectors.T @ (off[varying] / scale)
    statistic = float((parts[kept] ** 2 / values[kept]).sum())
    df = int(kept.sum())
    return OrderedTest(kind, statistic, df, float(chdtrc(df, statistic)), np.nan)


def _off(tables: np.ndarray) -> np.ndarray:
    """Subtract what independence within the stratum expects, (S, r, c)."""
    down, across = tables.sum(2, keepdims=True), tables.sum(1, keepdims=True)
    return np.asarray(tables - down * across / tables.sum((1, 2), keepdims=True))


def _dispersion(margins: np.ndarray) -> np.ndarray:
    """Compute diag(R) - R R' / N of margins (S, k): (S, k, k)."""
    shares = margins / margins.sum(1, keepdims=True)
    diagonal = margins[:, :, None] * np.eye(margins.shape[1])
    return np.asarray(diagonal - margins[:, :, None] * shares[:, None, :])


def _spread(margins: np.ndarray, scores: np.ndarray) -> np.ndarray:
    """Sum the squared distances of scores from their mean, over the records of margins (S, k): (S,); rounding is 0."""
    total = margins.sum(1)
    steps = scores - scores[0]
    off = steps - (margins @ steps / total)[:, None]
    spread = (margins * off * off).sum(1)
    return np.asarray(np.where(spread > _ROUNDING * total * np.abs(steps).max() ** 2, spread, 0.0))
