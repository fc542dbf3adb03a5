"""Counts of families for many training sets at once, from as few passes over the rows as possible."""

from collections import defaultdict
from collections.abc import Callable, Iterable, Iterator, Sequence
from dataclasses import dataclass
from typing import TypeVar, overload

import numpy as np

from bnx.engines import LocalEngine
from bnx.kernels import count_cells
from bnx.kernels.contingency import COLUMNS, one_table
from bnx.kernels.merging import merge_cells
from bnx.kernels.reducing import blocks_of_masks, reduce_family, sum_all, sum_set
from bnx.trainings import Training
from bnx.views import refine

__all__ = ["PairRequests", "Request", "family_statistics", "for_each_family"]

Result = TypeVar("Result")
Members = tuple[int, ...]  # attributes, the child last
Request = tuple[int, Members]  # (number of the training set, members)

_DENSE = 8  # a family is counted by block when its cells over all blocks and classes are at most this many per row
_SMALL = 100_000  # ... or at most this many


@dataclass(frozen=True)
class PairRequests(Sequence[Request]):
    """Requests of all pairs of ``left``, ``right`` (P,) in one training set, made when they are looked at."""

    training: int
    left: np.ndarray
    right: np.ndarray

    def __len__(self) -> int:
        """Count the pairs."""
        return len(self.left)

    @overload
    def __getitem__(self, place: int) -> Request: ...

    @overload
    def __getitem__(self, place: slice) -> "PairRequests": ...

    def __getitem__(self, place: int | slice) -> "Request | PairRequests":
        """Name one pair as (number of the training set, members), or keep some."""
        if isinstance(place, slice):
            return PairRequests(self.training, self.left[place], self.right[place])
        return self.training, (int(self.left[place]), int(self.right[place]))


def for_each_family(
    engine: LocalEngine,
    trainings: Sequence[Training],
    requests: Iterable[Request],
    use: Callable[[np.ndarray, tuple[int, ...]], Result],
    stage: str = "",
) -> dict[Request, Result]:
    """Call ``use(counts (C, cells) int32, sizes)`` once for every different request.

    A family that several training sets ask for is counted once by block, in the levels that all sets can be made of,
    and added up, unless its cells are very many. Nothing is kept but what ``use`` returns.
    """
    reader = _Reader(engine, trainings)

    def answer(item: tuple[Members, list[int]]) -> list[tuple[Request, Result]]:
        members, numbers = item
        return [
            ((number, members), use(counts, trainings[number].view.sizes_of(members)))
            for number, counts in reader.counts(members, numbers)
        ]

    found = engine.map(answer, _askers(requests).items(), stage)
    return {request: result for answers in found for request, result in answers}


def family_statistics(
    engine: LocalEngine, trainings: Sequence[Training], requests: Iterable[Request], stage: str = ""
) -> dict[Request, np.ndarray]:
    """Compute the statistics (COLUMNS,) of the last two members given the class and the members before them."""
    reader = _Reader(engine, trainings)

    def answer(item: tuple[Members, list[int]]) -> list[tuple[Request, np.ndarray]]:
        members, numbers = item
        return [
            ((number, members), row) for number, row in zip(numbers, reader.statistics(members, numbers), strict=True)
        ]

    found = engine.map(answer, _askers(requests).items(), stage)
    return {request: row for answers in found for request, row in answers}


def _askers(requests: Iterable[Request]) -> dict[Members, list[int]]:
    """List the training sets that ask for each family."""
    askers: dict[Members, list[int]] = defaultdict(list)
    for number, members in dict.fromkeys(requests):
        askers[members].append(number)
    return askers


class _Reader:
    """Counts families of an engine's rows for its training sets."""

    def __init__(self, engine: LocalEngine, trainings: Sequence[Training]) -> None:
        self._engine = engine
        self._trainings = trainings
        self._fine = refine([training.view for training in trainings], engine.sizes)
        self._blocks = blocks_of_masks(np.array([training.mask for training in trainings]))

    def counts(self, members: Members, numbers: Sequence[int]) -> Iterator[tuple[int, np.ndarray]]:
        """Yield (training set, its counts (C, cells)) of one family."""
        if not self._by_block_pays(members, numbers):
            for number in numbers:
                yield number, self._anew(members, number)
            return
        counted, total = self._by_block(members)
        own = np.array(members)
        sizes, starts = self._fine.sizes[own], self._fine.starts[own]
        for number in numbers:
            whole = np.empty((self._engine.classes, counted.shape[1]), np.int32)
            sum_set(counted, self._engine.classes, *self._blocks.of(number), total, whole)
            if self._fine.plain[own].all():
                yield number, whole
            else:
                seen = self._fine.view_sizes[number, own]
                merged = np.zeros((self._engine.classes, int(seen.prod())), np.int32)
                merge_cells(whole, sizes, starts, self._fine.levels[number], seen, merged)
                yield number, merged

    def statistics(self, members: Members, numbers: Sequence[int]) -> np.ndarray:
        """Compute the statistics (numbers, COLUMNS) of the last two members given class and those before."""
        out = np.zeros((len(numbers), COLUMNS))
        if not self._by_block_pays(members, numbers):
            for row, number in zip(out, numbers, strict=True):
                sizes = self._trainings[number].view.sizes_of(members)
                row[:] = one_table(self._anew(members, number).reshape(-1, sizes[-2] * sizes[-1]), *sizes[-2:])
            return out
        counted, total = self._by_block(members)
        own, chosen = np.array(members), np.array(numbers)
        reduce_family(
            counted,
            total,
            self._blocks.take(chosen),
            self._fine.sizes[own],
            self._fine.starts[own],
            self._fine.levels[chosen],
            self._fine.view_sizes[chosen][:, own],
            bool(self._fine.plain[own].all()),
            out,
        )
        return out

    def _by_block_pays(self, members: Members, numbers: Sequence[int]) -> bool:
        """Tell whether a family is counted by block and added up, rather than in every training set anew."""
        cells = int(self._fine.sizes[list(members)].prod()) * self._engine.blocks * self._engine.classes
        return len(numbers) > 1 and cells <= max(_SMALL, _DENSE * int(self._engine.starts[-1]))

    def _anew(self, members: Members, number: int) -> np.ndarray:
        training = self._trainings[number]
        return self._engine.training_counts(members, training.view, training.mask)

    def _by_block(self, members: Members) -> tuple[np.ndarray, np.ndarray]:
        """Count one family in fine levels by block and class, (blocks * C, cells), and in all blocks, (C, cells)."""
        engine, fine, own = self._engine, self._fine, np.array(members)
        counted = np.zeros((engine.blocks * engine.classes, int(fine.sizes[own].prod())), np.int32)
        slots = np.arange(len(counted))
        plain = bool(fine.plain[own].all())
        count_cells(engine.codes, fine.recode, plain, own, fine.sizes[own], engine.starts, slots, counted)
        total = np.empty((engine.classes, counted.shape[1]), np.int32)
        sum_all(counted, engine.classes, total)
        return counted, total
