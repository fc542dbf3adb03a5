"""The rows of one training set in inner folds, and the held-out class log loss that a choice of parents has there."""

from collections.abc import Sequence
from dataclasses import dataclass, replace
from itertools import chain

import numpy as np

from bnx.engines import LocalEngine
from bnx.kernels.held_tables import held_tables
from bnx.kernels.replacing import held_weights, present_loss, replace_family, replaced_savings
from bnx.trainings import Training

__all__ = ["MOST_ROWS", "MOST_ROWS_FOR_PAIRS", "InnerRows", "RowJudge", "fewer_rows", "inner_rows"]

MOST_ROWS = 10_000
MOST_ROWS_FOR_PAIRS = 1_000
INNER_FOLDS = 3
STRENGTH = 2.0  # records that tables with one parent less stand for
_CELLS_PER_ROW = 4  # most cells of a family that is tried
_FEWEST_CELLS = 1024
_ROOM = 2**20  # probabilities that are kept for when they are asked for again
_AT_ONCE = 500  # rows that say enough to give up a choice
_EIGHTHS = 8

Family = tuple[int, ...]


@dataclass(frozen=True)
class InnerRows:
    """Rows of one training set, sorted by inner fold and class; the first of each are spread evenly over all of them.

    ``codes`` (n, N) as the training set sees them, of ``sizes`` (n,), of which those from ``levels`` (n,) on stand for
    cells not observed; ``starts`` (folds * C + 1,): first row of each fold and class; ``log_prior`` (folds, C) nats:
    share of each class outside each fold, minus infinity for none; ``floor`` (C,): added to every chance.
    """

    codes: np.ndarray
    sizes: np.ndarray
    levels: np.ndarray
    starts: np.ndarray
    log_prior: np.ndarray
    floor: np.ndarray


def inner_rows(engine: LocalEngine, training: Training, most: int) -> InnerRows:
    """Cut the blocks of a training set into three runs of neighbours; take ``most`` rows, spread evenly, or all."""
    parts = np.array_split(np.flatnonzero(training.mask), INNER_FOLDS)
    taken = [
        _spread(engine, part, c, most / training.class_counts.sum()) for part in parts for c in range(engine.classes)
    ]
    codes = np.take(engine.codes, np.concatenate(taken), axis=1)
    view = training.view
    for i in np.flatnonzero(~view.plain).tolist():
        codes[i] = view.recode[i][codes[i]]
    rows = np.array([len(one) for one in taken])
    return InnerRows(codes, view.codes, view.sizes, *_classes_of(rows))


def fewer_rows(rows: InnerRows, most: int) -> InnerRows:
    """Keep about ``most`` rows, the first of every fold and class."""
    lengths = np.diff(rows.starts)
    kept = np.ceil(lengths * min(1.0, most / max(int(lengths.sum()), 1))).astype(np.int64)
    index = np.concatenate([start + np.arange(n) for start, n in zip(rows.starts[:-1].tolist(), kept, strict=True)])
    starts, log_prior, floor = _classes_of(kept)
    codes = np.take(rows.codes, index, axis=1)
    return replace(rows, codes=codes, starts=starts, log_prior=log_prior, floor=floor)


def _classes_of(rows: np.ndarray) -> tuple[np.ndarray, np.ndarray, np.ndarray]:
    """Give starts, log prior and floor of so many rows (folds * C,) of each fold and class."""
    by_fold = rows.reshape(INNER_FOLDS, -1)
    others = by_fold.sum(axis=0) - by_fold
    with np.errstate(divide="ignore"):
        log_prior = np.log(others / np.maximum(others.sum(axis=1, keepdims=True), 1))
    starts = np.concatenate([[0], np.cumsum(rows)]).astype(np.int64)
    return starts, log_prior, by_fold.sum(axis=0) / max(int(rows.sum()), 1) ** 2


def _spread(engine: LocalEngine, blocks: np.ndarray, c: int, share: float) -> np.ndarray:
    """Take a share of the rows of one class in some blocks, spread evenly; what lies where was decided by the seed."""
    groups = engine.blocks * engine.classes
    turns = np.arange((len(engine.starts) - 1) // groups) * groups
    segments = (blocks * engine.classes + c + turns[:, None]).ravel()
    ends = np.cumsum(engine.starts[segments + 1] - engine.starts[segments])
    rows = int(ends[-1]) if len(ends) else 0
    wanted = min(rows, int(np.ceil(share * rows)))
    places = np.arange(wanted) * rows // max(wanted, 1)
    places = np.concatenate([places[first::_EIGHTHS] for first in range(_EIGHTHS)])
    held = np.searchsorted(ends, places, side="right")
    return np.asarray(engine.starts[segments[held] + 1] - ends[held] + places)


@dataclass(frozen=True)
class _Families:
    """Some families as the loops take them: members, codes and levels (K, M), of which ``depths`` (K,) count."""

    members: np.ndarray
    sizes: np.ndarray
    levels: np.ndarray
    depths: np.ndarray
    cells: np.ndarray


class _Tables:
    """Tables of families, kept for when they are asked for again; those of all parents but the last come first."""

    def __init__(self, rows: InnerRows) -> None:
        """Begin with none."""
        self._rows = rows
        self._per_cell = len(rows.starts) - 1
        self._pool = np.empty(_ROOM)
        self._places: dict[Family, int] = {}
        self._used = 0

    def arranged(self, families: Sequence[Family]) -> _Families:
        """Lay families out side by side."""
        depths = np.array([len(one) for one in families])
        used = np.arange(int(depths.max())) < depths[:, None]
        members = np.zeros(used.shape, np.int64)
        members[used] = list(chain.from_iterable(families))
        sizes, levels = (np.where(used, one[members], 1) for one in (self._rows.sizes, self._rows.levels))
        return _Families(members, sizes, levels, depths, sizes.prod(axis=1, dtype=np.float64))

    def of(self, families: Sequence[Family]) -> tuple[np.ndarray, np.ndarray]:
        """Give the array that holds the tables of families, and where each begins."""
        missing = self._missing(families)
        if missing:
            wanted = self.arranged(missing)
            room = (wanted.cells * self._per_cell).astype(np.int64)
            if self._used + room.sum() > len(self._pool):
                self._places, self._used = {}, 0
                missing = self._missing(families)
                wanted = self.arranged(missing)
                room = (wanted.cells * self._per_cell).astype(np.int64)
                if room.sum() > len(self._pool):
                    self._pool = np.empty(int(room.sum()))
            self._make(missing, wanted, room)
        return self._pool, np.array([self._places[one] for one in families])

    def _missing(self, families: Sequence[Family]) -> list[Family]:
        """List the families without a table, and those that their tables are made from, these first."""
        found: dict[Family, None] = {}
        for family in families:
            if family not in self._places:
                parents, child = family[:-1], family[-1]
                for depth in range(len(parents)):
                    if (*parents[:depth], child) not in self._places:
                        found[(*parents[:depth], child)] = None
                found[family] = None
        return list(found)

    def _make(self, families: Sequence[Family], wanted: _Families, room: np.ndarray) -> None:
        rows = self._rows
        ends = self._used + np.cumsum(room)
        places = ends - room
        self._places.update(zip(families, places.tolist(), strict=True))
        self._used = int(ends[-1])
        above = np.array([self._places[(*one[:-2], one[-1])] if len(one) > 1 else 0 for one in families])
        fixed = (wanted.members, wanted.sizes, wanted.levels, wanted.depths, STRENGTH)
        held_tables(rows.codes, rows.starts, len(rows.floor), *fixed, above, places, self._pool)


class RowJudge:
    """Judges other parents of one attribute by the held-out log loss of all rows; holds the structure so far.

    The tables are smoothed by back-off with 2 records and counted without the fold that is judged. As in the final
    model no class is ruled out: every chance is mixed with the classes' shares, which count for one row in all. A cell
    that is not observed says nothing; where it is a parent's, the child is as without this parent and those after it.
    """

    def __init__(self, rows: InnerRows, parents: Sequence[Family]) -> None:
        """Start from a structure."""
        self.rows = rows
        self.parents = list(parents)
        self._tables = _Tables(rows)
        self._weights = np.empty((len(rows.floor), rows.codes.shape[1]))
        self._present = np.ones(rows.codes.shape[1])
        families = [(*own, child) for child, own in enumerate(self.parents)]
        pool, places = self._tables.of(families)
        laid = self._tables.arranged(families)
        fixed = (laid.members, laid.sizes, laid.depths, places, pool, rows.log_prior)
        held_weights(rows.codes, rows.starts, *fixed, self._weights)
        self._settle()
        first = np.array([1, 2, 4, 8])
        n = rows.codes.shape[1]
        self._stages = first[np.append(first[:-1] * n >= _EIGHTHS * _AT_ONCE, True)]

    def rough(self) -> "RowJudge":
        """Judge on fewer rows what a sieve can do with: from the structure so far."""
        if self.rows.codes.shape[1] <= MOST_ROWS_FOR_PAIRS:
            return self
        return RowJudge(fewer_rows(self.rows, MOST_ROWS_FOR_PAIRS), self.parents)

    def loss(self) -> float:
        """Tell the loss of the structure so far (nats)."""
        return self._loss

    def savings(
        self, child: int, choices: Sequence[Family], least: float, errors: float
    ) -> tuple[np.ndarray, np.ndarray]:
        """Tell what each of K choices of parents saves (nats, all rows together), and its standard error, (K,) each.

        What some of the rows show not to save ``least`` and ``errors`` standard errors is estimated from these. It is
        minus infinity for a family of more than 4 cells a row (of more than 1,024, where rows are few).
        """
        own = (*self.parents[child], child)
        laid = self._tables.arranged([own, *((*parents, child) for parents in choices)])
        able = np.flatnonzero(laid.cells[1:] <= max(_FEWEST_CELLS, _CELLS_PER_ROW * self.rows.codes.shape[1]))
        found = np.full((2, len(choices)), [[-np.inf], [0.0]])
        batch = (laid.cells[1:][able].cumsum() * len(self.rows.starts) // _ROOM).astype(np.int64)
        for number in np.unique(batch).tolist():
            some = able[batch == number]
            found[:, some] = self._replaced([own, *((*choices[k], child) for k in some.tolist())], least, errors)
        return found[0], found[1]

    def _replaced(self, families: Sequence[Family], least: float, errors: float) -> np.ndarray:
        """Tell savings and standard errors (2, K) of all families but the first, which is that of now."""
        rows, laid = self.rows, self._tables.arranged(families)
        pool, places = self._tables.of(families)
        out = np.empty((2, len(families) - 1))
        fixed = (laid.members, laid.sizes, laid.depths, places, pool, self._weights, rows.floor, self._present)
        replaced_savings(rows.codes, rows.starts, *fixed, self._stages, least, errors, out)
        out[1] = np.sqrt(np.maximum(out[1] - out[0] ** 2 / max(1, rows.codes.shape[1]), 0.0))
        return out

    def take(self, child: int, parents: Family) -> None:
        """Give an attribute other parents."""
        families = [(*self.parents[child], child), (*parents, child)]
        pool, places = self._tables.of(families)
        laid = self._tables.arranged(families)
        fixed = (laid.members, laid.sizes, laid.depths, places, pool, self._weights)
        replace_family(self.rows.codes, self.rows.starts, *fixed)
        self.parents[child] = parents
        self._settle()

    def _settle(self) -> None:
        """Find the chances of the true classes and the loss of the structure so far."""
        self._loss = present_loss(self.rows.starts, self._weights, self.rows.floor, self._present)
