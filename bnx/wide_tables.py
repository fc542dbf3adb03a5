"""Very many binary attributes as bit planes, and what every training set knows of their margins."""

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

from bnx.engines import LocalEngine
from bnx.kernels.wide_bounds import MARGIN, PARTS, UNEVEN, A, B, Q
from bnx.kernels.wide_counts import EVEN, UNEQUAL, common_ones, kinds_of_margins
from bnx.trainings import Training

__all__ = ["Margins", "Planes", "Sums", "joint_tables", "margins_of", "pack", "sums_of"]


@dataclass(frozen=True)
class Planes:
    """One bit per record and attribute, set where it has its second level.

    ``planes`` uint64 (n, words); ``words`` (G + 1,): first word of each group, group = block x C + class.
    """

    planes: np.ndarray
    words: np.ndarray

    def counts(self, left: np.ndarray, right: np.ndarray) -> np.ndarray:
        """Count the records that have both attributes of each pair, int32 (P, G)."""
        return np.asarray(common_ones(self.planes, self.words, left, right))


@dataclass(frozen=True)
class Sums:
    """How to add up blocks for several training sets, sharing what they have in common.

    ``plan`` (K, 3): node, and the two nodes that it is the sum of; ``wanted`` (S,): node of each set; ``nodes``: how
    many; the first are the blocks.
    """

    plan: np.ndarray
    wanted: np.ndarray
    nodes: int


@dataclass(frozen=True)
class Margins:
    """What S training sets know of single attributes.

    ``ones`` int64 (S, C, n): records with the second level; ``records`` float64 (S, C); ``part`` float32 (S, C, PARTS,
    n): see `bnx.kernels.wide_bounds`; ``testable`` (S,): pairs whose X2 can vary.
    """

    ones: np.ndarray
    records: np.ndarray
    part: np.ndarray
    testable: np.ndarray


def pack(engine: LocalEngine, by_block: bool = True) -> Planes:
    """Write the codes of binary attributes, 0 or 1, as bit planes by block and class, or by class alone."""
    groups = engine.blocks * engine.classes if by_block else engine.classes
    parts, words = [], [0]
    for g in range(groups):
        segments = range(g, len(engine.starts) - 1, groups)
        rows = [engine.codes[:, engine.starts[s] : engine.starts[s + 1]] for s in segments]
        held = np.packbits(np.concatenate(rows, axis=1) if len(rows) > 1 else rows[0], axis=1, bitorder="little")
        padded = np.zeros((len(held), -(-held.shape[1] // 8) * 8), np.uint8)
        padded[:, : held.shape[1]] = held
        parts.append(padded.view("<u8").astype(np.uint64))
        words.append(words[-1] + parts[-1].shape[1])
    return Planes(np.concatenate(parts, axis=1), np.array(words, np.int64))


def sums_of(masks: np.ndarray) -> Sums:
    """Plan the sums over the blocks of every set, bool (S, blocks): neighbours first, each different sum once."""
    blocks = masks.shape[1]
    level = np.where(masks, np.arange(blocks), -1)
    plan: list[tuple[int, int, int]] = []
    while level.shape[1] > 1:
        known: dict[tuple[int, int], int] = {}
        merged = []
        for one in range(0, level.shape[1], 2):
            column = []
            for pair in map(tuple, level[:, one : one + 2].tolist()):
                used = tuple(node for node in pair if node >= 0)
                if len(used) == 2 and used not in known:
                    known[used] = blocks + len(plan)
                    plan.append((known[used], *used))
                column.append(known[used] if len(used) == 2 else max(pair))
            merged.append(column)
        level = np.array(merged).T
    return Sums(np.array(plan, np.int64).reshape(-1, 3), level[:, 0].astype(np.int64), blocks + len(plan))


def margins_of(
    engine: LocalEngine, trainings: Sequence[Training], forbidden: frozenset[tuple[int, int]] = frozenset()
) -> Margins:
    """Take the margins of every training set, and the parts of the quick bounds that are an attribute's own.

    forbidden: pairs that are not to be counted as testable.
    """
    by_block = np.stack([margin[:, :, 1] for margin in engine.margins], axis=2)  # (blocks, C, n)
    ones = np.stack([by_block[training.mask].sum(axis=0) for training in trainings])
    records = np.stack([training.class_counts for training in trainings]).astype(np.float64)
    part = np.zeros((*ones.shape[:2], PARTS, ones.shape[2]), np.float32)
    total = records[:, :, None]
    first, second = ones.astype(np.float64), total - ones
    varies = (first > 0) & (second > 0)
    first, second = np.where(varies, first, 1.0), np.where(varies, second, 1.0)
    part[:, :, MARGIN] = ones
    part[:, :, Q] = np.where(varies, 1 / first + 1 / second, 0.0)
    part[:, :, A] = np.where(varies, first**-2 - second**-2, 0.0)
    part[:, :, B] = np.where(varies, first**-3 + second**-3, 0.0)
    gap = (first - second) ** 2 / (first * second * np.maximum(total - 2.0, 1.0))
    part[:, :, UNEVEN] = np.where(varies, gap, 0.0)
    kinds = [kinds_of_margins(own, of.astype(np.int64)) for own, of in zip(ones, records, strict=True)]
    return Margins(ones, records, part, np.array([_testable_pairs(one, forbidden) for one in kinds]))


def _testable_pairs(kinds: np.ndarray, forbidden: frozenset[tuple[int, int]]) -> int:
    """Count the pairs whose X2 can vary, given the kinds of margins (C, n)."""
    different, numbers = np.unique(kinds, axis=1, return_counts=True)
    can = _can_vary(different[:, :, None], different[:, None, :])
    together = np.outer(numbers, numbers) * can
    left, right = np.array(sorted(forbidden), np.int64).reshape(-1, 2).T
    barred = _can_vary(kinds[:, left], kinds[:, right]).sum()
    return int((together.sum() - (numbers * np.diag(can)).sum()) // 2 - barred)


def _can_vary(one: np.ndarray, other: np.ndarray) -> np.ndarray:
    """Tell which pairs of kinds (C, ...) share a part of X2's variance in some class."""
    return np.asarray(((one & other & (EVEN | UNEQUAL)) > 0).any(axis=0))


def joint_tables(joint: np.ndarray, left: np.ndarray, right: np.ndarray, records: np.ndarray) -> np.ndarray:
    """Complete 2 x 2 tables, int32 (P, C, 4), from the records that have both levels, either level, and all (P, C)."""
    cells = [records - left - right + joint, right - joint, left - joint, joint]
    return np.stack(np.broadcast_arrays(*cells), axis=2).astype(np.int32)
