"""Structures from hand-written bits, against brute force, a second library and a few-line oracle."""

from itertools import product

import networkx as nx
import numpy as np
import pytest
from builders import structure_of
from hypothesis import given, settings
from hypothesis import strategies as st

from bnx.errors import SettingError, StructureError
from bnx.gating import Answer, Bounds
from bnx.learners import learner
from bnx.structure import Structure

ALL = ("naive", "tan", "tan-tested", "kdb1", "kdb1-tested", "kdb2", "kdb2-tested", "kdb3", "kdb3-tested")


@st.composite
def bits(draw: st.DrawFn, least: int = 1, most: int = 8) -> tuple[np.ndarray, np.ndarray]:
    """Draw relevance (n,) and a symmetric strength (n, n), often with ties."""
    n = draw(st.integers(least, most))
    random = np.random.default_rng(draw(st.integers(0, 100_000)))
    coarse = draw(st.booleans())
    upper = np.triu(random.integers(0, 4, (n, n)) / 8 if coarse else random.random((n, n)), 1)
    relevance = random.integers(0, 3, n) / 4 if coarse else random.random(n)
    return relevance, upper + upper.T


def total(structure: Structure, strength: np.ndarray) -> float:
    """Add up the bits of all edges."""
    return float(sum(strength[edge] for edge in structure.edges))


def labelled_trees(n: int) -> list[list[tuple[int, int]]]:
    """List all n ** (n - 2) trees on n attributes by their Pruefer codes (Pruefer 1918; Cayley 1889)."""
    trees = []
    for code in product(range(n), repeat=n - 2):
        degree = [1 + code.count(one) for one in range(n)]
        edges = []
        for one in code:
            leaf = degree.index(1)
            edges.append((leaf, one))
            degree[leaf] -= 1
            degree[one] -= 1
        edges.append(tuple(k for k in range(n) if degree[k] == 1))
        trees.append(edges)
    return trees


def test_there_are_125_labelled_trees_on_five() -> None:
    trees = labelled_trees(5)
    assert len({frozenset(map(frozenset, tree)) for tree in trees}) == 125
    assert all(nx.is_tree(nx.Graph(tree)) for tree in trees)


@given(bits(5, 5))
@settings(deadline=None)
def test_tan_has_the_most_bits_of_all_125_trees(drawn: tuple[np.ndarray, np.ndarray]) -> None:
    """Friedman, Geiger & Goldszmidt 1997; Chow & Liu 1968: no tree has more bits."""
    relevance, strength = drawn
    found = structure_of("tan", relevance, strength)
    best = max(sum(strength[edge] for edge in tree) for tree in labelled_trees(5))
    assert len(found.edges) == 4
    assert total(found, strength) == pytest.approx(best, abs=1e-12)


@given(bits(2, 12))
@settings(deadline=None)
def test_tan_has_the_bits_of_networkx_maximum_spanning_tree(drawn: tuple[np.ndarray, np.ndarray]) -> None:
    relevance, strength = drawn
    found = structure_of("tan", relevance, strength)
    graph = nx.Graph()
    n = len(relevance)
    graph.add_weighted_edges_from((i, j, strength[i, j]) for i in range(n) for j in range(i))
    expected = nx.maximum_spanning_tree(graph).size("weight")
    assert nx.is_tree(nx.Graph(found.edges))
    assert total(found, strength) == pytest.approx(expected, abs=1e-12)


@given(bits(2, 9))
@settings(deadline=None)
def test_tan_leads_away_from_the_most_relevant_attribute(drawn: tuple[np.ndarray, np.ndarray]) -> None:
    relevance, strength = drawn
    found = structure_of("tan", relevance, strength)
    roots = [child for child, parents in enumerate(found.parents) if not parents]
    assert roots == [int(np.argmax(relevance))]
    assert all(len(parents) <= 1 for parents in found.parents)


def kdb_oracle(relevance: np.ndarray, strength: np.ndarray, k: int) -> list[set[int]]:
    """Sahami 1996, figure 1: walk down the relevance, take the k strongest of those already passed."""
    order = sorted(range(len(relevance)), key=lambda i: (-relevance[i], i))
    parents: list[set[int]] = [set() for _ in order]
    for place, child in enumerate(order):
        strongest = sorted(order[:place], key=lambda j: (-strength[child, j], j))
        parents[child] = set(strongest[:k])
    return parents


@given(bits(), st.integers(1, 4))
@settings(deadline=None)
def test_kdb_equals_the_oracle(drawn: tuple[np.ndarray, np.ndarray], k: int) -> None:
    found = structure_of(f"kdb{k}", *drawn)
    assert [set(parents) for parents in found.parents] == kdb_oracle(*drawn, k)
    for child, parents in enumerate(found.parents):
        taken = [drawn[1][child, parent] for parent in parents]
        assert taken == sorted(taken, reverse=True)


@given(bits(2, 8), st.sampled_from(ALL), st.integers(0, 10_000))
@settings(deadline=None, max_examples=200)
def test_every_structure_is_acyclic_and_keeps_its_ceiling(
    drawn: tuple[np.ndarray, np.ndarray], name: str, seed: int
) -> None:
    relevance, strength = drawn
    n = len(relevance)
    p = np.random.default_rng(seed).random((n, n)) ** 4
    p = np.minimum(p, p.T)
    anything = AnyAnswer(seed)
    found = structure_of(name, relevance, strength, p=p, answers=anything)
    graph = nx.DiGraph(found.edges)
    assert nx.is_directed_acyclic_graph(graph)
    assert max(len(parents) for parents in found.parents) <= learner(name).depths
    assert nx.is_directed_acyclic_graph(nx.DiGraph(found.edges))


class AnyAnswer(dict[tuple[int, int, tuple[int, ...]], Answer]):
    """Answer every question, the same one always alike."""

    def __init__(self, seed: int) -> None:
        super().__init__()
        self.seed = seed

    def get(self, key: tuple[int, int, tuple[int, ...]], default: object = None) -> Answer:
        random = np.random.default_rng([self.seed, key[0], key[1], *key[2]])
        return Answer(float(random.random() ** 12), float(random.random()))


def test_ties_are_decided_by_column_order() -> None:
    strength = np.full((4, 4), 0.25)
    np.fill_diagonal(strength, 0)
    assert structure_of("tan", [0.1] * 4, strength).parents == ((), (0,), (0,), (0,))
    assert structure_of("kdb2", [0.1] * 4, strength).parents == ((), (0,), (0, 1), (0, 1))


def test_known_structure_by_hand() -> None:
    strength = np.array([[0, 0.3, 0.1, 0.0], [0.3, 0, 0.2, 0.4], [0.1, 0.2, 0, 0.05], [0, 0.4, 0.05, 0]])
    relevance = [0.2, 0.1, 0.9, 0.3]  # order 2, 3, 0, 1
    assert structure_of("tan", relevance, strength).parents == ((1,), (2,), (), (1,))
    assert structure_of("kdb1", relevance, strength).parents == ((2,), (3,), (), (2,))
    assert structure_of("kdb2", relevance, strength).parents == ((2, 3), (3, 0), (), (2,))
    assert structure_of("naive", relevance, strength).edges == ()


@st.composite
def bounded(draw: st.DrawFn) -> tuple[np.ndarray, np.ndarray, Bounds]:
    """Draw bits and bounds: at most one required parent each, acyclic, and some forbidden pairs."""
    relevance, strength = draw(bits(3, 8))
    n = len(relevance)
    random = np.random.default_rng(draw(st.integers(0, 100_000)))
    order = random.permutation(n)
    required = [(int(order[random.integers(0, k)]), int(order[k])) for k in range(1, n) if random.random() < 0.3]
    joined = {frozenset(edge) for edge in required}
    pairs = [(i, j) for i in range(n) for j in range(i) if random.random() < 0.3]
    forbidden = [pair for pair in pairs if frozenset(pair) not in joined]
    return relevance, strength, Bounds(tuple(f"a{i}" for i in range(n)), tuple(required), tuple(forbidden))


@given(bounded(), st.sampled_from(ALL), st.integers(0, 1000))
@settings(deadline=None, max_examples=300)
def test_required_and_forbidden_edges_bind_every_structure(
    drawn: tuple[np.ndarray, np.ndarray, Bounds], name: str, seed: int
) -> None:
    """The baseline naive is the one structure that required edges do not enter."""
    relevance, strength, bounds = drawn
    n = len(relevance)
    p = np.random.default_rng(seed).random((n, n)) ** 6
    found = structure_of(name, relevance, strength, bounds, p=np.minimum(p, p.T), answers=AnyAnswer(seed))
    edges = set(found.edges)
    assert name == "naive" or set(bounds.required) <= edges
    assert not any(bounds.forbids(*edge) for edge in edges)
    assert nx.is_directed_acyclic_graph(nx.DiGraph(found.edges))
    assert max(len(parents) for parents in found.parents) <= learner(name).depths


def test_tan_with_required_edges_is_the_strongest_forest_that_holds_them() -> None:
    random = np.random.default_rng(8)
    for _ in range(30):
        upper = np.triu(random.random((5, 5)), 1)
        strength = upper + upper.T
        parent, child = random.permutation(5)[:2].tolist()
        bounds = Bounds(tuple("abcde"), ((parent, child),))
        found = structure_of("tan", random.random(5), strength, bounds)
        best = max(
            sum(strength[edge] for edge in tree)
            for tree in labelled_trees(5)
            if frozenset((parent, child)) in map(frozenset, tree)
        )
        assert (parent, child) in found.edges
        assert total(found, strength) == pytest.approx(best, abs=1e-12)


def test_a_cycle_of_required_edges_is_named() -> None:
    with pytest.raises(StructureError, match="form a cycle") as caught:
        Bounds(("rain", "wet", "slip"), ((0, 1), (1, 2), (2, 0)))
    names = str(caught.value)
    assert all(name in names for name in ("rain", "wet", "slip"))
    assert " -> " in names


def test_an_edge_both_required_and_forbidden_is_named() -> None:
    with pytest.raises(StructureError, match="rain:wet is both required and forbidden"):
        Bounds(("rain", "wet"), ((0, 1),), ((1, 0),))


def test_two_required_parents_do_not_fit_into_a_tree() -> None:
    bounds = Bounds(("rain", "wet", "slip"), ((0, 2), (1, 2)))
    for name in ("tan", "tan-tested", "kdb1", "kdb1-tested"):
        with pytest.raises(StructureError, match=rf"{name} gives an attribute at most 1 parent, but slip has 2"):
            structure_of(name, [0.1] * 3, np.zeros((3, 3)), bounds)
    assert structure_of("kdb2", [0.1] * 3, np.zeros((3, 3)), bounds).parents[2] == (0, 1)


@pytest.mark.parametrize("name", ["kdb-", "kdb-tested", "kdb0", "tan2", "kdb2-teste", "Naive", "kdb100", ""])
def test_an_unknown_structure_is_refused(name: str) -> None:
    with pytest.raises(SettingError, match="is not a structure; known: naive, tan"):
        learner(name)


@pytest.mark.parametrize("parents", [((0,),), ((1,), (0,)), ((), (0, 0)), ((2,), (0,), (1,))])
def test_a_structure_that_contradicts_itself_is_refused(parents: tuple[tuple[int, ...], ...]) -> None:
    with pytest.raises(StructureError):
        Structure("odd", parents)
