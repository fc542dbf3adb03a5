"""The rows of one training set, cut into inner folds, and what held-out log loss every choice of parents gives there."""

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

from bnx.engines import LocalEngine
from bnx.kernels.replacing import add_held_terms, class_weights, replaced_losses
from bnx.trainings import Training

__all__ = ["InnerRows", "RowJudge", "inner_rows"]

INNER_FOLDS = 3
MOST_ROWS = 10_000
STRENGTH = 2.0
_CELLS_PER_ROW = 4
QUARTERS = (4, 3, 2, 1)
FLOOR = 1.0


@dataclass(frozen=True)
class InnerRows:
    """Rows sorted by inner fold and class.

    ``codes`` (n, N) as the training set sees them; ``starts`` (folds * C + 1,); ``sizes`` (n,); ``log_prior``
    (folds, C) of the rows outside each fold; ``shares`` (C,) of all.
    """

    codes: np.ndarray
    starts: np.ndarray
    sizes: np.ndarray
    log_prior: np.ndarray
    shares: np.ndarray


def inner_rows(engine: LocalEngine, training: Training) -> InnerRows:
    """Cut the blocks of a training set into three runs of neighbours, and take at most 10,000 rows."""
    blocks = np.flatnonzero(training.mask)
    folds = min(INNER_FOLDS, len(blocks))
    parts = np.array_split(blocks, folds)
    total = int(training.class_counts.sum())
    groups = engine.blocks * engine.classes
    turns = np.arange((len(engine.starts) - 1) // groups) * groups
    chosen = []
    for part in parts:
        for c in range(engine.classes):
            segments = (part[None, :] * engine.classes + c + turns[:, None]).ravel()
            ends = np.cumsum(engine.starts[segments + 1] - engine.starts[segments])
            rows = int(ends[-1])
            wanted = min(rows, -(-MOST_ROWS * rows // max(total, MOST_ROWS)))
            places = np.arange(wanted) * rows // max(wanted, 1)
            held = np.searchsorted(ends, places, side="right")
            chosen.append(engine.starts[segments[held] + 1] - ends[held] + places)
    index = np.concatenate(chosen)
    lengths = np.array([len(one) for one in chosen])
    codes = np.take(engine.codes, index, axis=1)
    view = training.view
    for i in np.flatnonzero(~view.plain):
        codes[i] = view.recode[i][codes[i]]
    counts = lengths.reshape(folds, -1)
    others = counts.sum(axis=0) - counts
    with np.errstate(divide="ignore"):
        log_prior = np.log(others / np.maximum(others.sum(axis=1, keepdims=True), 1))
    starts = np.concatenate([[0], np.cumsum(lengths)]).astype(np.int64)
    return InnerRows(codes, starts, view.sizes, log_prior, counts.sum(axis=0) / max(1, counts.sum()))


class RowJudge:
    """Keeps the summed log terms of the structure so far; judges what one family's replacement changes."""

    def __init__(self, rows: InnerRows, parents: Sequence[tuple[int, ...]]) -> None:
        self.rows = rows
        self.parents = list(parents)
        n_rows = rows.codes.shape[1]
        self.terms = np.zeros((n_rows, len(rows.shares)))
        self.floor = FLOOR / max(n_rows, 1) * rows.shares
        self.most_cells = max(1024, _CELLS_PER_ROW * n_rows)
        self.work = 0
        for child, own in enumerate(self.parents):
            self._add(child, own, 1.0)
        self._refit()

    def _add(self, child: int, parents: tuple[int, ...], sign: float) -> None:
        members = np.array([*parents, child], np.int64)
        add_held_terms(self.rows.codes, self.rows.starts, members, self.rows.sizes[members], STRENGTH, sign, self.terms)

    def _refit(self) -> None:
        found = []
        for quarters in QUARTERS:
            self.quarters = quarters
            found.append(self._judge(self.terms, [()])[0])
        best = int(np.argmin(found))
        self.quarters, self._loss = QUARTERS[best], float(found[best])

    def _judge(self, terms: np.ndarray, families: Sequence[tuple[int, ...]]) -> np.ndarray:
        rest = np.empty(terms.shape)
        class_weights(terms, self.rows.starts, self.rows.log_prior, self.quarters / 4, rest)
        width = max(len(one) for one in families)
        members = np.zeros((len(families), max(width, 1)), np.int64)
        for k, one in enumerate(families):
            members[k, : len(one)] = one
        depths = np.array([len(one) for one in families])
        sizes = np.where(np.arange(members.shape[1]) < depths[:, None], self.rows.sizes[members], 1)
        out = np.empty(len(families))
        self.work += len(families)
        replaced_losses(
            self.rows.codes, self.rows.starts, members, sizes, depths, STRENGTH, self.quarters, rest, self.floor, out
        )
        return out

    def loss(self) -> float:
        return self._loss

    def losses(self, child: int, families: Sequence[tuple[int, ...]]) -> np.ndarray:
        members = np.array([*self.parents[child], child], np.int64)
        terms = self.terms.copy()
        add_held_terms(self.rows.codes, self.rows.starts, members, self.rows.sizes[members], STRENGTH, -1.0, terms)
        found = np.full(len(families), np.inf)
        sizes = self.rows.sizes
        fit = [k for k, one in enumerate(families) if np.prod(sizes[[*one, child]]) <= self.most_cells]
        if fit:
            found[fit] = self._judge(terms, [(*families[k], child) for k in fit])
        return found

    def take(self, child: int, parents: tuple[int, ...]) -> None:
        self._add(child, self.parents[child], -1.0)
        self.parents[child] = parents
        self._add(child, parents, 1.0)
        self._refit()
