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

_LEAST = 1.0  # nats that a move must save, all rows together
_CANDIDATES = 12  # the strongest candidates of a child
_PAIRS = 3  # pairs of candidates of a child that all rows judge

Parents = tuple[int, ...]


class Judge(Protocol):
    """What the search sees of the rows: losses in nats, summed over all rows, each held out once."""

    def loss(self) -> float:
        """Tell the loss of the structure so far."""

    def losses(self, child: int, choices: Sequence[Parents]) -> np.ndarray:
        """Tell the loss with each of K choices of one attribute's parents, (K,); infinite for one not to be made."""

    def take(self, child: int, parents: Parents) -> None:
        """Give an attribute other parents."""


@dataclass(frozen=True)
class Heldout:
    """Add, swap or drop parents as long as a move saves more than 1 nat of held-out class log loss, all rows together.

    Where no single move does, two parents of one attribute may enter at once, so that interactions are found of which
    neither part is worth anything alone.

    Source: Keogh & Pazzani 1999 (hill-climbing on what classification gains, from naive Bayes); Grossman & Domingos
    2004 (the log loss of the class in the place of errors); both from memory.
    """

    name: str = "heldout"
    depths: int = 3
    looks_at_pairs: bool = True
    tested: bool = False

    def climb(self, judge: Judge, rough: Judge, strength: np.ndarray, bounds: Bounds) -> Structure:
        """Search from no edges but the required ones.

        judge: all rows; rough: fewer, by which pairs of parents are sifted, or the same; strength (n, n): bits shared
        given the class, by which an attribute's 12 candidates are chosen.
        """
        bounds.check_room(self.depths, self.name)
        search = _Search(judge, rough, self.depths, strength, bounds)
        while search.moves():
            pass
        return Structure(self.name, tuple(search.parents))


class _Search:
    """A search under way: the parents so far, and the best move of every child when it was last looked at.

    A move changes what all others are worth, mostly by little: the child whose move seemed best is looked at again,
    until the best is one that was looked at since; before singles are given up, all are looked at again.
    """

    def __init__(self, judge: Judge, rough: Judge, depths: int, strength: np.ndarray, bounds: Bounds) -> None:
        """Begin with the required parents."""
        attributes = range(len(strength))
        self.judge, self.rough, self.depths, self.bounds = judge, rough, depths, bounds
        self.parents = [bounds.parents(child) for child in attributes]
        self.candidates = [_candidates(child, strength, bounds) for child in attributes]
        self.best: list[tuple[float, Parents]] = [
            (math.inf, ()) for _ in attributes
        ]  # nats saved, and by which parents
        self.fresh = [False for _ in attributes]

    def moves(self) -> bool:
        """Make the best move, if one saves enough."""
        child = self._single()
        if child is None:
            child = self._pair()
        if child is None:
            return False
        parents = self.best[child][1]
        self.judge.take(child, parents)
        if self.rough is not self.judge:
            self.rough.take(child, parents)
        self.parents[child] = parents
        self.best[child] = (math.inf, ())
        self.fresh = [False for _ in self.fresh]
        return True

    def _single(self) -> int | None:
        """Find the child with the best single move, first in column order among equals; None if none saves enough."""
        while True:
            child = max(range(len(self.best)), key=lambda one: (self.best[one][0], -one))
            if self.best[child][0] > _LEAST and self.fresh[child]:
                return child
            stale = [one for one, fresh in enumerate(self.fresh) if not fresh]
            if not stale:
                return None
            for one in [child] if self.best[child][0] > _LEAST else stale:
                self.best[one] = self._judged(self.judge, one, self._singles(one))[0]
                self.fresh[one] = True

    def _pair(self) -> int | None:
        """Find the child that gains most by two more parents at once; None if none gains enough."""
        found = None
        for child, own in enumerate(self.parents):
            able = self._able(child) if len(own) + 2 <= self.depths else []
            pairs = [(*own, *two) for two in combinations(able, 2)]
            promising = [pair for saved, pair in self._judged(self.rough, child, pairs)[:_PAIRS] if saved > 0]
            best = self._judged(self.judge, child, promising)[0]
            if best[0] > (_LEAST if found is None else self.best[found][0]):
                found, self.best[child] = child, best
        return found

    def _judged(self, judge: Judge, child: int, choices: Sequence[Parents]) -> list[tuple[float, Parents]]:
        """List what each choice of parents saves (nats), most first; at the end that staying as it is saves none."""
        stay = (0.0, self.parents[child])
        if not choices:
            return [stay]
        saved = judge.loss() - judge.losses(child, choices)
        order = np.argsort(-saved, kind="stable").tolist()
        return [*((float(saved[k]), choices[k]) for k in order), stay]

    def _able(self, child: int) -> list[int]:
        """List the candidates that are no parents of a child yet, and that it is no ancestor of."""
        below = self._descendants(child)
        return [one for one in self.candidates[child] if one not in self.parents[child] and one not in below]

    def _singles(self, child: int) -> list[Parents]:
        """List what one added, dropped or swapped parent makes of a child's parents."""
        own, able = self.parents[child], self._able(child)
        found = [(*own, one) for one in able] if len(own) < self.depths else []
        for gone in own:
            if gone not in self.bounds.parents(child):
                left = tuple(one for one in own if one != gone)
                found += [left, *((*left, one) for one in able)]
        return found

    def _descendants(self, start: int) -> set[int]:
        """Find every attribute that stands below one."""
        below, grown = {start}, True
        while grown:
            more = {child for child, parents in enumerate(self.parents) if child not in below and below & set(parents)}
            grown = bool(more)
            below |= more
        return below


def _candidates(child: int, strength: np.ndarray, bounds: Bounds) -> list[int]:
    """List the strongest that an attribute may take, strongest first, ties by column order."""
    barred = {child, *(b if a == child else a for a, b in bounds.forbidden if child in (a, b))}
    order = np.argsort(-strength[child], kind="stable").tolist()
    return [one for one in order if one not in barred][:_CANDIDATES]
