"""Count on this machine: bit planes for pairs, one blocked pass for a family, threads over both."""

from collections.abc import Callable, Iterable, Sequence
from concurrent.futures import ThreadPoolExecutor
from dataclasses import dataclass, replace
from itertools import pairwise
from typing import TypeVar

import numpy as np

from bnx.counts import FamilyCounts, PairCounts, PairLayout
from bnx.kernels import complete_pairs, count_cells, count_pairs
from bnx.tables import CodedTable
from bnx.views import View

__all__ = ["LocalEngine", "start_local"]

Progress = Callable[[str, int, int], None]  # stage, done, of how many
Item = TypeVar("Item")
Result = TypeVar("Result")

_RUN = 32  # items that a thread takes at a time, at most


@dataclass(frozen=True)
class LocalEngine:
    """Rows sorted by (block, class) in memory, and the counting of them.

    ``codes`` (n, N) as stored; ``target`` (N,); ``order`` (N,): row of the table behind each sorted row;
    ``starts`` (blocks * C + 1,): first sorted row of each group; ``margins``: per attribute, counts (blocks, C, stored
    levels) int64.
    """

    codes: np.ndarray
    target: np.ndarray
    order: np.ndarray
    starts: np.ndarray
    blocks: int
    classes: int
    sizes: np.ndarray
    margins: tuple[np.ndarray, ...]
    jobs: int
    progress: Progress

    @property
    def class_counts(self) -> np.ndarray:
        """Rows of each block and class, int64 (blocks, C)."""
        return np.asarray(np.diff(self.starts).reshape(-1, self.blocks, self.classes).sum(axis=0))

    @property
    def rows(self) -> int:
        """Number of rows."""
        return int(self.starts[-1])

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
        codes = self.codes.copy()
        for i in np.flatnonzero(~view.plain):
            np.take(view.recode[i].astype(codes.dtype), self.codes[i], out=codes[i])
        margins = tuple(view.merge(i, margin) for i, margin in enumerate(self.margins))
        return replace(self, codes=codes, sizes=view.sizes, margins=margins)

    def pair_counts(self, layout: PairLayout) -> PairCounts:
        """Count pairs of attributes, as stored, by block and class."""
        starts, whole = self._parts()
        found = np.zeros((len(starts) - 1, layout.offsets[-1]), np.int32)
        pairs = (layout.left, layout.right, layout.offsets)
        self.map(
            lambda part: count_pairs(self.codes, starts, self.sizes, *pairs, *part, found),
            _shares(len(starts) - 1, 4 * self.jobs),
        )
        out = found if len(whole) == len(starts) - 1 else np.add.reduceat(found, whole, axis=0, dtype=np.int32)
        flat = [margin.reshape(len(whole), -1) for margin in self.margins]
        margins = np.ascontiguousarray(np.concatenate(flat, axis=1))
        margin_starts = np.concatenate([[0], np.cumsum(self.sizes)]).astype(np.int64)
        self.map(
            lambda part: complete_pairs(margins, margin_starts, self.sizes, *pairs, *part, out),
            _shares(len(whole), self.jobs),
        )
        return PairCounts(layout, out.reshape(self.blocks, self.classes, -1))

    def _parts(self) -> tuple[np.ndarray, np.ndarray]:
        """Cut large groups so that all threads have work: the starts of the parts, and each group's first part."""
        most = max(1, len(self.order) // (8 * self.jobs)) if self.jobs > 1 else max(1, len(self.order))
        cuts = [np.arange(low, max(high, low + 1), most) for low, high in pairwise(self.starts.tolist())]
        whole = np.concatenate([[0], np.cumsum([len(cut) for cut in cuts])[:-1]]).astype(np.int64)
        return np.concatenate([*cuts, self.starts[-1:]]).astype(np.int64), whole

    def family_counts(self, members: Sequence[int], view: View) -> FamilyCounts:
        """Count a family of attributes that ``view`` leaves as stored, by block and class."""
        slots = np.arange(self.blocks * self.classes, dtype=np.int64)
        counts = self._count(members, view, slots)
        return FamilyCounts(tuple(members), view.sizes_of(members), counts.reshape(self.blocks, self.classes, -1))

    def training_counts(self, members: Sequence[int], view: View, mask: np.ndarray) -> np.ndarray:
        """Count a family over the blocks of ``mask`` (blocks,) bool, by class: (C, cells) int32."""
        by_class = np.arange(self.classes, dtype=np.int64)
        slots = np.where(mask[:, None], by_class, -1).ravel()
        return self._count(members, view, slots)

    def _count(self, members: Sequence[int], view: View, slots: np.ndarray) -> np.ndarray:
        sizes = np.array(view.sizes_of(members), dtype=np.int64)
        out = np.zeros((int(slots.max()) + 1, int(sizes.prod())), np.int32)
        plain = view.all_plain(members)
        count_cells(self.codes, view.recode, plain, np.array(members), sizes, self.starts, slots, out)
        return out


def _shares(number: int, parts: int) -> list[tuple[int, int]]:
    """Cut a run of numbers into even shares, as (first, last) each."""
    bounds = np.linspace(0, number, min(parts, max(number, 1)) + 1).astype(int).tolist()
    return list(pairwise(bounds))


def start_local(
    table: CodedTable, blocks_of_rows: np.ndarray, blocks: int, jobs: int, progress: Progress
) -> LocalEngine:
    """Sort a coded table by (block, class, position) and count the levels of every attribute.

    blocks_of_rows (N,): the block of each row.
    """
    classes = len(table.schema.target)
    group = blocks_of_rows.astype(np.int64) * classes + table.target
    order = np.argsort(group, kind="stable")
    starts = np.searchsorted(group[order], np.arange(blocks * classes + 1)).astype(np.int64)
    sizes = table.schema.sizes
    codes = np.empty_like(table.codes)
    margins: list[np.ndarray] = [np.empty(0)] * len(sizes)
    group = group[order]

    def sort(i: int) -> None:
        np.take(table.codes[i], order, out=codes[i])
        size = int(sizes[i])
        cells = np.bincount(group * size + codes[i], minlength=blocks * classes * size)
        margins[i] = cells.reshape(blocks, classes, size)

    with ThreadPoolExecutor(jobs) as pool:
        list(pool.map(sort, range(len(sizes))))
    return LocalEngine(
        codes, table.target[order], order, starts, blocks, classes, sizes, tuple(margins), jobs, progress
    )
