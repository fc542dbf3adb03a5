"""How strongly the two attributes of one pair depend, stratum by stratum and over all strata: arrays in, numbers out.

Counts are integers (S, r, c). Empty rows and columns of a stratum are dropped; a stratum with one used row or column is
not *informative* and adds nothing. What is undefined is NaN.
"""

from dataclasses import dataclass

import numpy as np
from scipy.special import chdtrc, ndtri

__all__ = [
    "BinaryAssociation",
    "YuleQ",
    "binary_association",
    "binary_part",
    "expected_and_residuals",
    "informative",
    "stratum_v",
    "used_levels",
    "yule_q",
]


@dataclass(frozen=True)
class YuleQ:
    """Yule's Q of a 2 x 2 table, -1 to 1, with its interval; NaN where a row or a column is empty."""

    q: float
    low: float
    high: float


@dataclass(frozen=True)
class BinaryAssociation:
    """Association of a binary pair over strata; NaN where a figure is undefined.

    ``odds_ratio`` is the common odds ratio of Mantel and Haenszel: inf or 0 where one diagonal never occurs, and then
    the bound that is not inf or 0 itself is NaN. ``cmh`` is without a continuity correction, ``cmh_corrected`` with
    one (half a record), each with 1 df. ``breslow_day`` and ``tarone`` test one common odds ratio, ``df`` each.
    ``informative`` counts the strata that enter.
    """

    odds_ratio: float
    odds_low: float
    odds_high: float
    cmh: float
    cmh_p: float
    cmh_corrected: float
    cmh_corrected_p: float
    breslow_day: float
    breslow_day_p: float
    tarone: float
    tarone_p: float
    df: int
    informative: int

    @property
    def yule_q(self) -> YuleQ:
        """The common odds ratio with its interval on the scale of Yule's Q, (ratio - 1) / (ratio + 1)."""
        return YuleQ(*(_as_q(ratio) for ratio in (self.odds_ratio, self.odds_low, self.odds_high)))


def informative(counts: np.ndarray) -> np.ndarray:
    """Tell which strata of counts (S, r, c) use at least two rows and two columns, bool (S,)."""
    return np.asarray(((counts.sum(2) > 0).sum(1) > 1) & ((counts.sum(1) > 0).sum(1) > 1))


def expected_and_residuals(counts: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
    """Compute what independence within every stratum expects, and the adjusted residuals.

    An adjusted residual is (observed - expected) over its standard error under independence, so it is compared with a
    standard normal distribution.

    Args:
        counts: records, int (S, r, c).

    Returns:
        Expected records, float (S, r, c), NaN in unused rows and columns of a stratum; adjusted residuals, float
        (S, r, c), NaN there and in strata that are not informative.

    Source: Haberman 1973, Biometrics 29; Agresti 2002, section 3.3.
    """
    down, across, total = _margins(counts)
    used = (down > 0) & (across > 0)
    expected = np.divide(down * across, total, out=np.full(counts.shape, np.nan), where=used)
    variance = np.where(used, expected * (total - down) * (total - across), 0.0)
    safe = np.where(variance > 0, variance, 1.0)
    residuals = np.where(variance > 0, (counts - expected) * total / np.sqrt(safe), np.nan)
    return expected, residuals


def stratum_v(counts: np.ndarray) -> np.ndarray:
    """Compute Cramer's V of every stratum of counts (S, r, c): (S,), 0 to 1; NaN where it is not informative.

    Source: Cramer 1946.
    """
    expected, _ = expected_and_residuals(counts)
    used = ~np.isnan(expected)
    terms = np.divide((counts - expected) ** 2, expected, out=np.zeros(counts.shape), where=used)
    fewer = np.minimum((counts.sum(2) > 0).sum(1), (counts.sum(1) > 0).sum(1))
    ceiling = counts.sum((1, 2)) * (fewer - 1.0)
    squared = np.divide(terms.sum((1, 2)), ceiling, out=np.full(len(counts), np.nan), where=ceiling > 0)
    return np.asarray(np.sqrt(np.minimum(squared, 1.0)))


def yule_q(counts: np.ndarray, level: float = 0.95) -> YuleQ:
    """Compute Yule's Q of one 2 x 2 table, with the interval of its log odds ratio.

    Where a cell is empty the interval is that of the counts plus one half each, widened to hold Q, which is -1 or 1.

    Source: Yule 1900; Woolf 1955 (the interval), Gart 1966 (the halves).
    """
    table = np.asarray(counts, dtype=np.float64)
    if not (table.sum(0).all() and table.sum(1).all()):
        return YuleQ(np.nan, np.nan, np.nan)
    (a, b), (c, d) = table.tolist()
    q = (a * d - b * c) / (a * d + b * c)
    shifted = table if table.all() else table + 0.5
    (a, b), (c, d) = np.log(shifted).tolist()
    half = float(ndtri((1.0 + level) / 2.0) * np.sqrt((1.0 / shifted).sum()))
    centre = a + d - b - c
    return YuleQ(q, min(q, float(np.tanh((centre - half) / 2.0))), max(q, float(np.tanh((centre + half) / 2.0))))


def used_levels(counts: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
    """Find the rows and the columns of counts (S, r, c) that hold a record in any stratum: two arrays of indices."""
    return np.flatnonzero(counts.sum((0, 2))), np.flatnonzero(counts.sum((0, 1)))


def binary_part(counts: np.ndarray) -> np.ndarray | None:
    """Keep the used levels of a binary pair, (S, 2, 2), in their order; a missing one is a row or column of zeros.

    None where more than two levels of either attribute are used over all strata.
    """
    rows, columns = used_levels(counts)
    if rows.size > 2 or columns.size > 2:
        return None
    part = np.zeros((len(counts), 2, 2), dtype=counts.dtype)
    part[:, : rows.size, : columns.size] = counts[:, rows][:, :, columns]
    return part


def binary_association(counts: np.ndarray, level: float = 0.95) -> BinaryAssociation:
    """Measure and test the association of a binary pair over strata, counts int (S, 2, 2).

    Source: Mantel & Haenszel 1959; Cochran 1954 (the test); Robins, Breslow & Greenland 1986 (the interval); Breslow &
    Day 1980, section 4.4, and Tarone 1985 (one common odds ratio).
    """
    tables = counts[informative(counts)].astype(np.float64)
    ratio, low, high = _common_odds(tables, level)
    plain, corrected = _cochran_mantel_haenszel(tables)
    df = max(0, len(tables) - 1)
    breslow_day, tarone = _one_ratio(tables, ratio) if df and 0.0 < ratio < np.inf else (np.nan, np.nan)
    return BinaryAssociation(
        odds_ratio=ratio,
        odds_low=low,
        odds_high=high,
        cmh=plain,
        cmh_p=_tail(1, plain),
        cmh_corrected=corrected,
        cmh_corrected_p=_tail(1, corrected),
        breslow_day=breslow_day,
        breslow_day_p=_tail(df, breslow_day),
        tarone=tarone,
        tarone_p=_tail(df, tarone),
        df=df,
        informative=len(tables),
    )


def _common_odds(tables: np.ndarray, level: float) -> tuple[float, float, float]:
    """Estimate the common odds ratio and bound it, from informative strata (S, 2, 2)."""
    a, b, c, d = tables.reshape(-1, 4).T
    total = tables.sum((1, 2))
    with_, against = a * d / total, b * c / total
    agree, differ = (a + d) / total, (b + c) / total
    R, S = float(with_.sum()), float(against.sum())
    if R == 0.0 and S == 0.0:
        return np.nan, np.nan, np.nan
    if S == 0.0:
        return np.inf, np.nan, np.inf
    if R == 0.0:
        return 0.0, 0.0, np.nan
    variance = (
        (agree * with_).sum() / (2 * R * R)
        + (agree * against + differ * with_).sum() / (2 * R * S)
        + (differ * against).sum() / (2 * S * S)
    )
    half = float(ndtri((1.0 + level) / 2.0) * np.sqrt(variance))
    centre = float(np.log(R / S))
    return R / S, float(np.exp(centre - half)), float(np.exp(centre + half))


def _cochran_mantel_haenszel(tables: np.ndarray) -> tuple[float, float]:
    """Compute the statistic without and with the continuity correction, which never turns the difference round."""
    down, across, total = tables[:, 0].sum(1), tables[:, :, 0].sum(1), tables.sum((1, 2))
    variance = float((down * (total - down) * across * (total - across) / (total * total * (total - 1.0))).sum())
    if variance == 0.0:
        return np.nan, np.nan
    off = abs(float((tables[:, 0, 0] - down * across / total).sum()))
    return off * off / variance, max(0.0, off - 0.5) ** 2 / variance


def _one_ratio(tables: np.ndarray, ratio: float) -> tuple[float, float]:
    """Compute the statistics of Breslow and Day and of Tarone, from informative strata and their common odds ratio."""
    down, across, total = tables[:, 0].sum(1), tables[:, :, 0].sum(1), tables.sum((1, 2))
    first = _first_cell(down, across, total, ratio)
    fitted = np.stack([first, down - first, across - first, total - down - across + first])
    variance = 1.0 / (1.0 / fitted).sum(0)
    off = tables[:, 0, 0] - first
    breslow_day = float((off * off / variance).sum())
    return breslow_day, max(0.0, breslow_day - float(off.sum()) ** 2 / float(variance.sum()))


def _first_cell(down: np.ndarray, across: np.ndarray, total: np.ndarray, ratio: float) -> np.ndarray:
    """Solve (1 - ratio) x^2 + s x - ratio down across = 0 for the first cell of 2 x 2 tables with this odds ratio."""
    s = total - down - across + ratio * (down + across)
    root = np.sqrt(np.maximum(0.0, s * s + 4.0 * (1.0 - ratio) * ratio * down * across))
    negative = s < 0.0  # then the ratio is below 1
    below = np.where(negative, 2.0 * (1.0 - ratio), s + root)
    return np.asarray(np.where(negative, root - s, 2.0 * ratio * down * across) / below)


def _margins(counts: np.ndarray) -> tuple[np.ndarray, np.ndarray, np.ndarray]:
    """Sum counts to rows (S, r, 1), columns (S, 1, c) and strata (S, 1, 1), as floats."""
    records = counts.astype(np.float64)
    return records.sum(2, keepdims=True), records.sum(1, keepdims=True), records.sum((1, 2), keepdims=True)


def _tail(df: int, statistic: float) -> float:
    """Take the chi-square tail; NaN without a df or a statistic."""
    return float(chdtrc(df, statistic)) if df > 0 else np.nan


def _as_q(ratio: float) -> float:
    """Turn an odds ratio into Yule's Q."""
    return 1.0 if ratio == np.inf else (ratio - 1.0) / (ratio + 1.0)
