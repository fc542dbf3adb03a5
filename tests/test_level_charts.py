"""The drawing of a numeric column: bars whose area is what was counted, cut points where they belong."""

import math
import re
from itertools import pairwise
from typing import Any

import numpy as np
import pytest

from bnx.level_charts import FEW_RECORDS, MOST_PANELS, LevelChart, Panel, level_chart

BAR = re.compile(r"M([-\d.]+) ([-\d.]+)V([-\d.]+)H([-\d.]+)V[-\d.]+z")
CLASSES = ("late", "in time")


def distribution(edges: list[float], rows: list[list[int]]) -> dict[str, Any]:
    return {"lowest": edges[0], "highest": edges[-1], "edges": edges, "rows": rows}


def drawn(edges: list[float], rows: list[list[int]], cuts: tuple[float, ...] = (), **more: Any) -> LevelChart:
    chart = level_chart(more.get("name", "wait"), more.get("classes", CLASSES), cuts, distribution(edges, rows))
    assert chart is not None
    return chart


def bars(panel: Panel) -> list[tuple[float, float, float]]:
    """Read the left and right end and the height of each bar, in pixels."""
    return [(float(left), float(right), float(low) - float(high)) for left, low, high, right in BAR.findall(panel.bars)]


def test_the_area_of_a_bar_is_the_share_of_its_class() -> None:
    rows = [[10, 60], [40, 30], [30, 90], [0, 20]]
    chart = drawn([0.0, 1.0, 3.0, 4.0, 5.0], rows)
    for number, panel in enumerate(chart.panels):
        areas = [(right - left) * height for left, right, height in bars(panel)]
        counts = [row[number] for row in rows if row[number]]
        assert len(areas) == len(counts)
        assert np.array(areas) / sum(areas) == pytest.approx(np.array(counts) / sum(counts), abs=0.01)
    assert not chart.clipped
    assert chart.beyond == ()


def test_classes_of_any_size_stand_on_one_scale() -> None:
    """Two classes spread alike are drawn alike, however many records they have."""
    chart = drawn([0.0, 1.0, 2.0, 3.0], [[40, 400], [80, 800], [40, 400]])
    heights = [[height for _, _, height in bars(panel)] for panel in chart.panels]
    assert heights[0] == pytest.approx(heights[1], abs=0.11)
    assert [panel.rows for panel in chart.panels] == ["160 records", "1,600 records"]


def test_cut_points_stand_at_the_edges_of_bars_and_bear_their_values() -> None:
    edges = [0.0, 0.25, 0.5, 0.75, 1.0]
    chart = drawn(edges, [[40, 40]] * 4, (0.25, 0.75))
    ends = {right for _, right, _ in bars(chart.panels[0])}
    assert [cut.value for cut in chart.cuts] == ["0.25", "0.75"]
    assert all(cut.x in ends and cut.words_y > 0 for cut in chart.cuts)
    assert chart.cuts_without_words == 0
    assert chart.words == "wait: how its values are spread in each class, cut at 0.25, 0.75"
    assert drawn(edges, [[40, 40]] * 4).words.endswith("not cut")


def test_values_of_cut_points_never_lie_on_one_another() -> None:
    edges = [k / 40 for k in range(41)]
    cuts = tuple(edges[3:36])
    chart = drawn(edges, [[40, 40]] * 40, cuts)
    assert len(chart.cuts) == len(cuts)
    lines = {cut.words_y for cut in chart.cuts if cut.words_y}
    assert len(lines) > 1
    for line in lines:
        own = [cut for cut in chart.cuts if cut.words_y == line]
        assert all(two.words_x - one.words_x > 6 * len(one.value) for one, two in pairwise(own))
    assert chart.cuts_without_words == sum(not cut.words_y for cut in chart.cuts)
    assert min(lines) > 8
    assert max(lines) < chart.panels[0].top


@pytest.mark.parametrize(
    ("low", "high"), [(0, 1), (-3, 4), (1e-9, 3e-9), (1e9, 1e9 + 7), (-1e299, 1e299), (1990, 2024), (0.1, 1e6)]
)
def test_ticks_are_round_and_inside(low: float, high: float) -> None:
    edges = np.linspace(low, high, 11).tolist()
    chart = drawn(edges, [[40, 40]] * 10)
    assert 3 <= len(chart.ticks) <= 9
    assert len({text for _, text in chart.ticks}) == len(chart.ticks)
    for x, text in chart.ticks:
        assert chart.left - 0.1 <= x <= chart.right + 0.1
        value = low + (high - low) * (x - chart.left) / (chart.right - chart.left)
        assert float(text) == pytest.approx(value, abs=(high - low) * 0.002, rel=1e-5)


def test_long_outer_bins_are_drawn_shorter_and_this_is_said() -> None:
    edges = [-5000.0, *range(11), 1e6]
    chart = drawn([float(one) for one in edges], [[40, 40]] * 12)
    assert chart.beyond == ("The first bar reaches down to -5000.", "The last bar reaches up to 1e+06.")
    assert len(chart.breaks) == 2
    widths = [right - left for left, right, _ in bars(chart.panels[0])]
    assert min(widths[1:-1]) > 0.8 * max(widths[1:-1])
    assert all(len(bars(panel)) == 12 for panel in chart.panels)


def test_one_bar_that_towers_is_cut_and_this_is_said() -> None:
    chart = drawn([0.0, 1.0, 2.0, 3.0, 4.0], [[900, 900], [40, 30], [50, 60], [10, 10]])
    assert chart.clipped
    assert all(panel.cut for panel in chart.panels)
    heights = [height for _, _, height in bars(chart.panels[0])]
    assert heights[0] < 2 * heights[2]


def test_many_rows_of_one_value_are_seen_however_narrow_their_bin() -> None:
    edges = [0.0, 0.001, *(float(k) for k in range(1, 9))]
    chart = drawn(edges, [[500, 500], *([50, 60] for _ in range(8))], (0.001,))
    for panel in chart.panels:
        left, right, height = bars(panel)[0]
        assert (left, round(height)) == (chart.left, 42)
        assert right - left >= 1.5
        assert panel.cut


def test_a_class_of_few_records_is_marked_and_sets_no_scale() -> None:
    rows = [[0, 1000], [FEW_RECORDS - 1, 1000], [0, 1000]]
    chart = drawn([0.0, 1.0, 2.0, 3.0], rows)
    assert [panel.few for panel in chart.panels] == [True, False]
    assert [height for _, _, height in bars(chart.panels[1])] == pytest.approx([42] * 3, abs=1.5)
    assert [height for _, _, height in bars(chart.panels[0])] == [42]
    assert not chart.clipped
    assert chart.panels[0].rows == "29 records"


def test_the_largest_of_many_classes_are_drawn_in_their_order() -> None:
    classes = tuple(f"class {k}" for k in range(20))
    rows = [[100 + 7 * k % 20 for k in range(20)] for _ in range(3)]
    chart = drawn([0.0, 1.0, 2.0, 3.0], rows, classes=classes)
    assert len(chart.panels) == MOST_PANELS
    assert chart.classes_left_out == 8
    names = [panel.shown for panel in chart.panels]
    assert names == sorted(names, key=classes.index)
    smallest = min(rows[0][classes.index(name)] for name in names)
    assert sum(one > smallest for one in rows[0]) < MOST_PANELS


def test_a_class_without_a_number_has_a_panel_without_bars() -> None:
    chart = drawn([0.0, 1.0, 2.0], [[0, 30], [0, 60]])
    assert bars(chart.panels[0]) == []
    assert chart.panels[0].few


def test_names_of_any_kind_are_cut_to_the_panel() -> None:
    chart = drawn([0.0, 1.0, 2.0], [[30, 30], [30, 30]], classes=("x" * 300, "\u202eאב\n"))
    assert len(chart.panels[0].shown) == 40
    assert "\\u202e" in chart.panels[1].shown
    assert "\n" not in chart.panels[1].shown


@pytest.mark.parametrize("edges", [[-1.7e308, 0.0, 1.7e308], [0.0, 1e-300, 2e-300], [1e301, 2e301, 3e301]])
def test_numbers_out_of_all_bounds_are_not_drawn(edges: list[float]) -> None:
    assert level_chart("wait", CLASSES, (), distribution(edges, [[30, 30], [30, 30]])) is None


def test_every_place_is_a_number() -> None:
    chart = drawn([5.0, 5.0 + 1e-12, 5.0 + 2e-12], [[30, 30], [30, 30]], (5.0 + 1e-12,))
    assert all(math.isfinite(x) for x, _ in chart.ticks)
    assert "nan" not in "".join(panel.bars + panel.every for panel in chart.panels)
