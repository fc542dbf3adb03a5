"""A structure as text, and what it says about independence."""

from itertools import combinations

import networkx as nx
import numpy as np
import pytest

from bnx.calibrating import Calibration
from bnx.classifier import Classifier
from bnx.domains import Domain
from bnx.errors import DataError
from bnx.parameters import parse_smoothing
from bnx.showing import separation, table_text
from bnx.structure import Structure


def classifier(parents: tuple[tuple[int, ...], ...]) -> Classifier:
    """Make a classifier with two levels everywhere; every cell was seen in one row."""
    domains = tuple(Domain(f"a{i}", ("no", "yes")) for i in range(len(parents)))
    counts = tuple(np.ones((2,) * (len(own) + 2), dtype=np.int32) for own in parents)
    calibration = Calibration(1.0, np.zeros(2), 0.0, np.full(2, 0.5))
    target = Domain("class", ("bad", "good"))
    structure = Structure("drawn", parents)
    return Classifier(domains, target, structure, counts, np.array([4, 4]), parse_smoothing("laplace:1"), calibration)


def separated_by_the_moral_graph(edges: list[tuple[str, str]], a: str, b: str, given: set[str]) -> bool:
    """Decide by the moral graph of the ancestors, without the given nodes (Lauritzen et al. 1990, proposition 3)."""
    parents: dict[str, set[str]] = {}
    for parent, child in edges:
        parents.setdefault(child, set()).add(parent)
    kept: set[str] = set()
    waiting = [a, b, *given]
    while waiting:
        one = waiting.pop()
        if one not in kept:
            kept.add(one)
            waiting += parents.get(one, set())
    moral = nx.Graph()
    moral.add_nodes_from(kept)
    for child in kept:
        family = [*parents.get(child, set()), child]
        moral.add_edges_from(combinations(family, 2))
    moral.remove_nodes_from(given)
    return not nx.has_path(moral, a, b)


@pytest.mark.parametrize("seed", range(6))
def test_separation_agrees_with_the_moral_graph_and_with_a_second_library(seed: int) -> None:
    random = np.random.default_rng(seed)
    n = 6
    parents = tuple(tuple(int(i) for i in np.flatnonzero(random.random(child) < 0.35)) for child in range(n))
    made = classifier(parents)
    names = [one.name for one in made.domains]
    edges = [("class", name) for name in names] + [(names[i], names[j]) for i, j in made.structure.edges]
    graph = nx.DiGraph(edges)
    answers = []
    for a, b in combinations(["class", *names], 2):
        rest = [name for name in ("class", *names) if name not in (a, b)]
        for size in range(4):
            for given in combinations(rest, size):
                found = separation(made, a, b, given).separated
                assert found == separated_by_the_moral_graph(edges, a, b, set(given))
                assert found == nx.is_d_separator(graph, {a}, {b}, set(given))
                answers.append(found)
    assert 0 < sum(answers) < len(answers)


def test_chain_fork_and_collider() -> None:
    """The three ways in which a path is blocked or open: Pearl 1988, chapter 3."""
    chain = classifier(((), (0,), (1,)))
    assert not separation(chain, "a0", "a2", ["class"]).separated
    assert separation(chain, "a0", "a2", ["class", "a1"]).separated
    fork = classifier(((1,), (), (1,)))
    assert not separation(fork, "a0", "a2", ["class"]).separated
    assert separation(fork, "a0", "a2", ["class", "a1"]).separated
    collider = classifier(((), (), (0, 1)))
    assert separation(collider, "a0", "a1", ["class"]).separated
    assert not separation(collider, "a0", "a1", ["class", "a2"]).separated


def test_naive_separates_given_the_class_alone() -> None:
    naive = classifier(((), (), ()))
    assert separation(naive, "a0", "a1", ["class"]).separated
    answer = separation(naive, "a0", "a1", [])
    assert str(answer) == "drawn lets a0 and a1 depend with nothing given: a path between them is open."
    assert answer.to_dict() == {"structure": "drawn", "a": "a0", "b": "a1", "given": [], "separated": False}


@pytest.mark.parametrize(
    ("a", "b", "given", "message"),
    [
        ("a0", "b1", [], "'b1' is not in this structure; known: class, a0, a1, a2"),
        ("a0", "a1", ["clas"], "'clas' is not in this structure; did you mean class?"),
        ("a0", "a0", [], "'a0' is named twice, but the two and what is given must differ; name each once"),
        ("a0", "a1", ["a1"], "'a1' is named twice, but the two and what is given must differ; name each once"),
        ("a0", "a1", ["a2", "a2"], "'a2' is named twice, but the two and what is given must differ; name each once"),
    ],
)
def test_names_that_cannot_be_separated(a: str, b: str, given: list[str], message: str) -> None:
    with pytest.raises(DataError) as refused:
        separation(classifier(((), (), ())), a, b, given)
    assert str(refused.value) == message


def test_a_table_has_a_line_per_context_with_its_rows() -> None:
    made = classifier(((), (0,)))
    assert table_text(made, "a1").splitlines() == [
        "a1",
        "class  a0      no    yes  rows",
        "bad    no   0.500  0.500     2",
        "bad    yes  0.500  0.500     2",
        "good   no   0.500  0.500     2",
        "good   yes  0.500  0.500     2",
    ]
    with pytest.raises(DataError, match=r"^'a2' is not an attribute of this structure; known: a0, a1$"):
        table_text(made, "a2")
