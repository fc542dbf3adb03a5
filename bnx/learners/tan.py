"""Tree-augmented naive Bayes: the strongest tree over the attributes, or the strongest forest of tested pairs."""

from collections.abc import Sequence
from dataclasses import dataclass

import networkx as nx
import numpy as np

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
            p = gate.p[left, right]
            allowed = allowed & (p <= forest_threshold(np.stack([left, right], axis=1), p, attributes, gate.alpha))
        left, right = left[allowed], right[allowed]
        strongest = np.argsort(-dependence.strength[left, right], kind="stable")
        edges = list(zip(left[strongest].tolist(), right[strongest].tolist(), strict=True))
        parents = (
            _branching(edges, dependence.strength, bounds)
            if bounds.required
            else _directed(_forest(edges, attributes), dependence.relevance)
        )
        return settled(Structure(self.name, tuple(parents)))


def _forest(edges: Sequence[Edge], attributes: int) -> list[Edge]:
    """Keep the edges, taken in order, that close no cycle."""
    joined = nx.utils.UnionFind(range(attributes))
    kept = []
    for a, b in edges:
        if joined[a] != joined[b]:
            joined.union(a, b)
            kept.append((a, b))
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
    """Find the strongest forest that holds the required edges in their direction.

    Source: Edmonds 1967 (optimum branchings).
    """
    graph: nx.DiGraph[int] = nx.DiGraph()
    sure = 1.0 + len(strength) * float(strength.max(initial=0.0))
    for parent, child in [*edges, *((b, a) for a, b in edges), *bounds.required]:
        if not bounds.parents(child) or (parent, child) in bounds.required:
            bonus = sure if (parent, child) in bounds.required else 1e-12
            graph.add_edge(parent, child, weight=float(strength[parent, child]) + bonus)
    parents: list[tuple[int, ...]] = [()] * len(strength)
    for parent, child in nx.maximum_branching(graph).edges:
        parents[child] = (parent,)
    return parents
