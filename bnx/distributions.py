"""Which fine bins of a numeric column to merge, so that few bins show its shape and cut points fall between them."""

import math

import numpy as np

__all__ = ["MOST_BINS", "chosen_edges", "outer_edges"]

MOST_BINS = 48
_FEWEST = 8  # bins of equal width that are worth their name
_TAIL = 0.05  # share of the rows on either side of what decides the width of bins
_HUGE = 1e300  # numbers beyond are not added up


def outer_edges(fine: np.ndarray, lowest: float, highest: float, distinct: int) -> tuple[float, float]:
    """Say where the outermost of the fine bins begin and end, which ``fine`` (m,) parts, m at least 1.

    These are the lowest and the highest value; where each of the ``distinct`` values has a bin of its own, a bin ends
    as far beyond its value as on the other side.
    """
    if distinct > len(fine) + 1:
        return lowest, highest
    low, high = lowest - (float(fine[0]) - lowest), highest + (highest - float(fine[-1]))
    return low if math.isfinite(low) else lowest, high if math.isfinite(high) else highest


def chosen_edges(fine: np.ndarray, rows: np.ndarray, cuts: np.ndarray, ends: tuple[float, float]) -> np.ndarray:
    """Choose at most 47 of the fine cut points (m,), or as many as there are ``cuts``; sorted positions.

    All are taken where they are so few. Else every cut point, and those nearest to edges of equal width, as far as most
    rows reach and they leave no sliver; beyond lies one wide bin on either side. rows (m + 1,) of the fine bins; cuts
    (k,) are some of ``fine``; ends: where the outermost bins begin and end.
    """
    if len(fine) < MOST_BINS:
        return np.arange(len(fine))
    own = np.searchsorted(fine, cuts)
    steps = MOST_BINS - 2 - len(cuts)
    if steps < _FEWEST:
        return own
    shrink = 8.0 if max(map(abs, ends)) > _HUGE else 1.0
    edges = np.concatenate([ends[:1], fine, ends[1:]]) / shrink
    low, high = _reach(edges, rows)
    grid = np.linspace(low, high, steps + 1)
    inner = edges[1:-1]
    nearest = np.unique(np.abs(inner[None, :] - grid[:, None]).argmin(axis=1))
    fixed = [edges[0], edges[-1], *inner[own]]
    least, kept = (high - low) / steps / 2, []
    for place in nearest.tolist():
        if min(abs(inner[place] - edge) for edge in fixed) >= least:
            kept.append(place)
            fixed.append(inner[place])
    return np.union1d(np.array(kept, np.int64), own)


def _reach(edges: np.ndarray, rows: np.ndarray) -> tuple[float, float]:
    """Take the range of most rows, half as much again on either side, but nothing beyond the outermost edges."""
    share = np.cumsum(rows) / rows.sum()
    low = edges[int(np.searchsorted(share, _TAIL, side="right"))]
    high = edges[min(int(np.searchsorted(share, 1 - _TAIL)), len(rows) - 1) + 1]
    room = (high - low) / 2
    return max(low - room, edges[0]), min(high + room, edges[-1])
