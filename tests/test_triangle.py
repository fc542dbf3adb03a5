"""The triangle of pairs: every pair once, blocks together, area of marks in proportion, shapes told at any size."""

import json
import re
from typing import Any

import pytest
from readpage import Page
from smallrun import small_run

from bnx.report import report_html
from bnx.triangle import shortened, triangle, triangle_block

VERDICTS = ("dependent", "detected, but negligible", "negligible", "not enough data")


def listed(a: str, b: str, bits: float, verdict: str = "dependent", twice: float | None = 0.0) -> dict[str, Any]:
    return {"a": a, "b": b, "bits": bits, "marginal_bits": 2 * bits, "double_counted_bits": twice, "verdict": verdict}


def test_the_triangle_holds_every_pair_once_and_blocks_stand_together() -> None:
    names = [f"{block}{number}" for number in range(4) for block in "ab"]
    pairs = [listed(a, b, 0.2 if a[0] == b[0] else 0.02) for row, a in enumerate(names) for b in names[row + 1 :]]
    chart = triangle({"attributes": names, "pairs": pairs}, frozenset({frozenset(("a0", "a1"))}))
    assert chart is not None
    order = [one.full for one in chart.names]
    assert len({name[0] for name in order[:4]}) == 1
    assert chart.pairs == {frozenset((one["a"], one["b"])) for one in pairs}
    assert len({(mark.x, mark.y) for mark in chart.marks}) == len(pairs)
    for mark in chart.marks:
        assert {order[mark.row], order[mark.column]} == {mark.a, mark.b}
        assert mark.column * chart.cell < mark.x < (mark.column + 1) * chart.cell
        assert mark.row * chart.cell < mark.y < (mark.row + 1) * chart.cell
    assert len(chart.frames) == 1
    sides = sorted({mark.sides[0] for mark in chart.marks})
    assert (sides[-1] / sides[0]) ** 2 == pytest.approx(10, rel=0.05)
    assert [measure.label for measure in chart.measures] == [
        "bits given the class",
        "bits without the class",
        "counted twice, bits",
    ]


def test_a_measure_that_no_pair_has_is_not_offered() -> None:
    chart = triangle({"attributes": ["a", "b"], "pairs": [listed("a", "b", 0.1, twice=None)]}, frozenset())
    assert chart is not None
    assert [measure.key for measure in chart.measures] == ["bits", "marginal_bits"]


@pytest.mark.parametrize("size", [3, 16, 17, 60])
def test_marks_stay_inside_their_cells_and_none_is_too_small_to_tell(size: int) -> None:
    names = [f"n{number:02d}" for number in range(size)]
    pairs = [
        listed(a, b, 1 / (1 + row + column) ** 3, VERDICTS[(row + column) % 4])
        for row, a in enumerate(names)
        for column, b in enumerate(names[row + 1 :])
    ]
    chart = triangle({"attributes": names, "pairs": pairs}, frozenset())
    assert chart is not None
    assert chart.is_numbered == (size <= 16)
    assert chart.width <= 1104
    assert chart.cell >= 12
    least = {"full": 7.5, "hollow": 8.5, "dot": 4.4, "open": 8.5}
    for mark in chart.marks:
        assert least[mark.shape] <= mark.sides[0] <= chart.cell - 2
        assert bool(mark.numbers[0]) <= chart.is_numbered
    assert {mark.shape for mark in chart.marks} <= set(least)


def test_above_sixty_attributes_those_of_the_strongest_pairs_are_taken() -> None:
    names = [f"n{number:02d}" for number in range(70)]
    pairs = [listed(a, b, 0.001 * (row + 1), "negligible") for row, a in enumerate(names) for b in names[row + 1 :]]
    chart = triangle({"attributes": names, "pairs": pairs}, frozenset())
    assert chart is not None
    assert sorted(one.full for one in chart.names) == names[10:]
    assert (chart.attributes_left_out, chart.pairs_not_listed, len(chart.marks)) == (10, 0, 60 * 59 // 2)


def test_two_attributes_and_one() -> None:
    chart = triangle({"attributes": ["a", "b"], "pairs": [listed("a", "b", 0.0)]}, frozenset())
    assert chart is not None
    assert len(chart.marks) == 1
    assert triangle({"attributes": ["alone"], "pairs": []}, frozenset()) is None


def test_wide_names_are_cut_before_the_edge_and_short_ones_stay() -> None:
    assert shortened("dock_wait") == "dock_wait"
    assert shortened("") == ""
    for sign in ("W", "i", "\u5c71", "\u05d0"):
        cut = shortened(300 * sign)
        assert cut.endswith("\u2026")
        assert 10 <= len(cut) <= 24
    assert len(shortened(300 * "\u5c71")) < len(shortened(300 * "i"))


def test_the_script_is_told_every_mark_with_its_row_of_the_ledger() -> None:
    document = small_run().comparison
    chart = triangle(document, frozenset())
    assert chart is not None
    place = {pair: number for number, pair in enumerate(sorted(chart.pairs, key=sorted))}
    text = triangle_block(chart, place)
    told = json.loads(re.sub(r"^<script[^>]*>|</script>$", "", text))
    assert [row for _, _, row in told["marks"]] == [place[frozenset((mark.a, mark.b))] for mark in chart.marks]
    for number, measure in enumerate(told["measures"]):
        assert measure["sides"] == [f"{mark.sides[number]:g}" for mark in chart.marks]
    by_pair = {frozenset((pair["a"], pair["b"])): pair for pair in document["pairs"]}
    keys = ("bits", "marginal_bits", "double_counted_bits")
    for key, measure in zip(keys, told["measures"], strict=True):
        for mark, number in zip(chart.marks, measure["numbers"], strict=True):
            pair = by_pair[frozenset((mark.a, mark.b))]
            exact = 0.0 if key == "double_counted_bits" and pair["verdict"] != "dependent" else pair[key]
            assert float(number or 0) == pytest.approx(exact, abs=5.01e-4)


def test_every_mark_stands_on_the_page_with_its_words() -> None:
    run = small_run()
    page = Page(report_html(run.comparison, {}))
    marks = [one for tag, one in page.elements if tag == "use" and "translate" in one.get("transform", "")]
    for pair in run.comparison["pairs"]:
        words = f": {pair['bits']:.4f} bits, {pair['verdict']}"
        assert f"{pair['a']} ~ {pair['b']}{words}" in page.text or f"{pair['b']} ~ {pair['a']}{words}" in page.text
    assert len(marks) >= len(run.comparison["pairs"])
