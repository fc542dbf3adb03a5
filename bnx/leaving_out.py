"""Class log loss by leave-one-out in one pass: every number of parents, with every number of attributes."""

from collections.abc import Callable, Sequence
from dataclasses import dataclass, replace
from typing import TypeVar

import numpy as np

from bnx.engines import LocalEngine
from bnx.heldout import InnerRows, inner_rows
from bnx.kernels.leaving_out import add_left_out
from bnx.scoring import Counted, families_of
from bnx.structure import Structure
from bnx.tabulating import tabulate
from bnx.trainings import Training

__all__ = ["MOST_JUDGED", "LeftOut", "leave_out"]

Result = TypeVar("Result")

MOST_JUDGED = 50_000
STRENGTH, DEEPER = 2.0, 32.0  # records that the next wider table stands for, given the class and given parents

_CELLS = 64_000_000  # counts of training sets that are held together


@dataclass(frozen=True)
class LeftOut:
    """What a training set says of a structure when its rows are left out one at a time.

    ``rows``: those judged; ``counted``: the structure's families in all rows of the training set; ``class_counts``
    (C,): of these.
    """

    rows: InnerRows
    counted: Counted
    class_counts: np.ndarray

    def losses(self, order: Sequence[int], least: Sequence[int], models: int) -> np.ndarray:
        """Sum the class log losses (nats) of all rows, each judged by counts without it: (models, n + 1).

        As calibration will do, the evidence is tempered: every model is judged at the best of three temperatures.

        Model k keeps the first k parents of every attribute, but at least ``least`` (n,) of them. Column s is of the
        first s attributes of ``order``.
        """
        rows, floor = self.rows, self.class_counts / self.class_counts.sum() ** 2
        judged = np.diff(rows.starts).reshape(-1, len(floor)).sum(axis=0)
        weights = self.class_counts / np.maximum(judged, 1)
        terms = np.zeros((models, len(floor), rows.codes.shape[1]))
        out = np.empty((1 + len(order), 3, models))
        nothing = np.zeros(0, np.int64)
        families = [(nothing, nothing, nothing), *map(self._family, order)]
        counts = [np.zeros((len(floor), 0), np.int32), *map(self._counts, order)]
        few = [0, *(least[one] for one in order)]
        given = (weights, floor, terms)
        for k, family in enumerate(families):
            counted = (counts[k], self.class_counts)
            add_left_out(rows.codes, rows.starts, *family, few[k], *counted, STRENGTH, DEEPER, *given, out[k])
        return np.ascontiguousarray(out.min(axis=1).T)

    def _family(self, child: int) -> tuple[np.ndarray, np.ndarray, np.ndarray]:
        """Give the members of an attribute's family, the attribute last, their codes, and how many are of levels."""
        one = self.counted.families
        f = one.of[0, child]
        members, sizes = one.members[f, : one.depths[f]], one.sizes[f, : one.depths[f]]
        return members, sizes, sizes - np.isin(members, one.veiled)

    def _counts(self, child: int) -> np.ndarray:
        """Count an attribute's family, cells not observed included, (C, cells)."""
        one = self.counted.families
        f = one.of[0, child]
        return np.ascontiguousarray(self.counted.counts[:, one.starts[f] : one.starts[f + 1]])


def leave_out(
    engine: LocalEngine,
    trainings: Sequence[Training],
    structures: Sequence[Structure],
    use: Callable[[int, LeftOut], Result],
) -> list[Result]:
    """Call ``use(k, ...)`` for each training set k, whose structure is counted in all its rows.

    At most 50,000 rows of it are judged, spread evenly by block and class, and stand for all. As many training sets are
    counted at a time as a fixed amount of memory takes. Every row counts once, whatever it weighs.
    """
    families = [families_of([one], training.view) for one, training in zip(structures, trainings, strict=True)]
    cells = [int(own.starts[-1]) * engine.classes for own in families]
    found: list[Result] = []
    once = replace(engine, weighed=None)
    while len(found) < len(families):
        first = len(found)
        part = slice(first, first + max(1, int(np.searchsorted(np.cumsum(cells[first:]), _CELLS))))
        counted = tabulate(once, trainings[part], families[part])

        def one(k: int, first: int = first, counted: Sequence[Counted] = counted) -> Result:
            training = trainings[first + k]
            rows = inner_rows(engine, training, MOST_JUDGED)
            return use(first + k, LeftOut(rows, counted[k], training.class_counts))

        found += engine.map(one, range(len(counted)), "leaving rows out")
    return found
