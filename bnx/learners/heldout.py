"""Parents chosen by what the job is about: the held-out log loss of the class."""

import math
from collections.abc import Sequence
from dataclasses import dataclass
from itertools import combinations, groupby
from operator import itemgetter
from typing import Protocol

import numpy as np

from bnx.gating import Bounds
from bnx.structure import Structure

__all__ = ["Heldout", "Judge"]

_LEAST = 1.0  # nats that a move must save, all rows together
_ERRORS = 3.0  # standard errors by which all moves together must save
_CANDIDATES = 12  # the strongest candidates of a child
_PAIRS = 3  # pairs of candidates of a child that all rows judge
_SWAPS = 3  # candidates of a child that are tried in the place of a parent
_CARRIED = 0.5  # of what moves saved since a move was judged, by how much its own saving may have risen
_AGAIN = 4  # moves of a child that are looked at again after a move elsewhere

Parents = tuple[int, ...]
Move = tuple[float, Parents]  # what it is worth beyond what it must save (nats), and a child's new parents

_UNSEEN: Move = (math.inf, ())
_NONE: Move = (-math.inf, ())


class Judge(Protocol):
    """What the search sees of the rows: savings in nats, summed over all rows, each held out once."""

    def savings(self, child: int, choices: Sequence[Parents], least: float) -> np.ndarray:
        """Tell what each of K choices of one attribute's parents saves, (K,).

        Rough where it is clearly below ``least``; minus infinity for one not to be made.
        """

    def take(self, child: int, parents: Parents) -> None:
        """Give an attribute other parents."""

    def path(self) -> tuple[float, float]:
        """Tell what all moves so far have saved together, and its standard error."""

    def misfits(self, families: Sequence[Parents]) -> np.ndarray:
        """Tell how far the classes in the cells of K families are from their chances so far, in standard deviations."""


@dataclass(frozen=True)
class Heldout:
    """Add, swap or drop parents as long as a move saves more than 1 nat of held-out class log loss, all rows together.

    Where no single move does, two parents of one attribute may enter at once, so that interactions are found of which
    neither part is worth anything alone. Of the structures on the way the one is kept whose saving less three standard
    errors is largest: on a small table many moves are on offer that save by chance.

    Source: Keogh & Pazzani 1999 (hill-climbing on what classification gains, from naive Bayes); Grossman & Domingos
    2004 (the log loss of the class in the place of errors); both from memory.
    """

    name: str = "heldout"
    depths: int = 3
    looks_at_pairs: bool = True
    tested: bool = False

    def climb(self, judge: Judge, strength: np.ndarray, bounds: Bounds) -> Structure:
        """Search from no edges but the required ones.

        strength (n, n): bits shared given the class, by which an attribute's 12 candidates are chosen.
        """
        bounds.check_room(self.depths, self.name)
        search = _Search(judge, self.depths, strength, bounds)
        best, found = 0.0, tuple(search.parents)
        while search.moves():
            saved, error = judge.path()
            if saved - _ERRORS * error >= best:
                best, found = saved - _ERRORS * error, tuple(search.parents)
        return Structure(self.name, found)


class _Search:
    """A search under way: the parents so far, and what every child's moves were worth when last looked at.

    A move changes what all others are worth, mostly by little: the few best moves of the child whose move seemed best
    are looked at again, until the best is one that was looked at since; before singles are given up, all are.
    """

    def __init__(self, judge: Judge, depths: int, strength: np.ndarray, bounds: Bounds) -> None:
        """Begin with the required parents."""
        attributes = range(len(strength))
        self.judge, self.depths, self.bounds = judge, depths, bounds
        self.parents = [bounds.parents(child) for child in attributes]
        self.candidates = [_candidates(child, strength, bounds) for child in attributes]
        self.known: list[list[Move]] = [[_UNSEEN] for _ in attributes]  # moves of each child, best first
        self.fresh = [False for _ in attributes]  # the best one was looked at since the last move
        self.saved = 0.0  # nats, by all moves so far
        self._below: dict[int, set[int]] = {}
        self.looked = [-math.inf for _ in attributes]  # what was saved when all moves of each child were last seen

    def moves(self) -> bool:
        """Make the best move, if one is worth it."""
        child = self._single()
        if child is None:
            child = self._pair()
        if child is None:
            return False
        parents = self.known[child][0][1]
        self.saved += self.known[child][0][0] + _LEAST
        self.judge.take(child, parents)
        self.parents[child] = parents
        self.known[child], self.looked[child] = [_UNSEEN], -math.inf
        self.fresh = [False for _ in self.fresh]
        self._below = {}
        return True

    def _single(self) -> int | None:
        """Find the child with the best single move, first in column order among equals; None if none is worth it."""
        while True:
            child = max(range(len(self.known)), key=lambda one: (self.known[one][0][0], -one))
            worth = self.known[child][0][0]
            if worth > 0 and self.fresh[child]:
                return child
            if worth > 0:
                look = self._look if self.known[child][0] is _UNSEEN else self._look_again
                look(child)
                continue
            stale = [one for one, saved in enumerate(self.looked) if saved < self.saved]
            if not stale:
                return None
            for one in stale:
                self._look(one)

    def _look(self, child: int) -> None:
        """Look at all single moves of a child that may be worth it by now.

        Those that were not are left out if half of what was saved since would not make up for it: a move seldom raises
        what another saves by as much as it saves itself.
        """
        since = self.saved - self.looked[child]
        before = {parents: worth for worth, parents in self.known[child] if math.isfinite(worth)}
        found: list[Move] = []
        for kind in (self._added_or_dropped, self._swapped):
            choices = kind(child, found)
            again = [one for one in choices if before.get(one, math.inf) + _CARRIED * since > 0]
            found += [*self._judged(child, again), *((before[one], one) for one in choices if one not in set(again))]
        self.known[child] = sorted(found, key=lambda move: -move[0]) or [_NONE]
        self.fresh[child], self.looked[child] = True, self.saved

    def _look_again(self, child: int) -> None:
        """Look again at the few moves of a child that seemed best, but for those that would make a cycle by now."""
        below = self._descendants(child)
        known = [move for move in self.known[child] if below.isdisjoint(move[1])]
        again = self._judged(child, [parents for _, parents in known[:_AGAIN]])
        self.known[child] = sorted([*again, *known[_AGAIN:]], key=lambda move: -move[0]) or [_NONE]
        self.fresh[child] = self.known[child][0] in again

    def _pair(self) -> int | None:
        """Find the child that gains most by two more parents at once; None if none gains enough."""
        able = [self._able(child) if len(own) + 2 <= self.depths else [] for child, own in enumerate(self.parents)]
        pairs = [
            (child, two, tuple(sorted((child, *two))))
            for child, some in enumerate(able)
            for two in combinations(some, 2)
        ]
        triples = list({triple: None for _, _, triple in pairs})
        misfit = dict(zip(triples, self.judge.misfits(triples).tolist(), strict=True))
        found = None
        for child, some in groupby(pairs, key=itemgetter(0)):
            promising = sorted((-misfit[triple], two) for _, two, triple in some)[:_PAIRS]
            choices = [(*self.parents[child], *two) for less, two in promising if less < 0]
            moves = self._judged(child, choices)
            if moves and moves[0][0] > (0.0 if found is None else self.known[found][0][0]):
                found, self.known[child] = child, moves
        return found

    def _judged(self, child: int, choices: Sequence[Parents]) -> list[Move]:
        """List what each choice of parents is worth beyond what a move must save, best first."""
        if not choices:
            return []
        worth = self.judge.savings(child, choices, _LEAST) - _LEAST
        return [(float(worth[k]), choices[k]) for k in np.argsort(-worth, kind="stable").tolist()]

    def _able(self, child: int) -> list[int]:
        """List the candidates that are no parents of a child yet, and that it is no ancestor of."""
        below = self._descendants(child)
        return [one for one in self.candidates[child] if one not in self.parents[child] and one not in below]

    def _added_or_dropped(self, child: int, _: Sequence[Move]) -> list[Parents]:
        """List what one added or dropped parent makes of a child's parents."""
        own = self.parents[child]
        added = [(*own, one) for one in self._able(child)] if len(own) < self.depths else []
        return [*added, *self._dropped(child)]

    def _swapped(self, child: int, seen: Sequence[Move]) -> list[Parents]:
        """List what swaps make of a child's parents: for those that do best when added, for any where none can be."""
        own = self.parents[child]
        added = [parents[-1] for _, parents in sorted(seen, key=lambda move: -move[0]) if len(parents) > len(own)]
        able = added[:_SWAPS] if len(own) < self.depths else self._able(child)
        return [(*left, one) for left in self._dropped(child) for one in able]

    def _dropped(self, child: int) -> list[Parents]:
        own, kept = self.parents[child], self.bounds.parents(child)
        return [tuple(one for one in own if one != gone) for gone in own if gone not in kept]

    def _descendants(self, start: int) -> set[int]:
        """Find every attribute that stands below one."""
        if start not in self._below:
            below, grown = {start}, True
            while grown:
                more = {one for one, own in enumerate(self.parents) if one not in below and below & set(own)}
                grown = bool(more)
                below |= more
            self._below[start] = below
        return self._below[start]


def _candidates(child: int, strength: np.ndarray, bounds: Bounds) -> list[int]:
    """List the strongest that an attribute may take, strongest first, ties by column order."""
    barred = {child, *(b if a == child else a for a, b in bounds.forbidden if child in (a, b))}
    order = np.argsort(-strength[child], kind="stable").tolist()
    return [one for one in order if one not in barred][:_CANDIDATES]
