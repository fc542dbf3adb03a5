"""Where to cut numeric columns: fine cut points without the class, and coarser cuts of the fine bins.

A cut is a position: position k cuts after bin k, so bins 0 to k fall on its left.
"""

import re
from dataclasses import dataclass
from itertools import pairwise

import numpy as np

from bnx.errors import SettingError

__all__ = ["fine_cuts", "frequency_cuts", "mdl_cuts", "ordered_cuts", "parse_bins", "width_cuts"]

TIE = 1e-12  # bits; entropies nearer than this are equal, and the lowest cut wins on every machine
_NOISE = 2.0**-50  # of a number: 4 to 8 units in its last place
_HUGE = 1e300  # numbers beyond are not added up
_STEPS = 1 << 16  # values looked at together


def parse_bins(text: str) -> tuple[str, int]:
    """Read the setting ``bins``: ``auto``, ``mdl``, ``frequency:K``, ``width:K`` or ``mdl+frequency:K``.

    Returns the kind and K, which is 0 for the first two.

    Raises:
        SettingError: the text is none of these, or K is not in 2 to 255.
    """
    if text in {"auto", "mdl"}:
        return text, 0
    found = re.fullmatch(r"(frequency|width|mdl\+frequency):([0-9]+)", text)
    if not found or not 2 <= int(found[2]) <= 255:
        raise SettingError(
            f"--bins: {text!r} cannot be used; give auto, mdl, frequency:K, width:K or mdl+frequency:K with K from "
            "2 to 255"
        )
    return found[1], int(found[2])


@dataclass(frozen=True)
class _Weighted:
    """``totals`` (m + 1,): how many rows come before each of the distinct sorted values, and all rows."""

    totals: np.ndarray

    @property
    def rows(self) -> int:
        return int(self.totals[-1])

    def first(self, row: int) -> int:
        return int(self.totals[np.searchsorted(self.totals, row, side="right") - 1])

    def after(self, row: int) -> int:
        return int(self.totals[np.searchsorted(self.totals, row, side="right")])

    def inside(self, first: int, last: int) -> np.ndarray:
        return self.totals[(self.totals > first) & (self.totals < last)]


@dataclass(frozen=True)
class _Ordered:
    """Sorted values, one per row (N,)."""

    values: np.ndarray

    @property
    def rows(self) -> int:
        return len(self.values)

    def first(self, row: int) -> int:
        return int(np.searchsorted(self.values, self.values[row], side="left")) if row < self.rows else self.rows

    def after(self, row: int) -> int:
        return int(np.searchsorted(self.values, self.values[row], side="right"))

    def inside(self, first: int, last: int) -> np.ndarray:
        return np.flatnonzero(self.values[first + 1 : last] != self.values[first : last - 1]) + first + 1


_Runs = _Weighted | _Ordered  # runs of rows of one value: rows from ``first`` to ``after``, their edges ``inside``


def fine_cuts(values: np.ndarray, weights: np.ndarray, limit: int) -> np.ndarray:
    """Cut distinct sorted values (m,), carried by ``weights`` (m,) rows each, into min(m, ``limit``) bins.

    Up to ``limit`` values get a bin each. More values get bins as equal in rows as they allow: the smallest T is taken
    such that ``limit`` bins suffice when a bin holds at most T rows or a single value, so a value shared by many rows
    has a bin of its own and does not cost the others theirs; bins still free then halve the heaviest of several values.
    Values that agree in about 15 digits, as .1 + .2 and .3 do, differ by rounding only and count as one.
    Returns cuts (bins - 1,), halfway between neighbours.
    """
    firsts = np.delete(np.arange(len(values)), [first for first, _, _ in _join(values.copy())])
    totals = np.concatenate([[0], np.cumsum(weights, dtype=np.int64)])
    starts = _starts(_Weighted(totals[np.append(firsts, len(values))]), len(firsts), limit)
    place = np.searchsorted(totals, starts)
    return _halfway(values[place - 1], values[place])


def ordered_cuts(ordered: np.ndarray, distinct: int, limit: int) -> np.ndarray:
    """Cut sorted values, one per row (N,), as ``fine_cuts`` does, without listing the ``distinct`` ones.

    ``ordered`` is written to meanwhile, and is afterwards as it was.
    """
    joined = _join(ordered)
    starts = _starts(_Ordered(ordered), distinct - len(joined), limit)
    for first, stop, value in joined:
        ordered[first:stop] = value
    return _halfway(ordered[starts - 1], ordered[starts])


def _join(ordered: np.ndarray) -> list[tuple[int, int, float]]:
    """Lower values that differ from the one before by rounding only to that one, in place.

    Values are joined to the first of theirs, so that a chain of neighbours does not become one value. Returns the rows
    changed, from where to where, and what they were.
    """
    steps = [np.zeros(0, np.int64)]
    for start in range(0, len(ordered) - 1, _STEPS):
        part = ordered[start : start + _STEPS + 1]
        steps.append(start + np.flatnonzero((part[1:] > part[:-1]) & _alike(part[:-1], part[1:])))
    joined = []
    for before in np.concatenate(steps).tolist():
        value = ordered[before + 1]
        if _alike(ordered[before], value):
            stop = int(np.searchsorted(ordered, value, side="right"))
            ordered[before + 1 : stop] = ordered[before]
            joined.append((before + 1, stop, float(value)))
    return joined


def _alike(low: np.ndarray, high: np.ndarray) -> np.ndarray:
    """Tell which pairs of numbers differ by rounding only."""
    with np.errstate(over="ignore"):
        return np.asarray(high - low <= _NOISE * np.abs(low))


def _starts(runs: _Runs, distinct: int, limit: int) -> np.ndarray:
    """Choose the first row of every bin but the first."""
    if distinct <= limit:
        return runs.inside(0, runs.rows)
    low, high = 1, runs.rows
    while low < high:
        middle = (low + high) // 2
        if len(_filled(runs, middle, limit)) > limit:
            low = middle + 1
        else:
            high = middle
    return _halved(runs, [*_filled(runs, low, limit), runs.rows], limit)[1:-1]


def _filled(runs: _Runs, most: int, limit: int) -> list[int]:
    """Fill bins from the left with up to ``most`` rows; the first row of each, given up after ``limit`` + 1 bins."""
    starts: list[int] = []
    start = 0
    while start < runs.rows and len(starts) <= limit:
        starts.append(start)
        following = runs.first(min(start + most, runs.rows))
        start = following if following > start else runs.after(start)
    return starts


def _halved(runs: _Runs, bounds: list[int], limit: int) -> np.ndarray:
    """Halve the heaviest bin of several values again and again until there are ``limit`` bins."""
    starts = np.array(bounds, dtype=np.int64)
    several = np.array([runs.after(start) < stop for start, stop in pairwise(bounds)])
    while len(starts) <= limit:
        heaviest = int(np.where(several, np.diff(starts), 0).argmax())
        first, last = int(starts[heaviest]), int(starts[heaviest + 1])
        inside = runs.inside(first, last)
        middle = int(inside[np.abs(2 * inside - first - last).argmin()])
        starts = np.insert(starts, heaviest + 1, middle)
        parts = [runs.after(first) < middle, runs.after(middle) < last]
        several = np.concatenate([several[:heaviest], parts, several[heaviest + 1 :]])
    return starts


def _halfway(low: np.ndarray, high: np.ndarray) -> np.ndarray:
    """Cut halfway between neighbours; where no float lies between them, at the lower one."""
    middle = low / 2 + high / 2
    huge = max(np.abs(high).max(initial=0), np.abs(low).max(initial=0)) > _HUGE
    simple = middle if huge else (low + high) / 2
    return np.where((simple >= low) & (simple < high), simple, low) + 0.0


def mdl_cuts(counts: np.ndarray) -> np.ndarray:
    """Cut bins by class entropy until a cut no longer pays for its description.

    ``counts`` (bins, C) rows per bin and class; bins without rows may occur. Returns sorted positions, int64. Only
    boundary points are tried (a cut inside a run of one class is never best); of equal cuts the lowest is taken.
    Between two bins with rows, the middle of the empty ones is cut.

    Source: Fayyad & Irani 1993, Multi-interval discretization of continuous-valued attributes: boundary points, the MDL
    criterion, and the recursion.
    """
    used = np.flatnonzero(counts.sum(axis=1))
    positions: list[int] = []
    pending = [(0, len(used))]
    filled = counts[used].astype(np.int64)
    while pending:
        start, stop = pending.pop()
        cut = _best_cut(filled[start:stop])
        if cut is not None:
            positions.append(int((used[start + cut] + used[start + cut + 1] - 1) // 2))
            pending += [(start, start + cut + 1), (start + cut + 1, stop)]
    return np.array(sorted(positions), dtype=np.int64)


def _best_cut(counts: np.ndarray) -> int | None:
    """Find the cut with the least class information, if it passes the MDL criterion; the bin before it."""
    boundary = _boundaries(counts)
    if not len(boundary):
        return None
    left = np.cumsum(counts, axis=0)[boundary]
    right = counts.sum(axis=0) - left
    rows = counts.sum()
    entropy_left, entropy_right = _entropy(left), _entropy(right)
    information = (left.sum(axis=1) * entropy_left + right.sum(axis=1) * entropy_right) / rows
    k = int(np.flatnonzero(information <= information.min() + TIE)[0])
    whole = _entropy(counts.sum(axis=0)[None])[0]
    classes = [int(np.count_nonzero(part)) for part in (counts.sum(axis=0), left[k], right[k])]
    delta = np.log2(3.0 ** classes[0] - 2) - (
        classes[0] * whole - classes[1] * entropy_left[k] - classes[2] * entropy_right[k]
    )
    pays = whole - information[k] > (np.log2(rows - 1) + delta) / rows
    return int(boundary[k]) if pays else None


def _boundaries(counts: np.ndarray) -> np.ndarray:
    """Find the bins whose right neighbour does not hold rows of the very same single class."""
    pure = np.count_nonzero(counts, axis=1) == 1
    first = counts.argmax(axis=1)
    return np.flatnonzero(~(pure[:-1] & pure[1:] & (first[:-1] == first[1:])))


def _entropy(counts: np.ndarray) -> np.ndarray:
    """Class entropy in bits of every line of ``counts`` (m, C)."""
    shares = counts / np.maximum(counts.sum(axis=1, keepdims=True), 1)
    logs = np.log2(shares, out=np.zeros_like(shares), where=shares > 0)
    entropy: np.ndarray = -(shares * logs).sum(axis=1)
    return entropy


def frequency_cuts(counts: np.ndarray, k: int) -> np.ndarray:
    """Cut bins (m,) of row counts into at most ``k`` groups of rows as equal as the bins allow; sorted positions.

    The sum of squared group sizes is the least possible: a bin with far more rows than its share stands alone and the
    other groups stay equal. Bins without rows join the group on their left (before the first row: the first group).
    """
    used = np.flatnonzero(counts)
    groups = min(k, len(used))
    if groups < 2:
        return np.zeros(0, dtype=np.int64)
    totals = np.concatenate([[0], np.cumsum(counts[used], dtype=np.int64)]).astype(np.float64)
    squares = np.where(np.tri(len(totals), k=-1, dtype=bool), (totals[:, None] - totals[None, :]) ** 2, np.inf)
    cost = squares[:, 0]
    choices = []
    for _ in range(groups - 1):
        options = squares + cost[None, :]
        choice = options.argmin(axis=1)
        choices.append(choice)
        cost = np.take_along_axis(options, choice[:, None], axis=1)[:, 0]
    end, ends = len(used), []
    for choice in reversed(choices):
        end = int(choice[end])
        ends.append(end)
    return used[np.array(ends[::-1], dtype=np.int64)] - 1


def width_cuts(cuts: np.ndarray, counts: np.ndarray, k: int) -> np.ndarray:
    """Cut the range of a column into ``k`` equal widths, each cut moved to the nearest fine one; sorted positions.

    ``cuts`` (bins - 1,) are the fine cut points, ``counts`` (bins,) the rows. The range runs from the middle of the
    first bin with rows to the middle of the last; an outermost bin is taken to be as wide as its neighbour.
    Cuts that fall on one fine cut, or leave no row on a side, are one cut or none.
    """
    used = np.flatnonzero(counts)
    if len(used) < 2:
        return np.zeros(0, dtype=np.int64)
    cuts = cuts / 8 if np.abs(cuts).max() > _HUGE else cuts
    outer = [2 * cuts[0] - cuts[1], 2 * cuts[-1] - cuts[-2]] if len(cuts) > 1 else [cuts[0] - 1, cuts[0] + 1]
    edges = np.concatenate([outer[:1], cuts, outer[1:]])
    middles = edges[:-1] / 2 + edges[1:] / 2
    low, high = middles[used[0]], middles[used[-1]]
    wanted = low + (high - low) * np.arange(1, k) / k
    nearest = np.abs(wanted[:, None] - cuts[None, :]).argmin(axis=1)
    inside = (nearest >= used[0]) & (nearest < used[-1])
    return np.unique(nearest[inside]).astype(np.int64)
