"""Many tests at once: adjusted p-values, the threshold they amount to, and the gate of a forest."""

import numpy as np

from bnx.errors import SettingError
from bnx.kernels.graphs import forest_level

__all__ = ["METHODS", "adjusted", "family_size", "forest_threshold", "judged_at", "testable", "threshold"]

METHODS = ("bh", "holm", "by", "none")


def adjusted(p: np.ndarray, method: str) -> np.ndarray:
    """Adjust p-values for the number of tests; a pair is rejected where its adjusted p is at most alpha.

    Args:
        p: p-values, (m,); NaN where nothing was tested, which stays NaN and does not count.
        method: ``bh`` (false-discovery rate), ``by`` (the same under any dependence), ``holm`` (family-wise), ``none``.

    Raises:
        SettingError: the method is not known.

    Source: Benjamini & Hochberg 1995; Benjamini & Yekutieli 2001; Holm 1979.
    """
    _check(method)
    result = np.full(np.shape(p), np.nan)
    tested = np.flatnonzero(~np.isnan(p))
    order = tested[np.argsort(p[tested], kind="stable")]
    rising = p[order]
    m = rising.size
    if method == "holm":
        rising = np.maximum.accumulate(rising * (m - np.arange(m)))
    elif method != "none":
        steps = rising * (m * dependence_factor(m, method)) / np.arange(1, m + 1)
        rising = np.minimum.accumulate(steps[::-1])[::-1]
    result[order] = np.minimum(rising, 1.0)
    return result


def threshold(p: np.ndarray, method: str, alpha: float) -> float:
    """Find the raw p-value that the family was judged by, given how many of it (m tested) were rejected (R).

    ``bh`` alpha max(1, R) / m, ``by`` the same over the sum of 1/k, ``holm`` alpha / max(1, m - R), ``none`` alpha.
    NaN if nothing was tested.

    Raises:
        SettingError: the method is not known.
    """
    _check(method)
    m = int(np.count_nonzero(~np.isnan(p)))
    if m == 0:
        return float("nan")
    if method == "none":
        return alpha
    return judged_at(m, int(np.count_nonzero(adjusted(p, method) <= alpha)), method, alpha)


def judged_at(m: int, rejected: int, method: str, alpha: float) -> float:
    """Compute what ``threshold`` says of m tests, but for ``none``, from the number rejected."""
    if method == "holm":
        return alpha / max(1, m - rejected)
    return alpha * max(1, rejected) / (m * dependence_factor(m, method))


def testable(least: np.ndarray, alpha: float, method: str) -> np.ndarray:
    """Find the tests that could be rejected at all in a family of their own kind, bool (m,).

    With K the smallest number for which at most K tests have a least p of at most alpha / K, those make the family; the
    others could never be rejected there. With ``none`` a test need only reach alpha. The choice looks at margins alone,
    so what follows keeps its level.

    Args:
        least: smallest p that each test could have given its margins, (m,); infinite where nothing can be tested.
        alpha: level of the family.
        method: as in ``adjusted``.

    Raises:
        SettingError: the method is not known.

    Source: Tarone 1990.
    """
    _check(method)
    if method == "none":
        return least <= alpha
    return least <= alpha / family_size(least, 0, alpha)


def family_size(least: np.ndarray, small: int, alpha: float) -> int:
    """Find the K of ``testable``, from the least p-values (k,) that may lie above alpha / K and the number of others.

    Source: Tarone 1990.
    """
    rising = np.sort(least)
    low, high = 1, max(1, small + len(least))
    while low < high:
        middle = (low + high) // 2
        if small + int(np.searchsorted(rising, alpha / middle, side="right")) <= middle:
            high = middle
        else:
            low = middle + 1
    return low


def forest_threshold(pairs: np.ndarray, p: np.ndarray, n: int, alpha: float) -> float:
    """Find the largest p-value t at which the false share among the edges of the forest stays below alpha.

    The forest grown from the pairs with p <= t holds e(t) edges, whatever their order; of m tested pairs about m t
    pass by chance; t is the largest observed p with m t / e(t) <= alpha. NaN if there is none.

    Args:
        pairs: the two attributes of each pair, integers (m, 2).
        p: p-value of each pair, (m,); NaN where nothing was tested.
        n: number of attributes.
        alpha: false-discovery rate among the edges.

    Source: Katsevich, Sabatti & Bogomolov 2021 (focused Benjamini-Hochberg).
    """
    m = int(np.count_nonzero(~np.isnan(p)))
    candidates = np.flatnonzero(p * m <= alpha * (n - 1))
    order = candidates[np.argsort(p[candidates], kind="stable")]
    ends = pairs[order].astype(np.int64)
    first, second = np.ascontiguousarray(ends[:, 0]), np.ascontiguousarray(ends[:, 1])
    return float(forest_level(first, second, p[order], n, m, alpha))


def dependence_factor(m: int, method: str) -> float:
    """Return the sum of 1/k up to m for ``by``, 1 otherwise."""
    return float(np.sum(1.0 / np.arange(1, m + 1))) if method == "by" else 1.0


def _check(method: str) -> None:
    """Refuse an unknown method."""
    if method not in METHODS:
        raise SettingError(f"adjust is {method!r}; it must be one of {', '.join(METHODS)}")
