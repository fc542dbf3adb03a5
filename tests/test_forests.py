"""Forests over many attributes against a second library, and what the quick tests of wide tables rest on."""

from itertools import pairwise

import networkx as nx
import numpy as np
import pytest
from builders import started
from hypothesis import given, settings
from hypothesis import strategies as st
from scipy.special import gammaincc
from test_wide import BLOCKS, rare_table, sets_of

from bnx.dependence import measure
from bnx.independence import Statistics
from bnx.kernels.contingency import X2_THIRD, X2_VARIANCE, one_table
from bnx.kernels.forests import bounds_to_root, directed, grow, joins_in_order
from bnx.views import make_view
from bnx.wide import _deviates
from bnx.wide_tables import joint_tables, margins_of, pack, sums_of


def random_edges(seed: int, n: int, edges: int) -> tuple[np.ndarray, np.ndarray, np.ndarray]:
    """Draw edges with falling strengths, some equal; an edge may turn up twice."""
    random = np.random.default_rng(seed)
    left, right = random.integers(0, n, (2, edges))
    apart = left != right
    strength = -np.sort(-random.integers(0, 20, int(apart.sum())).astype(float))
    return left[apart], right[apart], strength


@settings(max_examples=60, deadline=None)
@given(st.integers(0, 2**32), st.integers(2, 30), st.integers(0, 90))
def test_a_forest_and_its_weakest_links(seed, n, edges):
    left, right, strength = random_edges(seed, n, edges)
    parent, link = np.empty(n, np.int32), np.empty(n)
    kept = grow(left, right, strength, parent, link)
    whole = nx.Graph()
    whole.add_nodes_from(range(n))
    for a, b, weight in zip(left.tolist(), right.tolist(), strength.tolist(), strict=True):
        if not whole.has_edge(a, b):
            whole.add_edge(a, b, weight=weight)
    forest = nx.Graph()
    forest.add_nodes_from(range(n))
    forest.add_weighted_edges_from(zip(left[kept].tolist(), right[kept].tolist(), strength[kept].tolist(), strict=True))
    best = nx.maximum_spanning_tree(whole)
    assert nx.is_forest(forest)
    assert forest.size("weight") == best.size("weight")
    assert forest.number_of_edges() == best.number_of_edges() == (joins_in_order(left, right, n)[-1:].sum())
    bound = bounds_to_root(parent, link)
    largest = max(map(len, nx.connected_components(forest)))
    assert np.isfinite(bound).sum() + np.isposinf(bound).sum() == largest
    root = int(np.argmax(bound))
    for node in nx.node_connected_component(forest, root):
        path = nx.shortest_path(forest, root, node)
        links = [forest.edges[one, other]["weight"] for one, other in pairwise(path)]
        assert bound[node] == min(links, default=np.inf)


@settings(max_examples=60, deadline=None)
@given(st.integers(0, 2**32), st.integers(1, 30), st.integers(0, 60))
def test_trees_are_directed_away_from_the_first_of_their_attributes(seed, n, edges):
    left, right, strength = random_edges(seed, n, edges)
    kept = grow(left, right, strength, np.empty(n, np.int32), np.empty(n))
    order = np.random.default_rng(seed).permutation(n)
    parents = directed(left[kept], right[kept], order).tolist()
    forest = nx.Graph(list(zip(left[kept].tolist(), right[kept].tolist(), strict=True)))
    forest.add_nodes_from(range(n))
    expected = [-1] * n
    for tree in nx.connected_components(forest):
        root = min(tree, key=order.tolist().index)
        for parent, child in nx.bfs_edges(forest, root):
            expected[child] = parent
    assert parents == expected


@pytest.mark.parametrize("records", [*range(3, 40), 200, 2_000, 60_000])
def test_the_skewness_of_x2_is_below_twice_the_root_of_the_records(records):
    """The quick test of wide tables takes it for granted; sums of strata are less skewed than the most skewed one."""
    margins = sorted({*range(1, min(records, 25)), records // 3, records // 2, records - 1} - {0})
    for across in margins:
        for down in margins:
            low = max(0, down + across - records)
            cells = [low, down - low, across - low, records - down - across + low]
            found = one_table(np.array([cells], np.int32), 2, 2)
            if found[X2_VARIANCE] > 1e-9:
                assert found[X2_THIRD] / found[X2_VARIANCE] ** 1.5 <= 2 * np.sqrt(records)


@pytest.mark.parametrize("p", [1e-9, 5e-5, 1e-3, 0.2])
def test_the_least_deviates_of_small_p_by_moments(p):
    skewness, deviates = _deviates(p)
    for s, above in zip(
        np.logspace(-3, 4, 3_001), np.interp(np.logspace(-3, 4, 3_001), skewness, deviates), strict=True
    ):
        shape = 4 / s**2
        tail = gammaincc(shape, max(0.0, shape + 2 * (above - 1e-3 * (1 + abs(above))) / s))
        assert tail >= p * (1 - 1e-9)


def test_the_information_of_a_cell_is_below_the_bounds_of_the_scan():
    x = np.concatenate([np.linspace(-1 + 1e-9, 0, 2_001), np.logspace(-9, 6, 2_001)])
    information = (1 + x) * np.log1p(x) - x
    assert (information <= x**2 / 2 - x**3 / 6 + x**4 / 3 + 1e-15).all()
    assert (information <= x**2).all()


@pytest.mark.parametrize("seed", range(5))
def test_planes_sums_and_margins_count_what_the_codes_hold(seed):
    table = rare_table(seed, (3, 64, 65, 300, 500)[seed], 25, 2 + seed % 3 if seed else 2)
    engine = started(table, np.random.default_rng(seed).integers(0, BLOCKS, len(table.target)), BLOCKS)
    trainings = sets_of(engine, make_view(table.schema, {}), seed, 6)
    left, right = np.triu_indices(25, 1)
    by_group = pack(engine).counts(left, right)
    sums = sums_of(np.array([training.mask for training in trainings]))
    nodes = np.zeros((sums.nodes, len(left), engine.classes), np.int64)
    nodes[:BLOCKS] = by_group.reshape(len(left), BLOCKS, -1).transpose(1, 0, 2)
    for node, one, other in sums.plan:
        nodes[node] = nodes[one] + nodes[other]
    margins = margins_of(engine, trainings, frozenset({(0, 3)}))
    for s, (_, pairs) in enumerate(measure(engine, trainings)):
        own = nodes[sums.wanted[s]]
        records, ones = margins.records[s].astype(np.int64), margins.ones[s]
        tables = joint_tables(own, ones[:, left].T, ones[:, right].T, records)
        rows = np.array([one_table(np.ascontiguousarray(one), 2, 2) for one in tables])
        assert np.array_equal(rows, pairs.statistics, equal_nan=True)
        varies = Statistics.of(pairs.statistics).varies
        assert margins.testable[s] == varies.sum() - varies[(left == 0) & (right == 3)].sum()
