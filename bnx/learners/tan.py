"""Tree-augmented naive Bayes: the strongest tree over the attributes, or the strongest forest of tested pairs."""

from collections.abc import Sequence
from dataclasses import dataclass

import networkx as nx
import numpy as np

from bnx.branching import best_branching
from bnx.dependence import Dependence
from bnx.gating import Bounds, Gate, Learning, settled
from bnx.multiplicity import forest_threshold
from bnx.structure import Structure

__all__ = ["Tan"]

Edge = tuple[int, int]


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
        attributes = len(dependence.relevance)
        left, right = np.triu_indices(attributes, 1)
        barred = np.zeros((attributes, attributes), np.bool_)
        for a, b in bounds.forbidden:
            barred[a, b] = barred[b, a] = True
        allowed = np.asarray(~barred[left, right])
        if self.tested:
            allowed = allowed & (gate.p[left, right] <= _threshold(left[allowed], right[allowed], gate, bounds))
        left, right = left[allowed], right[allowed]
        strongest = np.argsort(-dependence.strength[left, right], kind="stable")
        edges = list(zip(left[strongest].tolist(), right[strongest].tolist(), strict=True))
        parents = (
            _branching(edges, dependence.strength, bounds)
            if bounds.required
            else _directed(_forest(edges, attributes), dependence.relevance)
        )
        return settled(Structure(self.name, tuple(parents)))


def _threshold(left: np.ndarray, right: np.ndarray, gate: Gate, bounds: Bounds) -> float:
    """Find the largest p that may enter among the pairs that an edge is neither forbidden to join nor sure to.

    Attributes that required edges join are one tree from the start, so the forest grows between such trees.
    """
    joined = nx.utils.UnionFind(range(len(gate.p)))
    for parent, child in bounds.required:
        joined.union(parent, child)
    tree = np.array([joined[attribute] for attribute in range(len(gate.p))])
    pairs = np.stack([tree[left], tree[right]], axis=1)
    open_ = pairs[:, 0] != pairs[:, 1]
    return forest_threshold(pairs[open_], gate.p[left, right][open_], len(gate.p), gate.alpha)


def _forest(edges: Sequence[Edge], attributes: int) -> list[Edge]:
    """Keep the edges, taken in order, that close no cycle."""
    joined = nx.utils.UnionFind(range(attributes))
    kept = []
    for a, b in edges:
        if joined[a] != joined[b]:
            joined.union(a, b)
            kept.append((a, b))
            if len(kept) == attributes - 1:
                break
    return kept


def _directed(forest: Sequence[Edge], relevance: np.ndarray) -> list[tuple[int, ...]]:
    """Direct every tree away from its most relevant attribute."""
    graph = nx.Graph(forest)
    parents: list[tuple[int, ...]] = [()] * len(relevance)
    placed: set[int] = set()
    for root in np.argsort(-relevance, kind="stable").tolist():
        if root in graph and root not in placed:
            placed.add(root)
            for parent, child in nx.bfs_edges(graph, root):
                parents[child] = (parent,)
                placed.add(child)
    return parents


def _branching(edges: Sequence[Edge], strength: np.ndarray, bounds: Bounds) -> list[tuple[int, ...]]:
    """Find the strongest forest that holds the required edges in their direction."""
    weights = np.full(strength.shape, -np.inf)
    for a, b in edges:
        weights[a, b] = weights[b, a] = strength[a, b] + 1e-12  # a pair without a single bit may still be joined
    for parent, child in bounds.required:
        weights[:, child] = -np.inf
        weights[parent, child] = 1.0 + len(strength) * float(strength.max(initial=0.0))
    return [() if parent < 0 else (parent,) for parent in best_branching(weights)]
