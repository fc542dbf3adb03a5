"""k-dependence structures: every attribute takes up to K of the attributes that tell more about the class."""

import heapq
from dataclasses import dataclass

import numpy as np

from bnx.dependence import Dependence
from bnx.gating import Bounds, Gate, Learning, Question, fixed_family_steps, settled
from bnx.kernels.graphs import strongest_few
from bnx.structure import Structure

__all__ = ["Kdb", "KdbTested", "relevance_order", "strongest_before"]

_CANDIDATES = 8


@dataclass(frozen=True)
class Kdb:
    """Let each attribute take, of those before it in the order of bits shared with the class, the K strongest.

    Source: Sahami 1996.
    """

    depths: int
    looks_at_pairs: bool = True
    tested: bool = False

    @property
    def name(self) -> str:
        """Name the structure."""
        return f"kdb{self.depths}"

    def learn(self, dependence: Dependence, gate: Gate, bounds: Bounds) -> Learning:
        """Return K parents for every attribute that has so many before it."""
        bounds.check_room(self.depths, self.name)
        parents = [bounds.parents(child) for child in range(len(dependence.relevance))]
        for child, earlier in strongest_before(dependence, bounds, 2 * self.depths).items():
            others = [a for a in earlier if a not in parents[child]]
            parents[child] = (*parents[child], *others)[: self.depths]
        return settled(Structure(self.name, tuple(parents)))


@dataclass(frozen=True)
class KdbTested:
    """Let an attribute take a parent only if it depends on it given the class and the parents already taken.

    The tests are chosen by the data, so their family is fixed in advance: the level is split equally over the K
    depths, and at each depth Holm's steps run in the family of all n (n - 1) / 2 pairs.

    Source: Sahami 1996 (the order); Holm 1979.
    """

    depths: int
    looks_at_pairs: bool = True
    tested: bool = True

    @property
    def name(self) -> str:
        """Name the structure."""
        return f"kdb{self.depths}-tested"

    def learn(self, dependence: Dependence, gate: Gate, bounds: Bounds) -> Learning:
        """Return up to K parents for every attribute, asking for tests depth by depth."""
        bounds.check_room(self.depths, self.name)
        attributes = len(dependence.relevance)
        family = attributes * (attributes - 1) // 2
        parents = [bounds.parents(child) for child in range(attributes)]
        open_ = strongest_before(dependence, bounds, _CANDIDATES)
        for _ in range(self.depths):
            questions = [
                Question(child, candidate, parents[child])
                for child, candidates in open_.items()
                if len(parents[child]) < self.depths
                for candidate in candidates
                if candidate not in parents[child]
            ]
            answers = (yield questions) if questions else []
            passed = fixed_family_steps(np.array([a.p for a in answers]), gate.alpha / self.depths, family)
            taken: dict[int, tuple[float, int]] = {}
            for question, answer, enters in zip(questions, answers, passed, strict=True):
                if enters and (question.child not in taken or answer.bits > taken[question.child][0]):
                    taken[question.child] = (answer.bits, question.candidate)
            for child, (_, candidate) in taken.items():
                parents[child] = (*parents[child], candidate)
            open_ = {child: candidates for child, candidates in open_.items() if child in taken}
        return Structure(self.name, tuple(parents))


def relevance_order(relevance: np.ndarray, bounds: Bounds) -> list[int]:
    """Order attributes by bits shared with the class, most first, but required parents before their children."""
    rank = {int(attribute): place for place, attribute in enumerate(np.argsort(-relevance, kind="stable"))}
    missing = {child: len(bounds.parents(child)) for child in rank}
    ready = [(place, attribute) for attribute, place in rank.items() if not missing[attribute]]
    heapq.heapify(ready)
    order = []
    while ready:
        _, attribute = heapq.heappop(ready)
        order.append(attribute)
        for parent, child in bounds.required:
            if parent == attribute:
                missing[child] -= 1
                if not missing[child]:
                    heapq.heappush(ready, (rank[child], child))
    return order


def strongest_before(dependence: Dependence, bounds: Bounds, most: int) -> dict[int, list[int]]:
    """List, for every attribute in order, the ``most`` strongest before it that it may take, by bits given the class.

    Most bits come first, ties by column order.
    """
    order = relevance_order(dependence.relevance, bounds)
    barred = np.zeros(dependence.strength.shape, np.bool_)
    for a, b in bounds.forbidden:
        barred[a, b] = barred[b, a] = True
    strongest = strongest_few(dependence.strength, np.argsort(order), barred, most).tolist()
    return {child: [other for other in strongest[child] if other >= 0] for child in order}
