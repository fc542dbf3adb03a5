"""Count on this machine: bit planes for pairs, one blocked pass for a family, threads over both."""

from collections.abc import Callable, Iterable, Sequence
from concurrent.futures import ThreadPoolExecutor
from dataclasses import dataclass, replace
from itertools import pairwise
from typing import TypeVar

import numpy as np

from bnx.counts import FamilyCounts, PairCounts, PairLayout
from bnx.kernels import count_cells
from bnx.pair_counting import count_layout
from bnx.storing import MEMORY, Store
from bnx.tables import CodedTable
from bnx.views import View

__all__ = ["LocalEngine", "start_local"]

Progress = Callable[[str, int, int], None]  # stage, done, of how many
Item = TypeVar("Item")
Result = TypeVar("Result")

CHUNK = 1 << 20  # rows that are sorted at a time
_NO_RECODE = np.zeros((1, 1), np.int32)
_RUN = 32  # items that a thread takes at a time, at most


@dataclass(frozen=True)
class RowsWeighed:
    """The weights of rows that do not count alike, whose sums are exact in any order.

    ``of_rows`` (N,) float64, in the order of the rows; ``by_class`` (blocks, C): their sums; ``margins``: per
    attribute, sums (blocks, C, stored levels).
    """

    of_rows: np.ndarray
    by_class: np.ndarray
    margins: tuple[np.ndarray, ...]


@dataclass(frozen=True)
class LocalEngine:
    """Rows sorted by (block, class) within chunks of the table, and the counting of them.

    ``codes`` (n, N) as stored and ``target`` (N,), sorted; ``groups`` (N,): number block * C + class of each row in the
    table's own order; ``chunk``: rows of a chunk; ``starts`` (S + 1,): first sorted row of each segment, where segment
    s holds the rows of group s % G, G = blocks * C, in chunk s // G. ``margins``: per attribute, counts (blocks, C,
    stored levels) int64. ``weighed``: the weights of rows, None where all count alike.
    """

    codes: np.ndarray
    target: np.ndarray
    groups: np.ndarray
    chunk: int
    starts: np.ndarray
    blocks: int
    classes: int
    sizes: np.ndarray
    margins: tuple[np.ndarray, ...]
    jobs: int
    progress: Progress
    store: Store
    weighed: RowsWeighed | None = None

    @property
    def class_counts(self) -> np.ndarray:
        """Rows of each block and class, int64 (blocks, C)."""
        return np.asarray(np.diff(self.starts).reshape(-1, self.blocks, self.classes).sum(axis=0))

    @property
    def rows(self) -> int:
        """Rows of the table."""
        return len(self.target)

    @property
    def order(self) -> np.ndarray:
        """Row of the table behind each sorted row, int64 (N,), worked out anew."""
        return np.concatenate([self.order_of(part) + part.start for part in _chunks(self.rows, self.chunk)])

    def order_of(self, chunk: slice) -> np.ndarray:
        """Place in one chunk of the table of each of its sorted rows, int64."""
        return np.asarray(np.argsort(self.groups[chunk], kind="stable"))

    def rows_of(self, first_block: int, last_block: int) -> list[slice]:
        """Sorted rows of neighbouring blocks, a run for each time that the groups come round."""
        turns = np.arange(0, len(self.starts) - 1, self.blocks * self.classes)
        first, last = (self.starts[turns + block * self.classes].tolist() for block in (first_block, last_block))
        return [slice(start, stop) for start, stop in zip(first, last, strict=True)]

    def map(self, function: Callable[[Item], Result], items: Iterable[Item], stage: str = "") -> list[Result]:
        """Apply a function to items on this engine's threads; results keep the items' order.

        stage: what to tell the progress callback as items are done; nothing is told without it. Many small items are
        handed over in runs, as handing one over costs as much as counting a small family.
        """
        work = list(items)
        step = max(1, min(_RUN, len(work) // (8 * self.jobs)))
        runs = [work[start : start + step] for start in range(0, len(work), step)]
        results: list[Result] = []
        if stage:
            self.progress(stage, 0, len(work))
        with ThreadPoolExecutor(self.jobs) as pool:
            for found in pool.map(lambda run: [function(item) for item in run], runs):
                results += found
                if stage:
                    self.progress(stage, len(results), len(work))
        return results

    def recoded(self, view: View) -> "LocalEngine":
        """Store the rows as ``view`` sees them, so that every attribute can be used as stored."""
        if view.plain.all():
            return self
        codes = self.store.empty(self.codes.shape, self.codes.dtype)

        def recode(i: int) -> None:
            lookup = view.recode[i].astype(codes.dtype)
            for part in _chunks(self.rows, self.chunk):
                np.take(lookup, self.codes[i, part], out=codes[i, part], mode="clip")

        self.map(recode, range(len(codes)))
        margins = tuple(view.merge(i, margin) for i, margin in enumerate(self.margins))
        weighed = self.weighed
        if weighed:
            merged = tuple(view.merge(i, margin) for i, margin in enumerate(weighed.margins))
            weighed = replace(weighed, margins=merged)
        return replace(self, codes=codes, sizes=view.codes, margins=margins, weighed=weighed)

    def pair_counts(self, layout: PairLayout) -> PairCounts:
        """Count pairs of attributes, as stored, by block and class."""
        margins = np.concatenate(self.margins, axis=2)
        return count_layout(self.codes, self.sizes, self.starts, margins, layout, self.jobs, self.map)

    def family_counts(self, members: Sequence[int], view: View) -> FamilyCounts:
        """Count a family of attributes that ``view`` leaves as stored, by block and class."""
        slots = np.arange(self.blocks * self.classes, dtype=np.int64)
        counts = self._count(members, view, slots)
        return FamilyCounts(tuple(members), view.sizes_of(members), counts.reshape(self.blocks, self.classes, -1))

    def training_counts(self, members: Sequence[int], view: View, mask: np.ndarray) -> np.ndarray:
        """Count a family over the blocks of ``mask`` (blocks,) bool by class: (C, cells) int32, what is observed."""
        by_class = np.arange(self.classes, dtype=np.int64)
        slots = np.where(mask[:, None], by_class, -1).ravel()
        return self._count(members, view, slots)

    def _count(self, members: Sequence[int], view: View, slots: np.ndarray) -> np.ndarray:
        sizes = view.codes[list(members)]
        out = np.zeros((int(slots.max()) + 1, int(sizes.prod())), np.int32)
        plain = view.all_plain(members)
        count_cells(self.codes, view.recode, plain, np.array(members), sizes, self.starts, slots, out)
        return view.observed(members, out)


def _chunks(rows: int, chunk: int) -> list[slice]:
    """Cut rows into chunks; a table without rows is one chunk of none."""
    return [slice(first, min(first + chunk, rows)) for first in range(0, max(rows, 1), chunk)]


def start_local(
    table: CodedTable,
    blocks_of_rows: np.ndarray,
    blocks: int,
    jobs: int,
    progress: Progress,
    store: Store = MEMORY,
    chunk: int = CHUNK,
    in_place: bool = False,
) -> LocalEngine:
    """Sort each chunk of a coded table by (block, class, position) and count the levels of every attribute.

    blocks_of_rows (N,): the block of each row; chunk: rows of a chunk; in_place: sort the codes where they lie, so that
    the table must not be used any more.
    """
    classes, sizes, rows = len(table.schema.target), table.schema.sizes, len(table.target)
    groups = _groups(table, blocks_of_rows, blocks, chunk, store)
    codes = table.codes if in_place else store.empty(table.codes.shape, table.codes.dtype)
    counts = [np.zeros((blocks * classes, int(size)), np.int32) for size in sizes]
    slots, lengths = np.arange(blocks * classes), []
    with ThreadPoolExecutor(jobs) as pool:
        for part in _chunks(rows, chunk):
            order = np.argsort(groups[part], kind="stable")
            lengths.append(np.bincount(groups[part], minlength=len(slots)))
            starts = part.start + np.concatenate([[0], np.cumsum(lengths[-1])])

            def sort(i: int, part: slice = part, order: np.ndarray = order, starts: np.ndarray = starts) -> None:
                codes[i, part] = np.take(table.codes[i, part], order, mode="clip")
                count_cells(codes, _NO_RECODE, True, np.array([i]), sizes[i : i + 1], starts, slots, counts[i])
                store.let_go(codes[i, part])

            list(pool.map(sort, range(len(sizes))))
    margins = tuple(one.astype(np.int64).reshape(blocks, classes, -1) for one in counts)
    starts = np.concatenate([[0], np.cumsum(np.concatenate(lengths))]).astype(np.int64)
    target = _sorted_target(starts, blocks, classes, store)
    fixed = (codes, target, groups, chunk, starts, blocks, classes, sizes, margins, jobs, progress, store)
    if table.weights is None:
        return LocalEngine(*fixed)
    return LocalEngine(*fixed, _weighed(table.weights, codes, groups, chunk, blocks * classes, blocks, sizes, store))


def _weighed(
    weights: np.ndarray,
    codes: np.ndarray,
    groups: np.ndarray,
    chunk: int,
    number: int,
    blocks: int,
    sizes: np.ndarray,
    store: Store,
) -> RowsWeighed:
    """Bring the weights (N,) of a table's rows into the order of the sorted codes, and sum them up.

    groups (N,): of each row in the table's own order, one of ``number``.
    """
    of_rows = store.empty(weights.shape, np.float64)
    total = np.zeros(number)
    sums = [np.zeros(number * int(size)) for size in sizes]
    for part in _chunks(len(weights), chunk):
        order = np.argsort(groups[part], kind="stable")
        of_rows[part] = weights[part][order]
        slots = groups[part][order].astype(np.int64)
        total += np.bincount(slots, of_rows[part], number)
        for i, size in enumerate(sizes.tolist()):
            sums[i] += np.bincount(slots * size + codes[i, part], of_rows[part], number * size)
    margins = tuple(one.reshape(blocks, number // blocks, -1) for one in sums)
    return RowsWeighed(of_rows, total.reshape(blocks, -1), margins)


def _groups(table: CodedTable, blocks_of_rows: np.ndarray, blocks: int, chunk: int, store: Store) -> np.ndarray:
    """Number the group of each row, (N,), in the narrowest type."""
    classes = len(table.schema.target)
    groups = store.empty((len(table.target),), np.min_scalar_type(blocks * classes))
    for part in _chunks(len(groups), chunk):
        groups[part] = blocks_of_rows[part].astype(np.int64) * classes + table.target[part]
    return groups


def _sorted_target(starts: np.ndarray, blocks: int, classes: int, store: Store) -> np.ndarray:
    """Write the class of every sorted row, uint8 (N,)."""
    target = store.empty((int(starts[-1]),), np.uint8)
    for s, (first, last) in enumerate(pairwise(starts.tolist())):
        target[first:last] = s % (blocks * classes) % classes
    return target
