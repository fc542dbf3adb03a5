"""Parents chosen by what the job is about: the held-out log loss of the class."""

import math
from collections.abc import Sequence
from dataclasses import dataclass
from itertools import combinations
from typing import Protocol

import numpy as np

from bnx.gating import Bounds
from bnx.structure import Structure

__all__ = ["Heldout", "Judge"]

_LEAST = 1.0  # nats that a move must save on all rows together
_ALL_CANDIDATES = 12  # candidates of a child; on wider tables the strongest ones

Parents = tuple[int, ...]


class Judge(Protocol):
    """What the search sees of the rows: losses in nats, summed over all held-out rows."""

    def loss(self) -> float:
        """Tell the loss of the structure so far."""

    def losses(self, child: int, families: Sequence[Parents]) -> np.ndarray:
        """Tell the loss with other parents of one attribute, for each of some parents: (K,), infinite for too many."""

    def take(self, child: int, parents: Parents) -> None:
        """Give an attribute other parents."""


@dataclass(frozen=True)
class Heldout:
    """Add, swap or drop parents as long as that saves more than 1 nat of held-out class log loss."""

    name: str = "heldout"
    depths: int = 3
    looks_at_pairs: bool = True
    tested: bool = False

    def climb(self, judge: Judge, strength: np.ndarray, bounds: Bounds) -> Structure:
        """Search from no edges but the required ones; strength (n, n): bits shared given the class."""
        bounds.check_room(self.depths, self.name)
        search = _Search(judge, bounds, self.depths, strength)
        while search.step():
            pass
        return Structure(self.name, tuple(search.parents))


class _Search:
    """A search under way."""

    def __init__(self, judge: Judge, bounds: Bounds, depths: int, strength: np.ndarray) -> None:
        n = len(strength)
        self.judge, self.bounds, self.depths = judge, bounds, depths
        self.parents = [bounds.parents(child) for child in range(n)]
        self.candidates = [_candidates(child, strength, bounds) for child in range(n)]
        self.known = [math.inf] * n  # gain of each child's best move, when last looked at
        self.moves: list[Parents] = list(self.parents)
        self.fresh = [False] * n
        self.log: list[object] = []

    def step(self) -> bool:
        """Take the best move, if one is worth it."""
        move = self._single() or self._pair()
        if move is None:
            return False
        child, parents, gain = move
        self.log.append((child, parents, gain, self.judge.loss()))
        self.judge.take(child, parents)
        self.parents[child] = parents
        self.fresh = [False] * len(self.fresh)
        self.known[child] = math.inf
        return True

    def _look(self, child: int) -> None:
        families = self._singles(child)
        self.fresh[child] = True
        self.known[child], self.moves[child] = self._best(child, families)

    def _best(self, child: int, families: Sequence[Parents]) -> tuple[float, Parents]:
        if not families:
            return 0.0, self.parents[child]
        losses = self.judge.losses(child, families)
        best = int(np.argmin(losses))
        return self.judge.loss() - float(losses[best]), families[best]

    def _single(self) -> tuple[int, Parents, float] | None:
        n = len(self.known)
        while True:
            child = max(range(n), key=lambda i: (self.known[i], -i))
            if self.known[child] <= _LEAST:
                stale = [i for i in range(n) if not self.fresh[i]]
                if not stale:
                    return None
                for i in stale:
                    self._look(i)
            elif self.fresh[child]:
                return child, self.moves[child], self.known[child]
            else:
                self._look(child)

    def _pair(self) -> tuple[int, Parents, float] | None:
        best: tuple[int, Parents, float] | None = None
        for child in range(len(self.parents)):
            own = self.parents[child]
            if len(own) + 2 > self.depths:
                continue
            able = [p for p in self.candidates[child] if p not in own and not self._leads(child, p)]
            families = [(*own, a, b) for a, b in combinations(able, 2)]
            gain, parents = self._best(child, families)
            if gain > _LEAST and (best is None or gain > best[2]):
                best = child, parents, gain
        return best

    def _singles(self, child: int) -> list[Parents]:
        own = self.parents[child]
        required = self.bounds.parents(child)
        able = [p for p in self.candidates[child] if p not in own and not self._leads(child, p)]
        found = []
        if len(own) < self.depths:
            found += [(*own, p) for p in able]
        for gone in own:
            if gone not in required:
                left = tuple(p for p in own if p != gone)
                found.append(left)
                found += [(*left, p) for p in able]
        return found

    def _leads(self, start: int, end: int) -> bool:
        """Tell whether one attribute is an ancestor of another."""
        seen, waiting = set(), [end]
        while waiting:
            for parent in self.parents[waiting.pop()]:
                if parent == start:
                    return True
                if parent not in seen:
                    seen.add(parent)
                    waiting.append(parent)
        return False


def _candidates(child: int, strength: np.ndarray, bounds: Bounds) -> list[int]:
    """List what an attribute may take, strongest first, ties by column order."""
    order = np.argsort(-strength[child], kind="stable").tolist()
    return [p for p in order if p != child and not bounds.forbids(p, child)][:_ALL_CANDIDATES]
