"""Counts of families for many training sets at once, from as few passes over the rows as possible."""

from collections import defaultdict
from collections.abc import Callable, Iterable, Sequence
from dataclasses import dataclass
from typing import TypeVar, overload

import numpy as np

from bnx.counts import sum_blocks
from bnx.engines import LocalEngine
from bnx.trainings import Training

__all__ = ["PairRequests", "Request", "for_each_family"]

Result = TypeVar("Result")
Request = tuple[int, tuple[int, ...]]  # (number of the training set, members with the child last)

_DENSE = 8  # a family is counted by block when its cells over all blocks and classes are at most this many per row


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

    A family of attributes that are used as stored, and that several training sets ask for, is counted once by block
    and added up; any other is counted in its own training rows. Nothing is kept but what ``use`` returns.
    """
    askers: dict[tuple[int, ...], list[int]] = defaultdict(list)
    for number, members in dict.fromkeys(requests):
        askers[members].append(number)

    def answer(item: tuple[tuple[int, ...], list[int]]) -> list[tuple[Request, Result]]:
        members, numbers = item
        return [
            ((number, members), use(counts, trainings[number].view.sizes_of(members)))
            for number, counts in _counts(engine, trainings, members, numbers)
        ]

    return {request: result for answers in engine.map(answer, askers.items(), stage) for request, result in answers}


def _counts(
    engine: LocalEngine, trainings: Sequence[Training], members: tuple[int, ...], numbers: list[int]
) -> Iterable[tuple[int, np.ndarray]]:
    """Yield (training set, its counts (C, cells)) of one family."""
    view = trainings[numbers[0]].view
    cells = int(np.prod(view.sizes_of(members))) * engine.blocks * engine.classes
    if len(numbers) > 1 and view.all_plain(members) and cells <= _DENSE * engine.rows:
        counted = engine.family_counts(members, view).counts
        total = counted.sum(axis=0, dtype=np.int32)
        for number in numbers:
            yield number, sum_blocks(counted, total, trainings[number].mask)
    else:
        for number in numbers:
            yield number, engine.training_counts(members, trainings[number].view, trainings[number].mask)
