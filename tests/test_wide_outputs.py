"""Outputs of tables with very many attributes: a few hundred lines, and words that say of how many."""

import copy
import json
from itertools import combinations
from typing import Any

import numpy as np
import pandas as pd
import pytest
from builders import compared
from smallrun import small_run

from bnx import listed_pairs
from bnx.cli.summary import summary
from bnx.documents import pair_results
from bnx.formats.dot import dot_source
from bnx.layers import parents_first
from bnx.picture import MANY_ARROWS, MANY_CHIPS, Arrow, Chip, Picture, Verdict, showing
from bnx.report import ATTRIBUTES_ON_PAGE, LINES_ON_PAGE, report_html
from bnx.results import draw_all
from bnx.structure_rows import EDGES_ON_PAGE


def crowd(attributes: int, arrows: list[tuple[int, int, float, Verdict]]) -> Picture:
    chips = tuple(Chip(f"word {k}", 2, 1 / (1 + (7 * k) % attributes)) for k in range(attributes))
    return Picture("tan", "topic", chips, tuple(Arrow(*one) for one in arrows))


def chain(attributes: int, verdict: Verdict = "gains") -> Picture:
    """Join neighbours, the later the stronger."""
    return crowd(attributes, [(k, k + 1, 0.001 * k, verdict) for k in range(attributes - 1)])


def test_150_attributes_are_all_drawn_and_151_are_not() -> None:
    shown = showing(chain(MANY_CHIPS))
    assert shown.chips == tuple(range(MANY_CHIPS))
    assert len(shown.arrows) == MANY_CHIPS - 1
    assert (shown.left_out, shown.chips_left_out) == ("", "")
    shown = showing(chain(MANY_CHIPS + 1))
    assert shown.chips == tuple(range(1, MANY_CHIPS + 1)), "the weakest arrow would join one more"
    assert shown.left_out == "149 of 150 arrows drawn; left out: weaker ones"
    assert shown.chips_left_out == "150 of 151 attributes drawn: those that these arrows join"


def test_everything_draws_everything() -> None:
    shown = showing(chain(400, "undecided"), everything=True)
    assert (len(shown.arrows), len(shown.chips), shown.left_out, shown.chips_left_out) == (399, 400, "", "")


def test_a_crowd_shows_clear_gains_first_and_then_the_strongest_up_to_forty() -> None:
    arrows: list[tuple[int, int, float, Verdict]] = [
        (2 * k, 2 * k + 1, 0.001 * k, "gains" if k in (3, 90) else "undecided") for k in range(200)
    ]
    shown = showing(crowd(1000, arrows))
    assert len(shown.arrows) == MANY_ARROWS
    assert [one.parent // 2 for one in shown.arrows] == [3, 90, *range(162, 200)], "in the order of the picture"
    assert shown.chips == tuple(end for one in shown.arrows for end in (one.parent, one.child))
    assert shown.left_out == "40 of 200 arrows drawn; left out: weaker ones"
    assert shown.chips_left_out == "80 of 1,000 attributes drawn: those that these arrows join"


def test_a_crowd_without_arrows_shows_those_that_say_most_about_the_class() -> None:
    picture = crowd(1001, [])
    shown = showing(picture)
    by_bits = sorted(range(1001), key=lambda k: -picture.chips[k].bits)
    assert shown.chips == tuple(sorted(by_bits[:MANY_CHIPS]))
    text = dot_source(picture)
    assert "150 of 1,001 attributes drawn: those that share most bits with topic" in text
    assert "parent of all 1,001 attributes, of which 150 are in the frame" in text
    assert text.count('class="chip"') == MANY_CHIPS


def test_a_crowd_is_drawn_in_its_time() -> None:
    """Ten thousand attributes with two parents each; drawn in full, no engine would come to an end."""
    random = np.random.default_rng(2)
    arrows: list[tuple[int, int, float, Verdict]] = [
        (int(parent), child, float(random.exponential(0.02)), "gains" if random.random() < 0.5 else "loses")
        for child in range(2, 10_000)
        for parent in random.choice(child, 2, replace=False)
    ]
    pictures, notes = draw_all({"kdb2": dot_source(crowd(10_000, arrows))}, 1)
    assert notes == []
    assert pictures["kdb2"].count("bits shared with topic</title>") <= MANY_CHIPS
    assert len(pictures["kdb2"]) < 1_000_000


def test_parents_come_first_and_otherwise_the_order_is_kept() -> None:
    random = np.random.default_rng(7)
    for _ in range(50):
        hidden = random.permutation(12).tolist()
        parents = {
            hidden[k]: random.choice(hidden[:k], min(k, int(random.integers(3))), replace=False).tolist()
            for k in range(12)
        }
        members = random.permutation(12).tolist()
        placed: list[int] = []
        while len(placed) < 12:  # by definition: the first that is free
            placed.append(next(one for one in members if one not in placed and set(parents[one]) <= set(placed)))
        assert parents_first(parents, members) == placed


def test_a_parent_that_is_named_twice_is_waited_for_once() -> None:
    assert parents_first({1: [0, 0]}, [1, 0]) == [0, 1]


def test_the_pairs_that_are_written_are_those_that_sorting_all_would_choose(monkeypatch: pytest.MonkeyPatch) -> None:
    random = np.random.default_rng(5)
    hidden = random.integers(0, 2, 500)
    columns = {
        f"a{k}": np.where(random.random(500) < share, hidden, random.integers(0, 2, 500))
        for k, share in enumerate((0.7, 0.6, 0.8, 0.7, 0.0, 0.0, 0.0))
    }
    frame = pd.DataFrame(columns | {"grade": random.integers(0, 2, 500)}).astype(str)
    found = compared(frame, "grade", structures=("naive", "tan"), folds=3, smoothing="laplace:1")
    every = pair_results(found, everything=True)
    drawn = {frozenset((found.names[edge.parent], found.names[edge.child])) for edges in found.edges for edge in edges}
    order = {frozenset(ends): place for place, ends in enumerate(combinations(found.names, 2))}
    rejected = {
        frozenset((found.names[i], found.names[j]))
        for i, j, yes in zip(found.pairs.left, found.pairs.right, found.judged.judgement.rejected, strict=True)
        if yes
    }
    assert drawn - rejected
    assert rejected - drawn
    for most in (1, 4, len(drawn), 10, 15, 20, len(every) - 1):
        monkeypatch.setattr(listed_pairs, "PAIRS_SHOWN", most)

        def rank(one: Any) -> tuple[int, float, int]:
            ends = frozenset((one.a, one.b))
            return (0 if ends in drawn else 1 if ends in rejected else 2), -one.bits, order[ends]

        wanted = sorted(sorted(every, key=rank)[:most], key=lambda one: (-one.bits, order[frozenset((one.a, one.b))]))
        assert [(one.a, one.b) for one in pair_results(found)] == [(one.a, one.b) for one in wanted]


def widened(attributes: int) -> dict[str, Any]:
    """Blow a small document up to very many attributes, edges, columns left out and warnings."""
    document = copy.deepcopy(small_run().comparison)
    names = [f"word_{k}" for k in range(attributes)]
    document["attributes"] = names
    document["schema"] = [
        {**document["schema"][0], "name": name, "bits_with_class": k / attributes} for k, name in enumerate(names)
    ]
    one = next(entry for entry in document["structures"] if entry["name"] == "tan")
    one["edges"] = [
        {**one["edges"][0], "parent": names[k // 2], "child": names[k], "bits": k / 1e5} for k in range(1, attributes)
    ]
    for entry in document["structures"]:
        entry["edges"] = one["edges"] if entry is one else []
    document |= {"pairs": [], "pair_tables": []}
    document["left_out"] = [
        {"name": f"c{k}", "reason": ("every cell is blank", "it is the class")[k % 2]} for k in range(1500)
    ]
    document["warnings"] = [f"warning {k}" for k in range(2000)]
    return document


def test_the_page_of_a_wide_table_is_short_and_says_what_it_leaves_out() -> None:
    document = widened(10_000)
    page = report_html(document, {})
    assert len(page) < 2_500_000
    assert f"The {EDGES_ON_PAGE} edges of most bits; tan.json holds all 9,999." in page
    assert '<bdi class="name">word_9999</bdi>' in page
    assert '<bdi class="name">word_5000</bdi>' not in page
    assert f"The {ATTRIBUTES_ON_PAGE} attributes that share most bits with " in page
    assert "comparison.json describes all 10,000." in page
    assert f"<li>warning {LINES_ON_PAGE - 1}</li><li>and 1,900 more, all of them in comparison.json</li>" in page
    assert f"warning {LINES_ON_PAGE}<" not in page
    assert "<li>and 1,400 more columns, all of them in comparison.json</li>" in page
    assert "The table holds the strongest edges." in page


def test_the_page_of_a_small_table_leaves_nothing_out() -> None:
    page = report_html(small_run().comparison, {})
    for words in ("of most bits;", "comparison.json describes", "more, all of them", "more columns"):
        assert words not in page
    assert "The table holds every edge." in page


def test_the_screen_groups_columns_left_out_when_they_are_many() -> None:
    document = widened(20)
    shown = " ".join(summary(document, "x").split())
    assert "left out: c0, c2, c4, c6, c8, c10, c12, c14 and 742 more (every cell is blank)" in shown
    assert "left out: c1, c3, c5, c7, c9, c11, c13, c15 and 742 more (it is the class)" in shown
    document["left_out"] = [{"name": f"c{k}", "reason": f"{k} different values in 9 rows"} for k in range(30)]
    shown = summary(document, "x")
    assert "left out: c7 (7 different values in 9 rows)" in shown
    assert "left out: c8 " not in shown
    assert "left out for 22 more reasons: see comparison.json" in shown


def test_documents_of_pairs_are_plain_values() -> None:
    pair = small_run().comparison["pairs"][0]
    assert json.loads(json.dumps(pair)) == pair
