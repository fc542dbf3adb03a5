"""The rows that inner choices and gains are judged on: all of them, or a share of every fold and class."""

from dataclasses import dataclass

import numpy as np

from bnx.engines import LocalEngine

__all__ = ["Sample", "draw_sample"]

_ROWS_PER_CLASS = 5_000
_ROWS = 50_000


@dataclass(frozen=True)
class Sample:
    """Rows of every fold, fold by fold.

    ``codes`` (n, S) as stored; ``target`` (S,); ``weights`` (S,): rows of the table that each stands for;
    ``starts`` (folds + 1,): first row of each fold.
    """

    codes: np.ndarray
    target: np.ndarray
    weights: np.ndarray
    starts: np.ndarray

    def rows(self, fold: int) -> slice:
        """Rows of one fold."""
        return slice(int(self.starts[fold]), int(self.starts[fold + 1]))


def draw_sample(engine: LocalEngine, folds: int) -> Sample:
    """Take at least 5,000 rows of every fold and class (all, if there are fewer) and 50,000 in all.

    Rows are spread evenly over the blocks of each fold and class, in the order of the table within a block, so that the
    engine's chunks make no difference; what lies in which fold was decided by the seed.
    """
    blocks = engine.blocks // folds
    chunks = np.arange(0, len(engine.starts) - 1, engine.blocks * engine.classes)
    chosen, weights, starts = [], [], [0]
    for fold in range(folds):
        taken = 0
        for c in range(engine.classes):
            groups = (np.arange(fold * blocks, (fold + 1) * blocks)) * engine.classes + c
            segments = (groups[:, None] + chunks).ravel()
            ends = np.cumsum(engine.starts[segments + 1] - engine.starts[segments])
            rows = int(ends[-1])
            wanted = min(rows, max(_ROWS_PER_CLASS, -(-_ROWS * rows // engine.rows)))
            places = (np.arange(wanted) * rows) // max(wanted, 1)
            held_by = np.searchsorted(ends, places, side="right")
            chosen.append(engine.starts[segments + 1][held_by] - (ends[held_by] - places))
            weights.append(np.full(wanted, rows / max(wanted, 1)))
            taken += wanted
        starts.append(starts[-1] + taken)
    index = np.concatenate(chosen)
    return Sample(np.take(engine.codes, index, axis=1), engine.target[index], np.concatenate(weights), np.array(starts))
