"""How much attributes share with the class, and with each other given the class, in every training set."""

from collections.abc import Iterable, Sequence
from dataclasses import dataclass
from functools import partial
from typing import Any

import numpy as np

from bnx.engines import LocalEngine
from bnx.kernels.contingency import COLUMNS, NATS, ROWS, one_table, table_statistics
from bnx.kernels.reducing import Sets, blocks_of_masks, reduce_table, reduce_tile
from bnx.pair_counting import count_pair, count_tile, rows_of_groups, shares
from bnx.room import Room, room_of
from bnx.tiles import tiles_of
from bnx.trainings import Training
from bnx.views import Refinement, refine

__all__ = ["Dependence", "Pairs", "measure", "relevance_of", "sets_at_a_time"]

_STAGE = "measuring pairs"
_FLOATS_AT_A_TIME = 50_000_000  # statistics of pairs: 400 MB
_CELLS = 32_000_000  # counts that are held at a time: 128 MB
_MOST_CELLS = 900  # of a pair counted by bit planes; beyond, single increments win (measured)
_DENSE = 8  # a pair is counted by block when its cells over all blocks and classes are at most this many per row
_SMALL = 1_000_000  # ... or at most this many


@dataclass(frozen=True)
class Dependence:
    """What learners see, in bits: ``relevance`` (n,) shared with the class, ``strength`` (n, n) shared given it.

    ``room``: for tables of many parents; None: without end.
    """

    relevance: np.ndarray
    strength: np.ndarray
    room: Room | None = None


@dataclass(frozen=True)
class Pairs:
    """Statistics of all n (n - 1) / 2 pairs given the class in one training set.

    ``left``, ``right`` (P,): the attributes; ``statistics`` (P, COLUMNS): see ``contingency``;
    ``marginal`` (P, COLUMNS): the same without the class, no rows unless it was asked for.
    """

    left: np.ndarray
    right: np.ndarray
    statistics: np.ndarray
    marginal: np.ndarray

    def matrix(self, values: np.ndarray, attributes: int) -> np.ndarray:
        """Spread one value per pair over a symmetric (n, n) matrix with a zero diagonal."""
        square = np.zeros((attributes, attributes))
        square[self.left, self.right] = square[self.right, self.left] = values
        return square

    def strengths(self, edges: Iterable[tuple[int, int]]) -> dict[tuple[int, int], float]:
        """Look up the bits per record of some of these pairs, either end first."""
        wanted = sorted(set(edges))
        ends = np.array(wanted, np.int64).reshape(-1, 2)
        number = (self.left << 32) | self.right
        places = np.searchsorted(number, (ends.min(axis=1, initial=2**31) << 32) | ends.max(axis=1, initial=0))
        return dict(zip(wanted, _bits(self.statistics[places]).tolist(), strict=True))


def relevance_of(engine: LocalEngine, training: Training) -> np.ndarray:
    """Bits that each attribute shares with the class, (n,)."""
    view = training.view
    tables = [view.merge(i, margin[training.mask].sum(axis=0)) for i, margin in enumerate(engine.margins)]
    for i in view.veiled:
        tables[i] = tables[i][:, :-1]
    line = np.concatenate([table.astype(np.int32).ravel() for table in tables])[None]
    offsets = np.cumsum([0, *(table.size for table in tables[:-1])])
    heights = np.full(len(tables), engine.classes, np.int64)
    return _bits(table_statistics(line, offsets.astype(np.int64), heights, view.sizes))


def _bits(statistics: np.ndarray) -> np.ndarray:
    """Bits per record of statistics (P, COLUMNS), (P,)."""
    return np.asarray(statistics[:, NATS] / np.maximum(statistics[:, ROWS], 1.0) / np.log(2))


def sets_at_a_time(attributes: int) -> int:
    """Say how many training sets may be measured together."""
    pairs = attributes * (attributes - 1) // 2
    return max(1, _FLOATS_AT_A_TIME // max(1, (COLUMNS + 6) * pairs))


def measure(
    engine: LocalEngine, trainings: Sequence[Training], marginal_of_first: bool = False
) -> list[tuple[Dependence, Pairs]]:
    """Measure every pair in every training set; on request also without the class in the first.

    Pairs are counted by block in the coarsest levels that all sets can be made of, and go from there to the statistics
    of every set; nothing else is kept.
    """
    attributes = len(engine.margins)
    left, right = (index.astype(np.int64) for index in np.triu_indices(attributes, 1))
    statistics = np.zeros((len(trainings), len(left), COLUMNS))
    marginal = np.zeros((len(left) if marginal_of_first else 0, COLUMNS))
    fine = refine([training.view for training in trainings], engine.sizes)
    if len(left):
        _measure(engine, trainings, fine, statistics, marginal)

    def one(number: int) -> tuple[Dependence, Pairs]:
        pairs = Pairs(left, right, statistics[number], marginal if number == 0 else marginal[:0])
        strength = pairs.matrix(_bits(statistics[number]), attributes)
        training = trainings[number]
        return Dependence(relevance_of(engine, training), strength, room_of(training)), pairs

    return engine.map(one, range(len(trainings)))


def _measure(
    engine: LocalEngine, trainings: Sequence[Training], fine: Refinement, out: np.ndarray, marginal: np.ndarray
) -> None:
    """Fill in the statistics (K, P, COLUMNS) of all pairs, and without the class (P or 0, COLUMNS)."""
    groups = rows_of_groups(engine.starts, engine.blocks * engine.classes)
    sets = _sets(engine, trainings, fine)
    cells = (fine.sizes[:, None] - 1) * (fine.sizes - 1)
    above = np.triu(np.ones(cells.shape, np.bool_), 1)
    by_planes = above & (cells <= _MOST_CELLS)
    number = np.zeros(cells.shape, np.int64)
    number[above] = np.arange(out.shape[1])
    recode, done = fine.recode.astype(engine.codes.dtype), 0
    for tile in tiles_of(fine.sizes, by_planes, _CELLS // len(groups)):
        counts = count_tile(engine.codes, recode, fine.plain, tile, groups, engine.jobs, engine.map)
        pairs = (tile.places, tile.left_ends, tile.right_ends, number[tile.left_ends, tile.right_ends])
        reduce = partial(_reduce, (counts, tile.stride, *pairs, sets), (out, marginal))
        engine.map(reduce, shares(len(tile.places), 16 * engine.jobs))
        done += len(tile.places)
        engine.progress(_STAGE, done, out.shape[1])

    def large(pair: list[int]) -> None:
        i, j = pair
        place = number[i, j]
        if by_block_pays(engine, int(fine.sizes[i] * fine.sizes[j])):
            counts = count_pair(engine.codes, recode, fine, i, j, groups)
            reduce_table(counts, i, j, sets, out[:, place], marginal[place : place + 1])
        else:
            _anew(engine, trainings, i, j, out[:, place], marginal[place : place + 1])

    engine.map(large, np.argwhere(above & ~by_planes).tolist())
    if done < out.shape[1]:
        engine.progress(_STAGE, out.shape[1], out.shape[1])


def _reduce(given: tuple[Any, ...], into: tuple[np.ndarray, np.ndarray], share: tuple[int, int]) -> None:
    """Reduce a share of a tile's pairs."""
    arguments = (*given, *share, *into)
    reduce_tile(*arguments)


def by_block_pays(engine: LocalEngine, cells: int) -> bool:
    """Tell whether a table is counted by block once, rather than in every training set anew."""
    groups = engine.blocks * engine.classes
    return cells * groups <= min(_CELLS, max(_SMALL, _DENSE * int(engine.starts[-1])))


def _sets(engine: LocalEngine, trainings: Sequence[Training], fine: Refinement) -> Sets:
    """Write training sets down as kernels read them."""
    masks = np.array([training.mask for training in trainings])
    margins = np.zeros((len(trainings), engine.classes, int(fine.starts[-1])), np.int32)
    for i, margin in enumerate(engine.margins):
        merged = np.zeros((engine.blocks, engine.classes, fine.sizes[i]), np.int64)
        for stored, level in enumerate(fine.recode[i, : margin.shape[2]].tolist()):
            merged[:, :, level] += margin[:, :, stored]
        margins[:, :, fine.starts[i] : fine.starts[i + 1]] = np.tensordot(masks.astype(np.int64), merged, 1)
    return Sets(blocks_of_masks(masks), fine.starts, margins, fine.levels, fine.view_sizes, fine.plain)


def _anew(
    engine: LocalEngine, trainings: Sequence[Training], i: int, j: int, out: np.ndarray, marginal: np.ndarray
) -> None:
    """Measure one pair in every training set from its own rows."""
    for k, training in enumerate(trainings):
        counts = engine.training_counts((i, j), training.view, training.mask)
        out[k] = one_table(counts, *training.view.sizes_of((i, j)))
        if k == 0 and len(marginal):
            marginal[0] = one_table(counts.sum(axis=0, dtype=np.int32)[None], *training.view.sizes_of((i, j)))
