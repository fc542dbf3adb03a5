"""Exact tests only where a structure depends on them: the structures are those of exact tests everywhere."""

import numpy as np
import pytest
from builders import coded, finished, learnt
from hypothesis import given, settings
from hypothesis import strategies as st

import bnx.learners.tan
import bnx.learning
from bnx.dependence import Dependence
from bnx.doubts import doubts_that_matter
from bnx.gating import Answer, Bounds, Gate
from bnx.learners import learner


def symmetric(upper: np.ndarray) -> np.ndarray:
    """Mirror what lies above the diagonal."""
    above = np.triu(upper, 1)
    return above + above.T


def drawn(seed: int, n: int) -> tuple[np.ndarray, np.ndarray, np.ndarray, np.ndarray, Bounds]:
    """Draw strengths with ties, p-values, which of them are doubtful, their exact values, and forbidden pairs."""
    rng = np.random.default_rng(seed)
    strength = symmetric(rng.integers(0, 6, (n, n)).astype(float))
    p = symmetric(10.0 ** -rng.uniform(0, rng.choice([3.0, 6.0]), (n, n)))
    p[np.triu(rng.random((n, n)) < 0.1, 1)] = np.nan
    p = np.where(np.isnan(p) | np.isnan(p.T), np.nan, p)
    doubtful = symmetric((rng.random((n, n)) < rng.choice([0.2, 0.5, 0.9])).astype(float)) > 0
    doubtful &= ~np.isnan(p)
    exact = np.where(doubtful, np.minimum(1.0, p * symmetric(10.0 ** rng.uniform(-2, 2, (n, n)))), p)
    left, right = np.nonzero(np.triu(rng.random((n, n)) < 0.1, 1))
    forbidden = tuple(zip(left.tolist(), right.tolist(), strict=True))
    return strength, p, doubtful, exact, Bounds(tuple(f"a{i}" for i in range(n)), (), forbidden)


@given(seed=st.integers(0, 10**6), n=st.integers(2, 14), alpha=st.sampled_from([0.01, 0.05, 0.3]))
@settings(max_examples=300, deadline=None)
def test_a_forest_is_that_of_exact_tests_everywhere(seed: int, n: int, alpha: float) -> None:
    strength, p, doubtful, exact, bounds = drawn(seed, n)
    dependence = Dependence(np.arange(n, 0.0, -1.0), strength)
    answers = {
        (child, candidate, ()): Answer(float(exact[child, candidate]), 0.0)
        for child, candidate in zip(*np.nonzero(doubtful), strict=True)
    }
    everywhere = finished(learner("tan-tested").learn(dependence, Gate(alpha, exact), bounds))
    where_it_matters = finished(learner("tan-tested").learn(dependence, Gate(alpha, p, doubtful), bounds), answers)
    assert where_it_matters == everywhere


def test_a_weak_pair_between_sure_ones_is_not_asked_about() -> None:
    """By hand: 0 - 1 - 2 are surely joined by links of 5 and 4 bits; 0 - 2 matters only if it is not weaker than 4."""
    p = symmetric(np.array([[0, 1e-9, 0.01, 0.5], [0, 0, 1e-9, 0.5], [0, 0, 0, 0.5], [0, 0, 0, 0.0]]))
    doubtful = symmetric(np.array([[0, 0, 1, 0], [0, 0, 0, 0], [0, 0, 0, 1], [0, 0, 0, 0]])) > 0
    for bits, asked in ((3.0, [(2, 3)]), (4.0, [(0, 2), (2, 3)])):
        strength = symmetric(np.array([[0, 5, bits, 1], [0, 0, 4, 1], [0, 0, 0, 1], [0, 0, 0, 0.0]]))
        found = doubts_that_matter(strength, ~np.eye(4, dtype=bool), p, doubtful, 0.05)
        assert list(zip(*(ends.tolist() for ends in np.nonzero(found)), strict=True)) == asked


@pytest.mark.parametrize("test", ["auto", "monte-carlo"])
def test_structures_of_sparse_tables_are_those_of_exact_tests_everywhere(
    monkeypatch: pytest.MonkeyPatch, test: str
) -> None:
    """Rare levels, classes of one and of no record in most strata: Cochran's rule fails for every pair."""
    rng = np.random.default_rng(8)
    rows, n = 240, 16
    topic = rng.random(rows) < 0.3
    codes = [(rng.random(rows) < np.where(topic, 0.3 + 0.6 * i / n, 0.05)).astype(int) for i in range(n)]
    target = np.concatenate([[5, 4, 4], rng.integers(0, 4, rows - 3)])
    table = coded(np.array(codes), target)
    asked = []
    gate = bnx.learning.gated

    def counted(visit, stats, rigour):
        asked.append(len(stats.rows))
        return gate(visit, stats, rigour)

    monkeypatch.setattr(bnx.learning, "gated", counted)
    structures = ("tan-tested", "kdb1-tested", "kdb2-tested")
    few = learnt(table, structures, test=test)
    first = sum(asked)
    asked.clear()

    def everything(strength, allowed, p, doubtful, alpha):
        return np.triu(allowed & doubtful)

    monkeypatch.setattr(bnx.learners.tan, "doubts_that_matter", everything)
    assert learnt(table, structures, test=test).structures == few.structures
    assert any(structure.edges for structure in few.structures)
    assert 0 < first < sum(asked)
