"""Tables with known dependences given the class: a tree, attributes that share a hidden cause, nothing at all."""

from collections.abc import Callable
from dataclasses import dataclass

import networkx as nx
import numpy as np

__all__ = ["ATTRIBUTES", "CLASS_SHARES", "DESIGNS", "LEVELS", "Planted"]

ATTRIBUTES = 15
LEVELS = (2, 3, 4, 5, 6) * 3
CLASS_SHARES = np.array([0.6, 0.3, 0.1])
CLASS, HIDDEN = -1, -2  # their nodes in the graph
TREE = (0, 1, 3, 4, 6, 7, 9, 11, 12, 14)  # the attributes that the tree joins; the other five stand alone
CLIQUE = (0, 2, 3, 6, 8, 9, 13)  # the attributes that share a cause; the other eight stand alone
TREE_STRENGTH = 0.7
CLIQUE_STRENGTH = 1.2


@dataclass(frozen=True)
class Planted:
    """One drawn table, codes (n, N) and classes (N,), and the graph it came from; node ``CLASS`` is the class.

    ``related``: pairs that a structure should join; ``members``: the attributes that depend on others at all.
    """

    codes: np.ndarray
    target: np.ndarray
    graph: "nx.DiGraph[int]"
    related: frozenset[frozenset[int]]
    members: tuple[int, ...]


def drawn_from(chances: np.ndarray, random: np.random.Generator) -> np.ndarray:
    """Draw one level per row of chances (N, levels)."""
    return np.asarray((random.random(len(chances))[:, None] > np.cumsum(chances, axis=1)[:, :-1]).sum(axis=1))


def base(size: int, random: np.random.Generator) -> np.ndarray:
    """Draw the shares of an attribute's levels in every class, uneven and different between classes, (C, size)."""
    return random.dirichlet(np.full(size, 2.0), len(CLASS_SHARES))


def bent(shares: np.ndarray, parent_levels: int, strength: float, random: np.random.Generator) -> np.ndarray:
    """Make shares (C, size) depend on a parent, (C, parent levels, size)."""
    bend = random.normal(size=(len(shares), parent_levels, shares.shape[1]))
    chances = shares[:, None, :] * np.exp(strength * bend)
    return np.asarray(chances / chances.sum(axis=2, keepdims=True))


def graph_of(edges: list[tuple[int, int]]) -> "nx.DiGraph[int]":
    """Let every attribute depend on the class, and add edges."""
    graph: nx.DiGraph[int] = nx.DiGraph([(CLASS, attribute) for attribute in range(ATTRIBUTES)])
    graph.add_edges_from(edges)
    return graph


def alone(rows: int, random: np.random.Generator) -> tuple[np.ndarray, np.ndarray]:
    """Draw classes and attributes that depend on the class alone."""
    target = random.choice(len(CLASS_SHARES), rows, p=CLASS_SHARES)
    return np.array([drawn_from(base(size, random)[target], random) for size in LEVELS]), target


def independent(rows: int, random: np.random.Generator) -> Planted:
    """Draw a table without any dependence given the class."""
    codes, target = alone(rows, random)
    return Planted(codes, target, graph_of([]), frozenset(), ())


def tree(rows: int, random: np.random.Generator) -> Planted:
    """Draw a table in which ten attributes hang on a random tree and five stand alone."""
    codes, target = alone(rows, random)
    order = random.permutation(TREE).tolist()
    edges = []
    for place, child in enumerate(order[1:], start=1):
        parent = order[int(random.integers(place))]
        chances = bent(base(LEVELS[child], random), LEVELS[parent], TREE_STRENGTH, random)
        codes[child] = drawn_from(chances[target, codes[parent]], random)
        edges.append((parent, child))
    return Planted(codes, target, graph_of(edges), frozenset(map(frozenset, edges)), TREE)


def clique(rows: int, random: np.random.Generator) -> Planted:
    """Draw a table in which seven attributes share a hidden cause of three levels and eight stand alone."""
    codes, target = alone(rows, random)
    cause = random.integers(0, 3, rows)
    for child in CLIQUE:
        chances = bent(base(LEVELS[child], random), 3, CLIQUE_STRENGTH, random)
        codes[child] = drawn_from(chances[target, cause], random)
    edges = [(CLASS, HIDDEN), *((HIDDEN, child) for child in CLIQUE)]
    pairs = frozenset(frozenset((a, b)) for a in CLIQUE for b in CLIQUE if a < b)
    return Planted(codes, target, graph_of(edges), pairs, CLIQUE)


DESIGNS: dict[str, Callable[[int, np.random.Generator], Planted]] = {
    "tree of ten": tree,
    "seven with one cause": clique,
    "independent": independent,
}
