"""The committed cold-chain table is what its script draws, and the truth beside it is the truth."""

import itertools
import json
import sys
from pathlib import Path

import networkx as nx
import numpy as np
import pytest

DATASETS = Path(__file__).parent.parent / "datasets"
sys.path.insert(0, str(DATASETS))

import make_cold_chain as demo  # noqa: E402  the script is no package: its folder must be on the path first

TRUTH = json.loads((DATASETS / "cold_chain_planted.json").read_text(encoding="utf-8"))


def planted_graph() -> nx.DiGraph:
    graph = nx.DiGraph([(edge["parent"], edge["child"]) for edge in TRUTH["edges"] + TRUTH["edges_below_detectable"]])
    graph.add_edges_from((TRUTH["class"], name) for name in TRUTH["class_is_parent_of"])
    return graph


def test_the_script_reproduces_the_committed_table_byte_for_byte() -> None:
    assert demo.as_csv(demo.draw()).encode() == (DATASETS / "cold_chain.csv").read_bytes()


def test_the_script_reproduces_the_planted_truth_byte_for_byte() -> None:
    assert demo.as_json(demo.planted()).encode() == (DATASETS / "cold_chain_planted.json").read_bytes()


def test_separation_agrees_with_networkx_for_every_pair_and_up_to_two_given() -> None:
    graph = planted_graph()
    for a, b in itertools.combinations(demo.COLUMNS, 2):
        others = [name for name in demo.COLUMNS if name not in (a, b)]
        for size in range(3):
            for given in itertools.combinations(others, size):
                expected = nx.is_d_separator(graph, {a}, {b}, {demo.TARGET, *given})
                assert demo.separated(a, b, given) == expected, (a, b, given)


def test_separated_pairs_share_no_bits_and_joined_pairs_do() -> None:
    for a, b in itertools.combinations(demo.COLUMNS, 2):
        if demo.separated(a, b):
            assert demo.bits(a, b) == pytest.approx(0.0, abs=1e-12)
        else:
            assert demo.bits(a, b) > 1e-10


def test_one_given_attribute_between_two_makes_the_bits_vanish() -> None:
    assert demo.separated("route", "door_alarm", ["dock_wait"])
    assert demo.bits("route", "door_alarm") > 0.005
    assert demo.bits("route", "door_alarm", ["dock_wait"]) == pytest.approx(0.0, abs=1e-12)


def test_exact_bits_agree_with_a_large_sample() -> None:
    rows = 400_000
    columns = demo.draw(rows, seed=1)
    target = np.unique(columns[demo.TARGET], return_inverse=True)[1]
    for parent, child in (("route", "dock_wait"), ("reefer_age", "power_cut"), ("season", "load_temp")):
        a = np.unique(columns[parent], return_inverse=True)[1]
        b = np.unique(columns[child], return_inverse=True)[1]
        counts = np.zeros((3, a.max() + 1, b.max() + 1))
        np.add.at(counts, (target, a, b), 1)
        p = counts / rows
        independent = p.sum(2, keepdims=True) * p.sum(1, keepdims=True) / p.sum((1, 2), keepdims=True)
        assert (p * np.log2(p / independent)).sum() == pytest.approx(demo.bits(parent, child), abs=0.002)


def test_planted_strengths_spread_and_two_lie_below_what_the_rows_can_show() -> None:
    strengths = [edge["bits"] for edge in TRUTH["edges"]]
    assert len(strengths) == 10
    assert min(strengths) > 0.01
    assert max(strengths) < 0.15
    assert [0.0003 <= edge["bits"] <= 0.0006 for edge in TRUTH["edges_below_detectable"]] == [True, True]


def test_every_strong_parent_is_more_relevant_than_its_child() -> None:
    relevance = TRUTH["bits_with_class"]
    for edge in TRUTH["edges"]:
        assert relevance[edge["parent"]] > relevance[edge["child"]] + 0.015


def test_blanks_lie_only_where_the_truth_says() -> None:
    columns = demo.draw(20_000, seed=3)
    for name, cells in columns.items():
        assert cells.count("") / 20_000 == pytest.approx(TRUTH["blank_share"].get(name, 0.0), abs=0.005)


def test_identifier_is_unique_and_shares_of_the_class_are_near_the_planted_ones() -> None:
    columns = demo.draw()
    assert len(set(columns[demo.IDENTIFIER])) == demo.ROWS
    for level, share in TRUTH["class_shares"].items():
        assert columns[demo.TARGET].count(level) / demo.ROWS == pytest.approx(share, abs=0.015)


def test_numeric_attributes_have_many_values() -> None:
    columns = demo.draw()
    for name in TRUTH["bands"]:
        values = {float(cell) for cell in columns[name] if cell}
        assert len(values) > 50
        assert min(values) >= TRUTH["bands"][name][0]
        assert max(values) < TRUTH["bands"][name][-1]


@pytest.mark.parametrize(("rows", "seed"), [(-1, 1), (10, -1)])
def test_negative_rows_or_seed_are_refused(rows: int, seed: int) -> None:
    with pytest.raises(ValueError, match="must not be negative"):
        demo.draw(rows, seed)


def test_another_table_never_overwrites_the_committed_one(monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(sys, "argv", ["make_cold_chain.py", "--seed", "5"])
    with pytest.raises(SystemExit):
        demo.main()
