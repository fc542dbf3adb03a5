"""False edges are rare among those that tested structures draw, and most true ones are found."""

from functools import cache

import networkx as nx
import numpy as np
import pytest
from builders import coded, started, whole
from simulations.drawn_edges import PROCESSES, STRUCTURES, Rates, draw_many, draw_one, false_edges, rates, share
from simulations.planted import CLASS, CLIQUE, DESIGNS, HIDDEN, LEVELS, TREE, Planted, graph_of

from bnx.dependence import measure
from bnx.independence import Statistics, p_values
from bnx.multiplicity import adjusted
from bnx.structure import Structure

FULL = pytest.param(1000, marks=pytest.mark.simulations)


@cache
def measured(design: str, rows: int, tables: int) -> dict[str, Rates]:
    processes = PROCESSES if tables > 200 else 1  # a process takes seconds to start
    return {name: rates(drawn) for name, drawn in draw_many(design, rows, tables, processes).items()}


@pytest.mark.parametrize("tables", [200, FULL])
@pytest.mark.parametrize("rows", [1000, 300])
@pytest.mark.parametrize("design", DESIGNS)
def test_the_false_share_stays_within_the_promise(design: str, rows: int, tables: int) -> None:
    for name, found in measured(design, rows, tables).items():
        assert found.false.mean <= 0.05 + 2 * found.false.error, (name, found)
        if design == "independent":
            ceiling = 0.05 + 2 * np.sqrt(0.05 * 0.95 / tables)
            assert found.any_edge.mean <= ceiling, (name, found)


@pytest.mark.parametrize("tables", [200, FULL])
def test_most_of_what_is_there_is_found(tables: int) -> None:
    tree, clique = measured("tree of ten", 1000, tables), measured("seven with one cause", 1000, tables)
    assert tree["tan-tested"].found.mean > 0.95
    assert tree["kdb2-tested"].found.mean > 0.8
    assert min(clique[name].joined.mean for name in STRUCTURES) > 0.9


def test_a_higher_level_breaks_the_promise() -> None:
    found = rates(draw_many("independent", 300, 200, alpha=0.2)["tan-tested"])
    assert found.any_edge.mean > 0.05 + 4 * np.sqrt(0.05 * 0.95 / 200)


def false_share_by_plain_bh(planted: Planted) -> float:
    """Take the strongest forest of the pairs that pass Benjamini & Hochberg's steps, as a gate must not."""
    table = coded(planted.codes, planted.target, LEVELS, 3)
    engine = started(table)
    pairs = measure(engine, [whole(engine, table)])[0][1]
    stats = Statistics.of(pairs.statistics)
    passed = adjusted(p_values(stats).p, "bh") <= 0.05
    ends = zip(pairs.left[passed].tolist(), pairs.right[passed].tolist(), stats.bits[passed].tolist(), strict=True)
    joined: nx.Graph[int] = nx.Graph()
    joined.add_weighted_edges_from(ends)
    forest = list(nx.maximum_spanning_edges(joined, data=False))
    false = sum(nx.is_d_separator(planted.graph, {a}, {b}, {CLASS}) for a, b in forest)
    return false / max(1, len(forest))


def test_plain_bh_over_pairs_breaks_the_promise() -> None:
    """A forest discards true pairs that are redundant and keeps false ones (Katsevich, Sabatti & Bogomolov 2021)."""
    design = DESIGNS["seven with one cause"]
    found = share([false_share_by_plain_bh(design(1000, np.random.default_rng(seed))) for seed in range(200)])
    assert found.mean > 0.05 + 4 * found.error


def test_an_edge_is_false_if_what_was_given_separates_its_ends() -> None:
    chain = graph_of([(0, 1), (1, 2)])
    assert false_edges(Structure("", ((), (0,), (1,))), chain) == 0
    assert false_edges(Structure("", ((), (), (0,))), chain) == 0  # dependent through 1, which is not given
    assert false_edges(Structure("", ((), (), (1, 0))), chain) == 1  # 1 is given when 0 is taken
    assert false_edges(Structure("", ((), (), (0, 1))), chain) == 0
    assert false_edges(Structure("", ((), (), (), (0,))), chain) == 1  # 3 stands alone
    meeting = graph_of([(0, 2), (1, 2)])
    assert false_edges(Structure("", ((), (0,), ())), meeting) == 1
    assert false_edges(Structure("", ((), (2, 0), ())), meeting) == 0  # the common child is given
    hidden = graph_of([(CLASS, HIDDEN), (HIDDEN, 0), (HIDDEN, 1), (HIDDEN, 2)])
    assert false_edges(Structure("", ((), (0,), (0, 1))), hidden) == 0


def test_designs_plant_what_they_say() -> None:
    for name, design in DESIGNS.items():
        planted = design(50, np.random.default_rng(1))
        assert planted.codes.shape == (15, 50)
        assert nx.is_directed_acyclic_graph(planted.graph)
        members = {attribute for pair in planted.related for attribute in pair}
        assert members == set(planted.members)
        separated = nx.is_d_separator(planted.graph, {TREE[0]}, {TREE[1]}, {CLASS})
        assert separated == (name != "tree of ten")
        if name == "seven with one cause":
            assert not nx.is_d_separator(planted.graph, {CLIQUE[0]}, {CLIQUE[-1]}, {CLASS, *CLIQUE[1:-1]})


def test_the_same_seed_draws_the_same_table_and_processes_change_nothing() -> None:
    assert draw_one("tree of ten", 300, 1, {}, 4) == draw_one("tree of ten", 300, 1, {}, 4)
    assert draw_many("tree of ten", 300, 6, 2) == draw_many("tree of ten", 300, 6, 1)
    assert draw_many("tree of ten", 300, 6) != draw_many("tree of ten", 300, 6, seed=2)


def test_a_share_has_the_error_of_a_mean() -> None:
    found = share([0, 1, 0, 1])
    assert found.mean == 0.5
    assert found.error == pytest.approx(np.sqrt(1 / 3) / 2)
