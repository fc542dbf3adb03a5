"""Very many tests at once: what a family of tens of millions of p-values makes of a few of them.

The p-values are brought together by size, not sorted: only where an answer may lie are they put in order.
"""

from dataclasses import dataclass

import numpy as np

from bnx.kernels.grouping import SHIFT, group_by_size
from bnx.multiplicity import dependence_factor, judged_at

__all__ = ["ManyTests"]


@dataclass(frozen=True)
class ManyTests:
    """A family of m tests. What it says is as in ``multiplicity``.

    ``grouped`` (m,): their p-values, bin by bin; ``starts`` (b + 1,): first place of each bin that holds any; ``low``,
    ``high`` (b,): between which its p-values lie; ``factor``: what dependence makes of m.
    """

    grouped: np.ndarray
    starts: np.ndarray
    low: np.ndarray
    high: np.ndarray
    factor: float
    method: str

    @classmethod
    def of(cls, p: np.ndarray, method: str) -> "ManyTests":
        """Make a family of p-values; NaN where nothing was tested."""
        p = np.ascontiguousarray(p, dtype=np.float64)
        grouped = np.empty(len(p))
        counts = group_by_size(p, p.view(np.int64), grouped)
        bins = np.flatnonzero(counts)
        starts = np.concatenate([[0], np.cumsum(counts[bins])])
        low, high = (bins << SHIFT).view(np.float64), (((bins + 1) << SHIFT) - 1).view(np.float64)
        factor = dependence_factor(int(starts[-1]), method)
        return cls(grouped[: starts[-1]], starts, low, high, factor, method)

    @property
    def tests(self) -> int:
        """Number of tests."""
        return len(self.grouped)

    def adjusted(self, p: np.ndarray) -> np.ndarray:
        """Adjust some members' p-values, (k,); see `multiplicity.adjusted`."""
        result = p.copy()
        if self.method == "none" or np.isnan(p).all():
            return result
        order = np.argsort(p, kind="stable")[: np.count_nonzero(~np.isnan(p))]
        own = np.searchsorted(self.low, p[order], side="right") - 1
        holm = self.method == "holm"
        best = -np.inf if holm else np.inf
        needed = self._needed(np.unique(own))
        for b in needed if holm else reversed(needed):
            rising, steps = self._steps(b, best)
            best = float(steps[-1] if holm else steps[0])
            inside = order[np.searchsorted(own, b) : np.searchsorted(own, b, side="right")]
            result[inside] = np.minimum(steps[np.searchsorted(rising, p[inside])], 1.0)
        return result

    def _needed(self, own: np.ndarray) -> list[int]:
        """Find the bins that decide what the members of some become: those, and any that could hold the best step.

        For ``bh`` and ``by`` the best step is the least of the own and all later bins, for ``holm`` the greatest of all
        before. A bin that cannot reach what another attains for sure is left alone.
        """
        reach, sure, last = self._reach(), self._sure(), len(self.low) - 1
        if self.method == "holm":
            kept = last - _could_be_least(-reach[::-1], -sure[::-1], last - own[::-1])
        else:
            kept = _could_be_least(reach, sure, own)
        return list(np.union1d(own, kept).tolist())

    def _reach(self) -> np.ndarray:
        """Bound the best step of each bin: none is less (``holm``: greater), (b,)."""
        if self.method == "holm":
            return self._step(self.high, self.starts[:-1])
        return self._step(self.low, self.starts[1:] - 1)

    def _sure(self) -> np.ndarray:
        """Bound the best step of each bin from the other side: at most that (``holm``: at least), (b,)."""
        if self.method == "holm":
            return self._step(self.low, self.starts[:-1])
        return self._step(self.high, self.starts[1:] - 1)

    def _step(self, p: np.ndarray, places: np.ndarray) -> np.ndarray:
        """Multiply p-values as their places in the order ask, from 0 on."""
        if self.method == "holm":
            return np.asarray(p * (self.tests - places))
        return np.asarray(p * (self.tests * self.factor) / (places + 1))

    def _steps(self, b: int, best: float) -> tuple[np.ndarray, np.ndarray]:
        """Sort a bin, and adjust it given the best of the bins before (Holm) or behind it."""
        rising = np.sort(self.grouped[self.starts[b] : self.starts[b + 1]])
        steps = self._step(rising, np.arange(self.starts[b], self.starts[b + 1]))
        if self.method == "holm":
            return rising, np.maximum(best, np.maximum.accumulate(steps))
        return rising, np.minimum(best, np.minimum.accumulate(steps[::-1])[::-1])

    def rejected(self, alpha: float) -> int:
        """Count the rejected tests."""
        if self.method == "none":
            return int(np.count_nonzero(self.grouped <= alpha))
        holm = self.method == "holm"
        reach = self._reach()
        for b in np.flatnonzero(reach > alpha) if holm else np.flatnonzero(reach <= alpha)[::-1]:
            steps = self._steps(b, -np.inf if holm else np.inf)[1]
            inside = int(np.count_nonzero(steps <= alpha))
            if (holm and inside < len(steps)) or (not holm and inside):
                return int(self.starts[b]) + inside
        return self.tests if holm else 0

    def threshold(self, alpha: float) -> float:
        """Find the raw p-value that the family was judged by; see `multiplicity.threshold`."""
        if self.tests == 0:
            return float("nan")
        if self.method == "none":
            return alpha
        return judged_at(self.tests, self.rejected(alpha), self.method, alpha)


def _could_be_least(reach: np.ndarray, sure: np.ndarray, own: np.ndarray) -> np.ndarray:
    """Find the bins that could hold the least step of all behind one of ``own``, rising.

    reach, sure (b,): between which the least step of each bin lies.
    """
    least = np.minimum.accumulate(sure[::-1])[::-1]
    last = np.searchsorted(own, np.arange(len(reach))) - 1
    limit = np.where(last >= 0, least[np.minimum(own[last] + 1, len(least) - 1)], -np.inf)
    return np.flatnonzero(reach <= limit)
