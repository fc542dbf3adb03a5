"""Very many tests at once: what a family of tens of millions of p-values makes of a few of them."""

from dataclasses import dataclass

import numpy as np

from bnx.multiplicity import dependence_factor, judged_at

__all__ = ["ManyTests"]

_STEP = 1 << 20


@dataclass(frozen=True)
class ManyTests:
    """A family of tests; ``rising`` (m,): their p-values in order. What it says is as in ``multiplicity``."""

    rising: np.ndarray
    method: str

    @classmethod
    def of(cls, p: np.ndarray, method: str) -> "ManyTests":
        """Make a family of p-values; NaN where nothing was tested."""
        rising = np.sort(p)
        return cls(rising[: len(rising) - int(np.count_nonzero(np.isnan(p)))], method)

    def adjusted(self, p: np.ndarray) -> np.ndarray:
        """Adjust some members' p-values, (k,); see `multiplicity.adjusted`."""
        places = np.searchsorted(self.rising, p)
        result = np.full(len(p), np.nan)
        wanted = np.argsort(places, kind="stable")
        wanted = wanted[~np.isnan(p[wanted])]
        if self.method == "none":
            result[wanted] = p[wanted]
            return result
        starts = list(range(0, len(self.rising), _STEP))
        best = -np.inf if self.method == "holm" else np.inf
        for start in starts if self.method == "holm" else reversed(starts):
            steps = self._steps(start, min(start + _STEP, len(self.rising)), best)
            best = float(steps[-1] if self.method == "holm" else steps[0])
            inside = wanted[(places[wanted] >= start) & (places[wanted] < start + _STEP)]
            result[inside] = np.minimum(steps[places[inside] - start], 1.0)
        return result

    def _steps(self, start: int, stop: int, best: float) -> np.ndarray:
        """Adjust the p-values from start to stop, given the best of those before (Holm) or behind them."""
        m, rising = len(self.rising), self.rising[start:stop]
        if self.method == "holm":
            return np.maximum(best, np.maximum.accumulate(rising * (m - np.arange(start, stop))))
        steps = rising * (m * dependence_factor(m, self.method)) / np.arange(start + 1, stop + 1)
        return np.minimum(best, np.minimum.accumulate(steps[::-1])[::-1])

    def rejected(self, alpha: float) -> int:
        """Count the rejected tests."""
        m = len(self.rising)
        if self.method == "none":
            return int(np.searchsorted(self.rising, alpha, side="right"))
        starts = range(0, m, _STEP)
        holm = self.method == "holm"
        for start in starts if holm else reversed(starts):
            steps = self._steps(start, min(start + _STEP, m), -np.inf if holm else np.inf)
            inside = int(np.count_nonzero(steps <= alpha))
            if (holm and inside < len(steps)) or (not holm and inside):
                return start + inside
        return m if holm else 0

    def threshold(self, alpha: float) -> float:
        """Find the raw p-value that the family was judged by; see `multiplicity.threshold`."""
        m = len(self.rising)
        if m == 0:
            return float("nan")
        if self.method == "none":
            return alpha
        return judged_at(m, self.rejected(alpha), self.method, alpha)
