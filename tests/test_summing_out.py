"""Unobserved attributes against enumeration of what they could have been, and naive Bayes without them."""

from itertools import product

import networkx as nx
import numpy as np
import pytest
from builders import classifier_from
from hypothesis import given, settings
from hypothesis import strategies as st
from sklearn.naive_bayes import CategoricalNB

from bnx.calibrating import identity
from bnx.classifier import Classifier
from bnx.parameters import Smoothing
from bnx.structure import Structure
from bnx.summing_out import approximate, observed_terms
from bnx.unobserved import groups_of

ATTRIBUTES = 6


def random_structure(random: np.random.Generator, most: int = 3) -> Structure:
    """Give every attribute up to so many parents among those before it in a random order."""
    order = random.permutation(ATTRIBUTES)
    parents: list[tuple[int, ...]] = [()] * ATTRIBUTES
    for place, child in enumerate(order):
        taken = random.permutation(order[:place])[: random.integers(0, most + 1)]
        parents[child] = tuple(int(one) for one in taken)
    return Structure("drawn", tuple(parents))


def random_classifier(random: np.random.Generator, structure: Structure, rows: int = 80) -> Classifier:
    """Draw records of six attributes with 2 to 4 levels and three classes, and learn the tables."""
    sizes = random.integers(2, 5, ATTRIBUTES)
    codes = np.array([random.integers(0, size, rows) for size in sizes])
    target = random.integers(0, 3, rows)
    smoothing = Smoothing("backoff", 1.5) if random.random() < 0.5 else Smoothing("laplace", 0.7)
    own = tuple(sizes.tolist())
    return classifier_from(codes, target, structure, smoothing, identity(3), sizes=own, classes=3)


def joint(classifier: Classifier) -> np.ndarray:
    """P(class, all attributes), (C, levels...), by multiplying out the tables cell by cell."""
    sizes = [len(domain) for domain in classifier.domains]
    tables = [classifier.table(child) for child in range(len(sizes))]
    prior = classifier.class_counts / classifier.class_counts.sum()
    out = np.empty((len(prior), *sizes))
    for c, levels in product(range(len(prior)), product(*map(range, sizes))):
        p = prior[c]
        for child, parents in enumerate(classifier.structure.parents):
            p *= tables[child][(c, *(levels[parent] for parent in parents), levels[child])]
        out[(c, *levels)] = p
    return out


@given(st.integers(0, 10_000))
@settings(deadline=None, max_examples=40)
def test_posteriors_with_blanks_equal_enumeration(seed: int) -> None:
    random = np.random.default_rng(seed)
    classifier = random_classifier(random, random_structure(random))
    whole = joint(classifier)
    sizes = np.array(whole.shape[1:])
    codes = (random.random((ATTRIBUTES, 60)) * sizes[:, None]).astype(int)
    codes[random.random(codes.shape) < random.choice([0.2, 0.5, 0.8])] = -1
    found = classifier.probabilities(codes)
    for row, record in enumerate(codes.T):
        kept = whole[(slice(None), *(slice(None) if level < 0 else level for level in record))]
        p = kept.reshape(len(whole), -1).sum(axis=1)
        assert found[row] == pytest.approx(p / p.sum(), abs=1e-12)


def test_the_probability_of_what_was_observed_itself() -> None:
    """Log P(observed | class) for each of the 64 patterns of blanks of one record."""
    random = np.random.default_rng(3)
    classifier = random_classifier(random, random_structure(random))
    whole = joint(classifier)
    record = np.array([size - 1 for size in whole.shape[1:]])
    patterns = np.array(list(product([False, True], repeat=ATTRIBUTES))).T
    evidence, rough = classifier.evidence(np.where(patterns, -1, record[:, None]))
    assert not rough.any()
    for column, pattern in enumerate(patterns.T):
        shown = (slice(None) if out else level for out, level in zip(pattern, record, strict=True))
        kept = whole[(slice(None), *shown)]
        expected = np.log(kept.reshape(3, -1).sum(axis=1)) - classifier.log_prior
        assert evidence[column] == pytest.approx(expected, abs=1e-12)
    assert (evidence[-1] == 0).all()


def test_naive_bayes_with_blanks_equals_scikit_learn_without_these_columns() -> None:
    random = np.random.default_rng(4)
    naive, sizes = Structure("naive", ((),) * ATTRIBUTES), [2, 3, 4, 2, 3, 5]
    codes = np.array([random.integers(0, size, 90) for size in sizes])
    target = random.integers(0, 3, 90)
    classifier = classifier_from(codes, target, naive, Smoothing("laplace", 1.0), identity(3), sizes=sizes)
    for gone in ([0], [1, 4], [0, 2, 3, 5]):
        kept = [i for i in range(ATTRIBUTES) if i not in gone]
        rival = CategoricalNB(alpha=1, min_categories=[sizes[i] for i in kept]).fit(codes[kept].T, target)
        blanked = codes.copy()
        blanked[gone] = -1
        assert classifier.probabilities(blanked) == pytest.approx(rival.predict_proba(codes[kept].T), abs=1e-12)


@given(st.integers(0, 10_000))
@settings(deadline=None, max_examples=40)
def test_what_is_left_to_sum_are_the_unobserved_ancestors_of_what_was_observed(seed: int) -> None:
    """Groups are the connected parts, in the moral graph of those ancestors, of what was not observed."""
    random = np.random.default_rng(seed)
    structure = random_structure(random, most=2)
    unknown = random.random((ATTRIBUTES, 20)) < 0.5
    found: list[set[frozenset[int]]] = [set() for _ in range(20)]
    for group in groups_of(unknown, dict(enumerate(structure.parents))):
        for row in group.rows:
            assert not found[row] & {frozenset(group.members)}
            found[row].add(frozenset(group.members))
    graph = nx.DiGraph()
    graph.add_nodes_from(range(ATTRIBUTES))
    graph.add_edges_from(structure.edges)
    for row in range(20):
        observed = set(np.flatnonzero(~unknown[:, row]).tolist())
        ancestors = observed.union(*(nx.ancestors(graph, one) for one in observed))
        moral = nx.moral_graph(graph.subgraph(ancestors)).subgraph(ancestors - observed)
        assert found[row] == {frozenset(part) for part in nx.connected_components(moral)}


def test_many_children_do_not_underflow() -> None:
    """One unobserved attribute with 3,000 observed children: the product of their tables is far below 1e-308."""
    children = 3000
    structure = Structure("star", ((), *(((0,),) * children)))
    own = np.log(np.array([[0.3], [0.7]]))
    tables = np.log(np.array([[[0.1], [0.9]], [[0.6], [0.4]]]))
    codes = np.zeros((children + 1, 1), int)
    codes[0] = -1
    codes[1 : children // 2] = 1
    parents = dict(enumerate(structure.parents))
    found, _ = observed_terms(codes, parents, [2] * (children + 1), lambda child: tables if child else own, 1)
    logs = [float(own[x, 0]) + sum(float(tables[x, codes[k, 0], 0]) for k in range(1, children + 1)) for x in (0, 1)]
    assert max(logs) < -1000
    assert found[0, 0] == pytest.approx(np.logaddexp(*logs), rel=1e-12)


def test_beyond_the_largest_table_the_answer_is_an_approximation_and_says_so() -> None:
    """Four unobserved parents of one observed child, tables of at most 8 cells: a mean takes the place of a sum."""
    random = np.random.default_rng(7)
    structure = Structure("v", ((), (), (), (), (0, 1), (2, 3, 0)))
    classifier = random_classifier(random, structure)
    codes = np.full((ATTRIBUTES, 2), -1)
    codes[4:] = 0
    codes[:4, 1] = 0
    columns = len(classifier.class_counts)
    parents, sizes = dict(enumerate(structure.parents)), [len(domain) for domain in classifier.domains]
    assert approximate(codes, parents, sizes, most=8).tolist() == [True, False]
    exact, fine = observed_terms(codes, parents, sizes, classifier.log_table, columns)
    close, rough = observed_terms(codes, parents, sizes, classifier.log_table, columns, most=8)
    assert fine.tolist() == [False, False]
    assert rough.tolist() == [True, False]
    assert np.isfinite(close).all()
    assert not np.allclose(close[0], exact[0], atol=1e-9)
    assert np.allclose(close[0], exact[0], atol=0.5)
    assert (close[1] == exact[1]).all()
