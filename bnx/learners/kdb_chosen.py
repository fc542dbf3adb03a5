"""k-dependence structures whose K is chosen, and those that also leave attributes out."""

from collections.abc import Sequence
from dataclasses import dataclass
from typing import Protocol

import numpy as np

from bnx.dependence import Dependence
from bnx.gating import Bounds, Gate, Learning, settled
from bnx.learners.kdb import relevance_order, strongest_before
from bnx.structure import Structure

__all__ = ["KdbChosen", "KdbOf", "KdbTrimmed", "LeaveOneOut"]

_MOST = 5  # parents
_CANDIDATES = 32  # the strongest of those before an attribute, from which its parents are taken
_EQUAL = 1e-6  # nats, all rows together, within which two models are equally good


class LeaveOneOut(Protocol):
    """What trimming sees of the rows."""

    def losses(self, order: Sequence[int], least: Sequence[int], models: int) -> np.ndarray:
        """Sum the class log losses (nats) of all rows, each judged by counts without it: (models, n + 1).

        Model k keeps the first k parents of every attribute, but at least ``least`` (n,) of them. Column s is of the
        first s attributes of ``order``.
        """


@dataclass(frozen=True)
class KdbOf:
    """A k-dependence structure of a K to choose from; 0 is naive but for required edges.

    Source: Sahami 1996.
    """

    depths: int
    name: str = "kdb"
    looks_at_pairs: bool = True
    tested: bool = False

    def learn(self, dependence: Dependence, gate: Gate, bounds: Bounds) -> Learning:
        """Return up to K parents for every attribute, those that there is room for."""
        return settled(Structure(self.name, _parents(dependence, bounds, self.depths), self.depths))


@dataclass(frozen=True)
class KdbChosen:
    """Let the rows of a training set choose K, out of fold: one of ``members`` is taken."""

    name: str = "kdb"
    depths: int = _MOST
    looks_at_pairs: bool = True
    tested: bool = False

    def members(self, bounds: Bounds) -> tuple[KdbOf, ...]:
        """List the structures to choose from, fewer parents first."""
        bounds.check_room(self.depths, self.name)
        return tuple(KdbOf(k, self.name) for k in range(self.depths + 1))

    def of(self, depth: int | None) -> KdbOf:
        """Learn with the K that was chosen."""
        return KdbOf(self.depths if depth is None else depth, self.name)


@dataclass(frozen=True)
class KdbTrimmed:
    """Let rows left out choose K and how many attributes, in the order of bits shared with the class, take part.

    Source: Martinez, Webb, Chen & Zaidi 2016 (selective k-dependence; they judge by squared or zero-one loss, here it
    is the log loss of the class).
    """

    name: str = "kdb-trimmed"
    depths: int = _MOST
    looks_at_pairs: bool = True
    tested: bool = False

    def widest(self, dependence: Dependence, bounds: Bounds) -> tuple[Structure, list[int]]:
        """Give every attribute all its parents, and say in which order the attributes stand."""
        bounds.check_room(self.depths, self.name)
        order = relevance_order(dependence.relevance, bounds)
        return Structure(self.name, _parents(dependence, bounds, self.depths), self.depths), order

    def trim(self, judge: LeaveOneOut, widest: Structure, order: Sequence[int], bounds: Bounds) -> Structure:
        """Keep the K and the first attributes of least loss; of equally good ones fewer parents, then attributes.

        At least the first attribute stays. Attributes of required edges stay, and so do the edges.
        """
        least = [len(bounds.parents(child)) for child in range(len(order))]
        losses = judge.losses(order, least, self.depths + 1)
        bound = {end for edge in bounds.required for end in edge}
        fewest = max((place + 1 for place, attribute in enumerate(order) if attribute in bound), default=1)
        able = losses[:, fewest:]
        k, more = np.argwhere(able <= able.min() + _EQUAL)[0].tolist()
        dropped = set(order[fewest + more :])
        parents = tuple(
            () if child in dropped else own[: max(k, few)]
            for child, (own, few) in enumerate(zip(widest.parents, least, strict=True))
        )
        return Structure(self.name, parents, k, tuple(sorted(dropped)))


def _parents(dependence: Dependence, bounds: Bounds, most: int) -> tuple[tuple[int, ...], ...]:
    """Give every attribute its required parents, then the strongest before it, those that there is room for."""
    parents = [bounds.parents(child) for child in range(len(dependence.relevance))]
    room = dependence.room
    for child, earlier in strongest_before(dependence, bounds, _CANDIDATES).items():
        others = [one for one in earlier if one not in parents[child]]
        if room is None:
            parents[child] = (*parents[child], *others)[: max(most, len(parents[child]))]
        else:
            parents[child] = room.first(child, parents[child], others, most)
    return tuple(parents)
