"""The rows of one training set in inner folds, and the held-out class log loss that a choice of parents has there."""

import math
from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

from bnx.engines import LocalEngine
from bnx.kernels.held_tables import held_tables
from bnx.kernels.misfits import misfits
from bnx.kernels.replacing import held_weights, present_loss, replace_family, replaced_savings
from bnx.trainings import Training

__all__ = ["MOST_ROWS", "MOST_ROWS_FOR_PAIRS", "InnerRows", "RowJudge", "inner_rows"]

MOST_ROWS = 10_000
MOST_ROWS_FOR_PAIRS = 1_000
INNER_FOLDS = 3
STRENGTH = 2.0  # records that tables with one parent less stand for
_CELLS_PER_ROW = 4  # most cells of a family that is tried
_FEWEST_CELLS = 1024
_ROOM = 2**20  # probabilities that are kept for when they are asked for again
_FAMILIES = 4096  # of which tables are kept
_MEMBERS = 4  # of a family, as a rule
_AT_ONCE = 1000  # rows that say enough to give up a choice
_EIGHTHS = 8

Family = tuple[int, ...]
Laid = tuple[np.ndarray, np.ndarray, np.ndarray, np.ndarray, np.ndarray, np.ndarray]


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
    wanted = rows if share >= 1 else min(rows, max(1, int(share * rows)))
    places = np.arange(wanted) * rows // max(wanted, 1)
    places = np.concatenate([places[first::_EIGHTHS] for first in range(_EIGHTHS)])
    held = np.searchsorted(ends, places, side="right")
    return np.asarray(engine.starts[segments[held] + 1] - ends[held] + places)


class _Tables:
    """Tables of families, kept for when they are asked for again; those of all parents but the last come first.

    ``pool``: all tables, one after the other; ``members``, ``sizes``, ``levels`` (F, M), ``depths``, ``places`` (F,):
    of every family, by its number, as ``held_tables`` takes them.
    """

    def __init__(self, rows: InnerRows, widest: int) -> None:
        """Begin with none; families have at most ``widest`` members."""
        self._rows, self._each = rows, len(rows.starts) - 1
        self._sizes, self._levels = rows.sizes.tolist(), rows.levels.tolist()
        self.pool = np.empty(_ROOM)
        self.members, self.sizes, self.levels = (np.empty((_FAMILIES, widest), np.int64) for _ in range(3))
        self.depths, self.places = np.empty(_FAMILIES, np.int64), np.empty(_FAMILIES, np.int64)
        self._numbers: dict[Family, int] = {}
        self._cells: dict[Family, int] = {}
        self._used = 0

    def cells_of(self, family: Family) -> int:
        """Count the cells of a family, without the class."""
        cells = self._cells.get(family)
        if cells is None:
            cells = self._cells[family] = math.prod([self._sizes[member] for member in family])
        return cells

    def numbers_of(self, families: Sequence[Family]) -> np.ndarray:
        """Number families whose tables are in the pool from now on, until others are asked for."""
        missing = self._missing(families)
        if missing:
            self._make(missing if self._fits(missing) else self._forget(families))
        known = self._numbers
        return np.array([known[one] for one in families])

    def fixed(self, families: Sequence[Family]) -> Laid:
        """Give what loops take of families: their numbers, and of all members, sizes, depths, places, and the pool."""
        which = self.numbers_of(families)
        return which, self.members, self.sizes, self.depths, self.places, self.pool

    def _missing(self, families: Sequence[Family]) -> list[Family]:
        """List the families without a table, and those that their tables are made from, these first."""
        known, found = self._numbers, dict[Family, None]()
        for family in families:
            if family not in known:
                parents, child = family[:-1], family[-1]
                for depth in range(len(parents)):
                    if (*parents[:depth], child) not in known:
                        found[(*parents[:depth], child)] = None
                found[family] = None
        return list(found)

    def _room_of(self, families: Sequence[Family]) -> int:
        """Count the probabilities that tables of families hold."""
        return self._each * sum([self.cells_of(one) for one in families])

    def _fits(self, missing: Sequence[Family]) -> bool:
        room = self._used + self._room_of(missing)
        return room <= len(self.pool) and len(self._numbers) + len(missing) <= len(self.depths)

    def _forget(self, families: Sequence[Family]) -> list[Family]:
        """Forget all tables, and make room for those of some families, listed with what they are made from."""
        self._numbers, self._used = {}, 0
        missing = self._missing(families)
        if not self._fits(missing):
            wide = np.empty((2 * len(missing), self.members.shape[1]), np.int64)
            self.members, self.sizes, self.levels = wide, wide.copy(), wide.copy()
            self.depths, self.places = np.empty(len(wide), np.int64), np.empty(len(wide), np.int64)
            self.pool = np.empty(max(len(self.pool), self._room_of(missing)))
        return missing

    def _make(self, families: Sequence[Family]) -> None:
        """Make the tables of families that follow what they are made from."""
        rows, first = self._rows, len(self._numbers)
        part = slice(first, first + len(families))
        self._numbers.update(zip(families, range(part.start, part.stop), strict=True))
        self.depths[part] = [len(one) for one in families]
        rest = [(0,) * (self.members.shape[1] - len(one)) for one in families]
        self.members[part] = [one + more for one, more in zip(families, rest, strict=True)]
        ones = [(1,) * len(more) for more in rest]
        for laid, known in ((self.sizes, self._sizes), (self.levels, self._levels)):
            laid[part] = [(*(known[i] for i in one), *more) for one, more in zip(families, ones, strict=True)]
        ends = self._used + self._each * np.cumsum([self.cells_of(one) for one in families])
        self.places[part] = [self._used, *ends[:-1]]
        self._used = int(ends[-1])
        numbers = [self._numbers[(*one[:-2], one[-1])] if len(one) > 1 else 0 for one in families]
        fixed = (self.members[part], self.sizes[part], self.levels[part], self.depths[part], STRENGTH)
        places = (self.places[numbers], self.places[part])
        held_tables(rows.codes, rows.starts, len(rows.floor), *fixed, *places, self.pool)


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
        self._tables = _Tables(rows, max(_MEMBERS, 1 + max(map(len, self.parents))))
        self._weights = np.empty((len(rows.floor), rows.codes.shape[1]))
        self._present = np.ones(rows.codes.shape[1])
        fixed = self._tables.fixed([(*own, child) for child, own in enumerate(self.parents)])
        held_weights(rows.codes, rows.starts, *fixed, rows.log_prior, self._weights)
        self._settle()
        self._first = self._present.copy()
        n, first = rows.codes.shape[1], np.array([1, 2, 4, 8])
        self._most = max(_FEWEST_CELLS, _CELLS_PER_ROW * n)
        self._stages = first[np.append(first[:-1] * n >= _EIGHTHS * _AT_ONCE, True)]

    def misfits(self, families: Sequence[Family]) -> np.ndarray:
        """Tell how far the classes in the cells of families of one size are from their chances so far, (K,).

        In standard deviations, on at most 1,000 rows; minus infinity for a family that is not to be tried.
        """
        lengths, found = np.diff(self.rows.starts), np.full(len(families), -np.inf)
        taken = np.ceil(lengths * min(1.0, MOST_ROWS_FOR_PAIRS / max(1, int(lengths.sum())))).astype(np.int64)
        able = [k for k, family in enumerate(families) if self._tables.cells_of(family) <= self._most]
        if able:
            members = np.array([families[k] for k in able])
            out = np.empty(len(able))
            misfits(self.rows.codes, self.rows.starts, taken, self._weights, members, self.rows.sizes[members], out)
            found[able] = out
        return found

    def loss(self) -> float:
        """Tell the loss of the structure so far (nats)."""
        return self._loss

    def savings(self, child: int, choices: Sequence[Family], least: float) -> np.ndarray:
        """Tell what each of K choices of parents saves (nats, all rows together), (K,).

        What some of the rows show not to save ``least`` is estimated from these. It is minus infinity for a family of
        more than 4 cells a row (of more than 1,024, where rows are few).
        """
        own, families = (*self.parents[child], child), [(*parents, child) for parents in choices]
        saved = np.full(len(families), -np.inf)
        for some in self._batches(families):
            fixed = self._tables.fixed([own, *(families[k] for k in some)])
            out = np.empty(len(some))
            state = (self._weights, self.rows.floor, self._present, self._stages, least)
            replaced_savings(self.rows.codes, self.rows.starts, *fixed, *state, out)
            saved[some] = out
        return saved

    def _batches(self, families: Sequence[Family]) -> list[list[int]]:
        """Cut those that may be judged into as many as there is room for."""
        batches: list[list[int]] = []
        room = 0
        for k, family in enumerate(families):
            cells = self._tables.cells_of(family)
            if cells <= self._most:
                if not batches or room < cells:
                    batches.append([])
                    room = _ROOM // len(self.rows.starts)
                batches[-1].append(k)
                room -= cells
        return batches

    def path(self) -> tuple[float, float]:
        """Tell what all moves so far have saved together (nats, all rows), and its standard error."""
        saved = np.log(self._first / self._present)
        return float(saved.sum()), float(saved.std() * np.sqrt(len(saved)))

    def take(self, child: int, parents: Family) -> None:
        """Give an attribute other parents."""
        fixed = self._tables.fixed([(*self.parents[child], child), (*parents, child)])
        replace_family(self.rows.codes, self.rows.starts, *fixed, self._weights)
        self.parents[child] = parents
        self._settle()

    def _settle(self) -> None:
        """Find the chances of the true classes and the loss of the structure so far."""
        self._loss = present_loss(self.rows.starts, self._weights, self.rows.floor, self._present)
