"""The rows that inner choices and gains are judged on: all of them, or a share of every fold and class."""

from dataclasses import dataclass

import numpy as np

from bnx.engines import LocalEngine

__all__ = ["Sample", "rows_for_gains", "sample_for_choices", "sample_for_gains"]

_ROWS = 50_000
_ROWS_PER_CLASS_FOR_CHOICES = 500
_ROWS_PER_CLASS_FOR_GAINS = 5_000


@dataclass(frozen=True)
class Sample:
    """Rows of every fold, fold by fold.

    ``codes`` (n, S) as stored; ``target`` (S,); ``weights`` (S,): rows of the table that each stands for, by their
    weight; ``starts`` (folds + 1,): first row of each fold.
    """

    codes: np.ndarray
    target: np.ndarray
    weights: np.ndarray
    starts: np.ndarray

    def rows(self, fold: int) -> slice:
        """Rows of one fold."""
        return slice(int(self.starts[fold]), int(self.starts[fold + 1]))


def sample_for_choices(engine: LocalEngine, folds: int, used: np.ndarray | None = None) -> Sample:
    """Take 50,000 rows in all, but at least 500 of every fold and class (all, if there are fewer).

    used: the blocks that rows are taken from, (folds, blocks of a fold) bool, all if None.

    Choosing one of a few smoothings and fitting 1 + C numbers needs no more. Measured on 1,000,000 and on 400,000 rows:
    the final log loss of four structures rises by at most .00016 bit over that with eight times as many rows, a part of
    its standard error (docs/methods.md).
    """
    return _sample(engine, folds, _ROWS_PER_CLASS_FOR_CHOICES, _all_blocks(engine, folds) if used is None else used)


def sample_for_gains(engine: LocalEngine, folds: int) -> Sample:
    """Take 50,000 rows in all, but at least 5,000 of every fold and class (all, if there are fewer).

    Gains of single edges are small, and whether one is credible depends on how well every fold measures it.
    """
    return _sample(engine, folds, _ROWS_PER_CLASS_FOR_GAINS, _all_blocks(engine, folds))


def rows_for_gains(engine: LocalEngine, folds: int) -> int:
    """Count the rows that gains are judged on."""
    return int(_wanted(engine, folds, _ROWS_PER_CLASS_FOR_GAINS, _all_blocks(engine, folds)).sum())


def _all_blocks(engine: LocalEngine, folds: int) -> np.ndarray:
    return np.ones((folds, engine.blocks // folds), np.bool_)


def _wanted(engine: LocalEngine, folds: int, per_class: int, used: np.ndarray) -> np.ndarray:
    """Rows to take of each fold and class, (folds, C)."""
    rows = (engine.class_counts.reshape(folds, -1, engine.classes) * used[:, :, None]).sum(axis=1)
    return np.asarray(np.minimum(rows, np.maximum(per_class, -(-_ROWS * rows // max(1, int(rows.sum()))))))


def _sample(engine: LocalEngine, folds: int, per_class: int, used: np.ndarray) -> Sample:
    """Spread the rows evenly over each fold and class; what lies in which fold was decided by the seed."""
    groups = np.arange(engine.blocks * engine.classes).reshape(folds, -1, engine.classes)
    chunks = (len(engine.starts) - 1) // groups.size
    every_wanted = _wanted(engine, folds, per_class, used)
    chosen, weights, starts = [], [], [0]
    for fold in range(folds):
        taken = 0
        for c in range(engine.classes):
            segments = (groups[fold, used[fold], c][:, None] + np.arange(chunks) * groups.size).ravel()
            ends = np.cumsum(engine.starts[segments + 1] - engine.starts[segments])
            rows = int(ends[-1])
            wanted = int(every_wanted[fold, c])
            places = (np.arange(wanted) * rows) // max(wanted, 1)
            held = np.searchsorted(ends, places, side="right")
            chosen.append(engine.starts[segments[held] + 1] - ends[held] + places)
            weights.append(np.full(wanted, rows / max(wanted, 1)))
            taken += wanted
        starts.append(starts[-1] + taken)
    if starts[-1] == engine.rows and chunks == 1:  # all rows, which lie fold by fold already
        first = engine.starts[groups[:, 0, 0]]
        whole = engine.weighed.of_rows if engine.weighed else np.ones(engine.rows)
        return Sample(engine.codes, engine.target, whole, np.append(first, engine.rows))
    index, standing = np.concatenate(chosen), np.concatenate(weights)
    if engine.weighed:
        standing = standing * engine.weighed.of_rows[index]
    return Sample(np.take(engine.codes, index, axis=1), engine.target[index], standing, np.array(starts))
