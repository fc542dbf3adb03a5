"""The rows of one training set in inner folds, and the held-out class log loss that a choice of parents has there."""

from collections.abc import Sequence
from dataclasses import dataclass
from itertools import chain

import numpy as np

from bnx.engines import LocalEngine
from bnx.kernels.replacing import add_held_terms, class_weights, replaced_losses
from bnx.trainings import Training

__all__ = ["MOST_ROWS", "MOST_ROWS_FOR_PAIRS", "InnerRows", "RowJudge", "inner_rows"]

MOST_ROWS = 10_000
MOST_ROWS_FOR_PAIRS = 1_000
INNER_FOLDS = 3
STRENGTH = 2.0  # records that tables with one parent less stand for
_CELLS_PER_ROW = 4  # most cells of a family that is tried
_FEWEST_CELLS = 1024


@dataclass(frozen=True)
class InnerRows:
    """Rows of one training set, sorted by inner fold and class.

    ``codes`` (n, N) as the training set sees them, of ``sizes`` (n,) levels, cells not observed being one;
    ``starts`` (folds * C + 1,): first row of each fold and class; ``log_prior`` (folds, C) nats: share of each class
    outside each fold, minus infinity for none; ``floor`` (C,): added to every chance.
    """

    codes: np.ndarray
    sizes: np.ndarray
    starts: np.ndarray
    log_prior: np.ndarray
    floor: np.ndarray


def inner_rows(engine: LocalEngine, training: Training, most: int) -> InnerRows:
    """Cut the blocks of a training set into three runs of neighbours; take ``most`` rows, spread evenly, or all."""
    parts = np.array_split(np.flatnonzero(training.mask), INNER_FOLDS)
    taken = [
        _spread(engine, part, c, most / training.class_counts.sum()) for part in parts for c in range(engine.classes)
    ]
    index = np.concatenate(taken)
    codes = np.take(engine.codes, index, axis=1)
    view = training.view
    for i in np.flatnonzero(~view.plain).tolist():
        codes[i] = view.recode[i][codes[i]]
    rows = np.array([len(one) for one in taken])
    by_fold = rows.reshape(INNER_FOLDS, -1)
    others = by_fold.sum(axis=0) - by_fold
    with np.errstate(divide="ignore"):
        log_prior = np.log(others / np.maximum(others.sum(axis=1, keepdims=True), 1))
    starts = np.concatenate([[0], np.cumsum(rows)]).astype(np.int64)
    return InnerRows(codes, view.codes, starts, log_prior, by_fold.sum(axis=0) / max(len(index), 1) ** 2)


def _spread(engine: LocalEngine, blocks: np.ndarray, c: int, share: float) -> np.ndarray:
    """Take a share of the rows of one class in some blocks, spread evenly; what lies where was decided by the seed."""
    groups = engine.blocks * engine.classes
    turns = np.arange((len(engine.starts) - 1) // groups) * groups
    segments = (blocks * engine.classes + c + turns[:, None]).ravel()
    ends = np.cumsum(engine.starts[segments + 1] - engine.starts[segments])
    rows = int(ends[-1]) if len(ends) else 0
    wanted = min(rows, int(np.ceil(share * rows)))
    places = np.arange(wanted) * rows // max(wanted, 1)
    held = np.searchsorted(ends, places, side="right")
    return np.asarray(engine.starts[segments[held] + 1] - ends[held] + places)


class RowJudge:
    """Judges other parents of one attribute by the held-out log loss of all rows; holds the structure so far.

    The tables are smoothed by back-off with 2 records and counted without the fold that is judged. As in the final
    model no class is ruled out: every chance is mixed with the classes' shares, which count for one row in all.
    """

    def __init__(self, rows: InnerRows, parents: Sequence[tuple[int, ...]]) -> None:
        """Start from a structure."""
        self.rows = rows
        self.parents = list(parents)
        self._terms = np.zeros((len(rows.floor), rows.codes.shape[1]))
        self._weights = np.empty(self._terms.shape)
        for child, own in enumerate(self.parents):
            self._add((*own, child), 1.0)
        self._settle()

    def loss(self) -> float:
        """Tell the loss of the structure so far (nats)."""
        return self._loss

    def losses(self, child: int, choices: Sequence[tuple[int, ...]]) -> np.ndarray:
        """Tell the loss (nats) with each of K choices of parents, (K,).

        It is infinite for a family of more than 4 cells a row (of more than 1,024, where rows are few).
        """
        old, new = (*self.parents[child], child), [(*parents, child) for parents in choices]
        return self._replaced(old, new)

    def take(self, child: int, parents: tuple[int, ...]) -> None:
        """Give an attribute other parents."""
        self._add((*self.parents[child], child), -1.0)
        self._add((*parents, child), 1.0)
        self.parents[child] = parents
        self._settle()

    def _add(self, family: tuple[int, ...], sign: float) -> None:
        rows, members = self.rows, np.array(family)
        add_held_terms(rows.codes, rows.starts, members, rows.sizes[members], STRENGTH, sign, self._terms)

    def _settle(self) -> None:
        """Find the weights of the classes and the loss of the structure so far."""
        class_weights(self._terms, self.rows.starts, self.rows.log_prior, self._weights)
        self._loss = float(self._replaced((), [()])[0])

    def _replaced(self, old: tuple[int, ...], new: Sequence[tuple[int, ...]]) -> np.ndarray:
        rows, depths = self.rows, np.array([len(old), *map(len, new)])
        used = np.arange(max(1, int(depths.max()))) < depths[:, None]
        members = np.zeros(used.shape, np.int64)
        members[used] = [*old, *chain.from_iterable(new)]
        sizes = np.where(used, rows.sizes[members], 1)
        able = sizes.prod(axis=1, dtype=np.float64) <= max(_FEWEST_CELLS, _CELLS_PER_ROW * rows.codes.shape[1])
        able[0] = True
        losses, found = np.empty(int(able.sum()) - 1), np.full(len(new), np.inf)
        fixed = (members[able], sizes[able], depths[able], STRENGTH)
        replaced_losses(rows.codes, rows.starts, *fixed, self._weights, rows.floor, losses)
        found[able[1:]] = losses
        return found
