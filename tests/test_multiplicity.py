"""Adjusted p-values and the gate of a forest, against published figures, two libraries and the definition."""

import networkx as nx
import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from published import BENJAMINI_HOCHBERG_P
from scipy.stats import false_discovery_control
from statsmodels.stats.multitest import multipletests

from bnx.errors import SettingError
from bnx.kernels.exact import exact_tail
from bnx.multiplicity import METHODS, adjusted, forest_threshold, threshold
from bnx.multiplicity import testable as reachable  # pytest would take it for a test by its name

LIBRARY_NAMES = {"bh": "fdr_bh", "by": "fdr_by", "holm": "holm"}
p_lists = st.lists(st.floats(0, 1), max_size=40)


def all_pairs(n: int) -> np.ndarray:
    return np.column_stack(np.triu_indices(n, 1))


def forest_threshold_by_definition(pairs: np.ndarray, p: np.ndarray, n: int, alpha: float) -> float:
    """Grow the forest anew for every observed p."""
    passing = []
    for t in p[~np.isnan(p)]:
        graph = nx.Graph()
        graph.add_nodes_from(range(n))
        graph.add_weighted_edges_from((*pairs[k], -p[k]) for k in np.flatnonzero(p <= t))
        edges = nx.maximum_spanning_tree(graph).number_of_edges()
        if np.count_nonzero(~np.isnan(p)) * t <= alpha * edges:
            passing.append(t)
    return max(passing, default=float("nan"))


def test_benjamini_hochberg_rejects_four_of_fifteen() -> None:
    p = BENJAMINI_HOCHBERG_P  # Benjamini & Hochberg 1995
    assert np.count_nonzero(adjusted(p, "bh") <= 0.05) == 4
    assert np.count_nonzero(p * p.size <= 0.05) == 3  # Bonferroni, printed beside it
    assert threshold(p, "bh", 0.05) == pytest.approx(4 / 15 * 0.05)
    assert threshold(p, "holm", 0.05) == pytest.approx(0.05 / (15 - 3))
    assert threshold(p, "none", 0.05) == 0.05


@pytest.mark.parametrize("method", ["bh", "by", "holm"])
def test_equals_statsmodels(method: str) -> None:
    random = np.random.default_rng(1)
    for size in (1, 2, 15, 400):
        p = np.round(random.random(size) ** 3, 3)
        expected = multipletests(p, 0.05, LIBRARY_NAMES[method])[1]
        np.testing.assert_allclose(adjusted(p, method), expected, rtol=1e-12)


@pytest.mark.parametrize("method", ["bh", "by"])
def test_equals_scipy(method: str) -> None:
    p = np.random.default_rng(2).random(300) ** 4
    np.testing.assert_allclose(adjusted(p, method), false_discovery_control(p, method=method), rtol=1e-12)


@pytest.mark.parametrize("method", METHODS)
@given(p_lists, st.integers(0, 2**32))
def test_adjusted_p_is_never_smaller_and_keeps_the_order(method: str, values: list[float], seed: int) -> None:
    p = np.array(values)
    found = adjusted(p, method)
    assert (found >= p * (1 - 1e-15)).all()
    assert (found <= 1).all()
    assert (np.diff(found[np.argsort(p)]) >= 0).all()
    shuffled = np.random.default_rng(seed).permutation(p.size)
    np.testing.assert_array_equal(adjusted(p[shuffled], method), found[shuffled])


@pytest.mark.parametrize("method", METHODS)
def test_untested_pairs_leave_the_family(method: str) -> None:
    p = np.array([0.01, np.nan, 0.04, np.nan, 0.5])
    tested = ~np.isnan(p)
    np.testing.assert_array_equal(adjusted(p, method)[tested], adjusted(p[tested], method))
    assert np.isnan(adjusted(p, method)[~tested]).all()
    assert threshold(p, method, 0.05) == threshold(p[tested], method, 0.05)
    assert np.isnan(threshold(np.full(3, np.nan), method, 0.05))


@pytest.mark.parametrize("method", METHODS)
def test_threshold_separates_rejected_from_kept(method: str) -> None:
    random = np.random.default_rng(3)
    for size in (1, 2, 7, 60):
        for power in (1, 3, 8, 40):
            p = random.random(size) ** power
            np.testing.assert_array_equal(p <= threshold(p, method, 0.05), adjusted(p, method) <= 0.05)


@pytest.mark.parametrize("n", [2, 3, 5, 9])
def test_forest_threshold_equals_its_definition(n: int) -> None:
    random = np.random.default_rng(n)
    pairs = all_pairs(n)
    outcomes = set()
    for trial in range(150):
        p = random.random(len(pairs)) ** random.integers(1, 9)
        if trial % 3 == 0:
            p = np.round(p, 2)
        if trial % 4 == 0:
            p[random.random(p.size) < 0.3] = np.nan
        for alpha in (0.05, 0.3):
            found = forest_threshold(pairs, p, n, alpha)
            np.testing.assert_equal(found, forest_threshold_by_definition(pairs, p, n, alpha))
            outcomes.add(bool(np.isnan(found)))
    assert outcomes == {True, False}


def test_forest_threshold_without_a_tested_pair() -> None:
    assert np.isnan(forest_threshold(np.empty((0, 2), dtype=np.int64), np.empty(0), 1, 0.05))
    assert np.isnan(forest_threshold(all_pairs(3), np.full(3, np.nan), 3, 0.05))


def test_a_cycle_of_strong_pairs_does_not_pay_for_weak_ones() -> None:
    pairs = np.array([[0, 1], [1, 2], [0, 2], [2, 3]])
    p = np.array([1e-9, 1e-9, 1e-9, 0.04])
    assert adjusted(p, "bh")[3] <= 0.05
    assert forest_threshold(pairs, p, 4, 0.05) == 1e-9  # 4 x .04 / 3 edges exceeds .05
    assert forest_threshold(pairs, p, 4, 0.0534) == 0.04


def test_forest_of_nothing_but_chance_is_empty_at_the_promised_rate() -> None:
    random = np.random.default_rng(5)
    pairs = all_pairs(12)
    false = sum(not np.isnan(forest_threshold(pairs, random.random(66), 12, 0.05)) for _ in range(4000))
    assert 0.03 < false / 4000 < 0.05 + 3 * np.sqrt(0.05 * 0.95 / 4000)


def test_unknown_method_is_refused() -> None:
    one = np.ones(1)
    for function in (
        lambda: adjusted(one, "bonf"),
        lambda: threshold(one, "bonf", 0.05),
        lambda: reachable(one, 0.05, "bonf"),
    ):
        with pytest.raises(SettingError, match=r"^adjust is 'bonf'; it must be one of bh, holm, by, none$"):
            function()


def reachable_by_definition(least: np.ndarray, alpha: float) -> np.ndarray:
    """Try family sizes one after the other: the smallest K such that at most K tests could reach alpha / K."""
    size = 1
    while sum(p <= alpha / size for p in least) > size:
        size += 1
    return np.array([p <= alpha / size for p in least], dtype=bool)


@pytest.mark.parametrize("method", ["bh", "by", "holm"])
@given(st.lists(st.sampled_from([0.0, 1e-6, 0.001, 0.005, 0.01, 0.0125, 0.016, 0.025, 0.05, 0.2, 1.0, np.inf])))
def test_reachable_tests_equal_their_definition(method: str, values: list[float]) -> None:
    least = np.array(values)
    np.testing.assert_array_equal(reachable(least, 0.05, method), reachable_by_definition(least, 0.05))


def test_reachable_tests_equal_their_definition_in_large_families() -> None:
    random = np.random.default_rng(6)
    shares = []
    for _ in range(300):
        least = random.random(random.integers(1, 200)) ** random.integers(1, 12)
        alpha = random.choice([0.01, 0.05, 0.3])
        found = reachable(least, alpha, "holm")
        np.testing.assert_array_equal(found, reachable_by_definition(least, alpha))
        shares.append(found.mean())
    assert min(shares) == 0
    assert max(shares) == 1


def test_without_adjustment_a_test_need_only_reach_alpha() -> None:
    least = np.array([0.0, 0.05, 0.0500001, 1.0, np.inf])
    assert reachable(least, 0.05, "none").tolist() == [True, True, False, False, False]
    assert reachable(np.full(3, 0.04), 0.05, "none").all()
    assert not reachable(np.full(3, 0.04), 0.05, "holm").any()


def test_tests_that_can_always_be_rejected_stay() -> None:
    assert reachable(np.zeros(100_000), 0.05, "bh").all()
    assert reachable(np.append(np.zeros(100), np.full(900, 0.3)), 0.05, "bh").sum() == 100


def test_the_family_error_stays_below_alpha_and_rejections_are_gained() -> None:
    # 30 exact tests of 2 x 2 tables, margins drawn with each family, half of them too few records to matter.
    random = np.random.default_rng(7)
    families, alpha, tails = 3000, 0.2, {}

    def tail_of(first: int, down: int, across: int, total: int) -> float:
        table = (first, down - first, across - first, total - down - across + first)
        if table not in tails:
            tails[table] = exact_tail(np.array([table], dtype=np.int32), 2, 2)
        return tails[table]

    false = {"reachable": 0, "all": 0, "chosen by p": 0}
    gained = lost = 0
    for _ in range(families):
        margins = [(n // 2, n // 2, n) for n in random.choice([4, 6, 8, 30, 60], 30)]
        p = np.array([tail_of(int(random.hypergeometric(c, n - c, r)), r, c, n) for r, c, n in margins])
        least = np.array([tail_of(r, r, c, n) for r, c, n in margins])
        kept = np.where(reachable(least, alpha, "holm"), p, np.nan)
        chosen, every = adjusted(kept, "holm") <= alpha, adjusted(p, "holm") <= alpha
        false["reachable"] += chosen.any()
        false["all"] += every.any()
        seen = np.where(reachable(p, alpha, "holm"), p, np.nan)  # what must not be done
        false["chosen by p"] += (adjusted(seen, "holm") <= alpha).any()
        gained += np.count_nonzero(chosen & ~every)
        lost += np.count_nonzero(every & ~chosen)
    most = alpha + 3 * np.sqrt(alpha * (1 - alpha) / families)
    assert false["reachable"] / families <= most < false["chosen by p"] / families
    assert false["reachable"] > 1.2 * false["all"] > 0
    assert lost == 0
