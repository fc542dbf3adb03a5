"""How much attributes share with the class, and with each other given the class, in every training set."""

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

from bnx.counts import PairCounts, PairLayout, sum_blocks
from bnx.engines import LocalEngine
from bnx.kernels.contingency import COLUMNS, NATS, ROWS, one_table, table_statistics
from bnx.trainings import Training

__all__ = ["Dependence", "Pairs", "measure", "relevance_of"]


@dataclass(frozen=True)
class Dependence:
    """What learners see, in bits: ``relevance`` (n,) shared with the class, ``strength`` (n, n) shared given it."""

    relevance: np.ndarray
    strength: np.ndarray


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

    def requests(self, training: int) -> list[tuple[int, tuple[int, ...]]]:
        """Name every pair as (number of the training set, members), as counts of families are asked for."""
        return [(training, pair) for pair in zip(self.left.tolist(), self.right.tolist(), strict=True)]

    def matrix(self, values: np.ndarray, attributes: int) -> np.ndarray:
        """Spread one value per pair over a symmetric (n, n) matrix with a zero diagonal."""
        square = np.zeros((attributes, attributes))
        square[self.left, self.right] = square[self.right, self.left] = values
        return square


def relevance_of(engine: LocalEngine, training: Training) -> np.ndarray:
    """Bits that each attribute shares with the class, (n,)."""
    result = np.zeros(len(engine.margins))
    for i, margin in enumerate(engine.margins):
        counts = training.view.merge(i, margin[training.mask].sum(axis=0)).astype(np.int32)
        row = one_table(counts.reshape(1, -1), *counts.shape)
        result[i] = row[NATS] / max(row[ROWS], 1.0) / np.log(2)
    return result


def measure(
    engine: LocalEngine, trainings: Sequence[Training], marginal_of_first: bool = False
) -> list[tuple[Dependence, Pairs]]:
    """Measure every pair in every training set; on request also without the class in the first.

    Pairs whose attributes are used as stored are counted once, by block, for all sets; the others in each set anew.
    """
    attributes = len(engine.margins)
    left, right = (index.astype(np.int64) for index in np.triu_indices(attributes, 1))
    plain = trainings[0].view.plain
    shared = plain[left] & plain[right]
    layout = PairLayout.of(engine.sizes, left[shared], right[shared])
    counted = engine.pair_counts(layout)
    total = counted.counts.sum(axis=0, dtype=np.int32)

    def one(number: int) -> tuple[Dependence, Pairs]:
        training, marginal = trainings[number], marginal_of_first and number == 0
        statistics = np.zeros((len(left), COLUMNS))
        without = np.zeros((len(left) if marginal else 0, COLUMNS))
        for chosen, part, counts in _parts(engine, training, counted, total, shared, left, right):
            tables = (part.offsets[:-1], part.heights, part.widths)
            statistics[chosen] = table_statistics(counts, *tables)
            if marginal:
                without[chosen] = table_statistics(counts.sum(axis=0, dtype=np.int32)[None], *tables)
        pairs = Pairs(left, right, statistics, without)
        bits = statistics[:, NATS] / np.maximum(statistics[:, ROWS], 1.0) / np.log(2)
        return Dependence(relevance_of(engine, training), pairs.matrix(bits, attributes)), pairs

    return engine.map(one, range(len(trainings)), "measuring pairs")


def _parts(
    engine: LocalEngine,
    training: Training,
    counted: PairCounts,
    total: np.ndarray,
    shared: np.ndarray,
    left: np.ndarray,
    right: np.ndarray,
) -> list[tuple[np.ndarray, PairLayout, np.ndarray]]:
    """List (which pairs, their layout, their counts (C, cells)) of one training set."""
    parts = []
    if shared.any():
        parts.append((np.flatnonzero(shared), counted.layout, sum_blocks(counted.counts, total, training.mask)))
    for p in np.flatnonzero(~shared):
        i, j = left[p : p + 1], right[p : p + 1]
        counts = engine.training_counts((int(i[0]), int(j[0])), training.view, training.mask)
        parts.append((np.array([p]), PairLayout.of(training.view.sizes, i, j), counts))
    return parts
