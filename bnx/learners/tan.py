"""Tree-augmented naive Bayes: the strongest tree over the attributes, or the strongest forest of tested pairs."""

from collections.abc import Generator, Sequence
from dataclasses import dataclass

import networkx as nx
import numpy as np

from bnx.branching import best_branching
from bnx.dependence import Dependence
from bnx.doubts import doubts_that_matter
from bnx.gating import Answer, Bounds, Gate, Learning, Question
from bnx.kernels.graphs import strongest_forest
from bnx.multiplicity import forest_threshold
from bnx.structure import Structure

__all__ = ["Tan"]


@dataclass(frozen=True)
class Tan:
    """Learn a maximum spanning tree of the bits given the class.

    With ``tested``, only pairs that pass focused Benjamini-Hochberg on the forest may enter.

    Source: Friedman, Geiger & Goldszmidt 1997; Chow & Liu 1968; Katsevich, Sabatti & Bogomolov 2021.
    """

    tested: bool
    depths: int = 1
    looks_at_pairs: bool = True

    @property
    def name(self) -> str:
        """Name the structure."""
        return "tan-tested" if self.tested else "tan"

    def learn(self, dependence: Dependence, gate: Gate, bounds: Bounds) -> Learning:
        """Return the tree, directed away from the attribute that shares most with the class."""
        bounds.check_room(1, self.name)
        allowed = np.ones(dependence.strength.shape, np.bool_)
        np.fill_diagonal(allowed, False)
        for a, b in bounds.forbidden:
            allowed[a, b] = allowed[b, a] = False
        if self.tested:
            p = yield from _certain(allowed, dependence.strength, gate, bounds)
            allowed &= p <= _threshold(allowed, p, gate.alpha, bounds)
        parents = (
            _branching(allowed, dependence.strength, bounds)
            if bounds.required
            else _directed(strongest_forest(dependence.strength, allowed), dependence.relevance)
        )
        return Structure(self.name, tuple(parents))


def _certain(
    allowed: np.ndarray, strength: np.ndarray, gate: Gate, bounds: Bounds
) -> Generator[Sequence[Question], Sequence[Answer], np.ndarray]:
    """Ask for exact p-values of the doubtful pairs that matter, and return the p of all, (n, n).

    Required edges are no forest of the strongest pairs, so that with them every doubtful pair may matter.
    """
    if gate.doubtful is None:
        return gate.p
    if bounds.required:
        asked = np.triu(allowed & gate.doubtful)
    else:
        asked = doubts_that_matter(strength, allowed, gate.p, gate.doubtful, gate.alpha)
    left, right = np.nonzero(asked)
    p = gate.p.copy()
    if not len(left):
        return p
    answers = yield [Question(b, a, ()) for a, b in zip(left.tolist(), right.tolist(), strict=True)]
    p[left, right] = p[right, left] = [answer.p for answer in answers]
    return p


def _threshold(allowed: np.ndarray, p: np.ndarray, alpha: float, bounds: Bounds) -> float:
    """Find the largest p that may enter among the pairs that an edge is neither forbidden to join nor sure to.

    Attributes that required edges join are one tree from the start, so the forest grows between such trees.
    """
    joined = nx.utils.UnionFind(range(len(p)))
    for parent, child in bounds.required:
        joined.union(parent, child)
    tree = np.array([joined[attribute] for attribute in range(len(p))])
    left, right = np.nonzero(np.triu(allowed & (tree[:, None] != tree)))
    pairs = np.stack([tree[left], tree[right]], axis=1)
    return forest_threshold(pairs, p[left, right], len(p), alpha)


def _directed(joined: np.ndarray, relevance: np.ndarray) -> list[tuple[int, ...]]:
    """Direct every tree away from its most relevant attribute; joined (n,): a neighbour of each, -1 for none."""
    neighbours: list[list[int]] = [[] for _ in relevance]
    for node, other in enumerate(joined.tolist()):
        if other >= 0:
            neighbours[node].append(other)
            neighbours[other].append(node)
    parents: list[tuple[int, ...]] = [()] * len(relevance)
    placed: set[int] = set()
    for root in np.argsort(-relevance, kind="stable").tolist():
        waiting = [] if root in placed else [root]
        placed.add(root)
        while waiting:
            parent = waiting.pop()
            for child in neighbours[parent]:
                if child not in placed:
                    placed.add(child)
                    parents[child] = (parent,)
                    waiting.append(child)
    return parents


def _branching(allowed: np.ndarray, strength: np.ndarray, bounds: Bounds) -> list[tuple[int, ...]]:
    """Find the strongest forest that holds the required edges in their direction."""
    weights = np.where(allowed, strength + 1e-12, -np.inf)  # a pair without a single bit may still be joined
    for parent, child in bounds.required:
        weights[:, child] = -np.inf
        weights[parent, child] = 1.0 + len(strength) * float(strength.max(initial=0.0))
    return [() if parent < 0 else (parent,) for parent in best_branching(weights)]
