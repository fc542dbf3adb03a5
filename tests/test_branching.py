"""The strongest branching against networkx and against every choice of parents."""

from itertools import product

import networkx as nx
import numpy as np
import pytest

from bnx.branching import best_branching


def total(weights: np.ndarray, parents: list[int]) -> float:
    return sum(float(weights[parent, child]) for child, parent in enumerate(parents) if parent >= 0)


def best_of_all(weights: np.ndarray) -> float:
    """Try every parent of every attribute."""
    n = len(weights)
    best = 0.0
    for parents in product(range(-1, n), repeat=n):
        edges = [(parent, child) for child, parent in enumerate(parents) if parent >= 0]
        if all(np.isfinite(weights[edge]) for edge in edges) and nx.is_directed_acyclic_graph(nx.DiGraph(edges)):
            best = max(best, total(weights, list(parents)))
    return best


@pytest.mark.parametrize("seed", range(12))
def test_small_branchings_equal_the_best_of_all(seed: int) -> None:
    rng = np.random.default_rng(seed)
    weights = rng.random((4, 4))
    if seed % 2:
        weights = weights + weights.T
    np.fill_diagonal(weights, -np.inf)
    weights[rng.random((4, 4)) < 0.2] = -np.inf
    found = best_branching(weights)
    assert nx.is_directed_acyclic_graph(nx.DiGraph((p, c) for c, p in enumerate(found) if p >= 0))
    assert total(weights, found) == pytest.approx(best_of_all(weights), rel=1e-12)


@pytest.mark.parametrize("seed", range(6))
def test_larger_branchings_equal_networkx(seed: int) -> None:
    rng = np.random.default_rng(100 + seed)
    weights = rng.random((14, 14))
    np.fill_diagonal(weights, -np.inf)
    graph = nx.DiGraph()
    for a, b in product(range(14), repeat=2):
        if a != b:
            graph.add_edge(a, b, weight=float(weights[a, b]))
    expected = nx.maximum_branching(graph)
    assert total(weights, best_branching(weights)) == pytest.approx(
        sum(data["weight"] for _, _, data in expected.edges(data=True)), rel=1e-9
    )
