import math
import re

import numpy as np
import pytest
from test_residual_picture import degenerate_pair, drawn, flat, groups, hostile_pair, lines, pair, panel, told_sentences

from bnx.lettering import fitted, width_of, wrapped
from bnx.marks import Box, Told, Wedge, Words
from bnx.palette import PALETTES
from bnx.residual_chip import Cell, chip
from bnx.residual_picture import picture_page

SVG = "{http://www.w3.org/2000/svg}"


def test_every_number_equals_the_arrays():
    given_pair = pair(6, 5, 3, 900)
    cells = iter(groups(drawn([given_pair]), "cell"))
    for one in given_pair.panels:
        for i, j in np.ndindex(one.observed.shape):
            number, counts = lines(next(cells))
            digits = len(number.partition(".")[2])
            assert float(number.replace("−", "-")) == pytest.approx(one.residuals[i, j], abs=0.5001 * 10**-digits)
            observed, expected = counts.replace(",", "").split(" of ")
            assert int(observed) == one.observed[i, j]
            assert float(expected) == pytest.approx(one.expected[i, j], abs=0.05001)
    assert next(cells, None) is None


def test_what_a_cell_tells_names_it_and_its_numbers():
    given_pair = pair(2, 2, 1)
    one = given_pair.panels[0]
    title = groups(drawn([given_pair]), "cell")[2].findtext(f"{SVG}title")
    assert title == (
        f"crew = crew 1, plant = plant 0: {one.observed[1, 0]:,} records, {one.expected[1, 0]:,.2f} expected, "
        f"residual {one.residuals[1, 0]:+.2f}"
    )


@pytest.mark.parametrize(
    ("residual", "number", "fill", "edge"),
    [
        (0.04, "0.0", "text", "chip-edge"),
        (1.94, "+1.9", "text", "chip-edge"),
        (1.96, "+1.96", "text", "chip-edge"),
        (2.04, "+2.04", "gain", "chip-edge"),
        (-3.0, "−3.0", "loss-text", "chip-edge"),
        (-3.96, "−3.96", "loss-text", "chip-edge"),
        (-4.2, "−4.2", "loss-text", "loss"),
        (104.4, "+104.4", "gain", "gain"),
        (math.nan, "–", "text", "chip-edge"),
    ],
)
def test_a_chip_says_the_residual_in_sign_weight_colour_and_edge(residual, number, fill, edge):
    for compact in (False, True):
        box, words, *_ = chip(Cell(20, 10.0 if residual > 0 else 40.0, residual), 0, 0, 60, compact)
        assert (words.text, words.fill, words.bold) == (number, fill, abs(residual) > 2)
        assert (box.edge, box.line) == (edge, 2.0 if abs(residual) > 4 else 0.8)


def bars(cell):
    _, _, *marks = chip(cell, 0, 0, 78, compact=False)
    token = {"gain", "loss", "undecided"}
    return [mark for mark in marks if isinstance(mark, Box | Wedge) and mark.fill in token]


def test_bars_run_right_and_whole_or_left_and_broken_one_unit_a_doubling():
    (right,) = bars(Cell(20, 10.0, 3.0))
    assert (right.x, right.width, right.fill) == (39, 15, "gain")
    left = bars(Cell(10, 20.0, -3.0))
    assert len(left) > 3
    assert {one.fill for one in left} == {"loss"}
    assert left[0].x + left[0].width == pytest.approx(39)
    assert left[-1].x == pytest.approx(39 - 15, abs=1.2)  # the last piece may end within a gap
    assert {one.fill for one in bars(Cell(12, 10.0, 1.0))} == {"undecided"}
    assert bars(Cell(10, 10.0, 0.0)) == []


def test_bars_that_would_leave_the_scale_end_in_a_point_that_stays_in_the_chip():
    for cell, side in ((Cell(41, 10.0, 5.0), 1), (Cell(2, 10.0, -5.0), -1), (Cell(0, 0.3, -0.6), -1)):
        (wedge,) = [mark for mark in bars(cell) if isinstance(mark, Wedge)]
        tip = wedge.points[1][0]
        assert side * (tip - 39) > 30
        assert 1 < tip < 77
    assert not [mark for mark in bars(Cell(40, 10.0, 5.0)) if isinstance(mark, Wedge)]


def test_undefined_cells_are_empty_or_carry_a_dash():
    root = drawn([degenerate_pair()])
    cells = groups(root, "cell")
    assert [lines(one) for one in cells] == [[]] * 4 + [["–", "7 of 7.0"], ["–", "2 of 2.0"], [], []]
    assert all(one.find(f"{SVG}rect").get("stroke-dasharray") for one in cells[:4])
    assert "no record of this row or column" in cells[0].findtext(f"{SVG}title")
    assert "residual undefined" in cells[4].findtext(f"{SVG}title")
    assert "No residual is defined: in no stratum do both attributes vary." in told_sentences([degenerate_pair()])


def luminance(colour):
    parts = [int(colour[k : k + 2], 16) / 255 for k in (1, 3, 5)]
    linear = [part / 12.92 if part <= 0.04045 else ((part + 0.055) / 1.055) ** 2.4 for part in parts]
    return 0.2126 * linear[0] + 0.7152 * linear[1] + 0.0722 * linear[2]


def contrast(one, other):
    """Contrast ratio of WCAG 2.1, from its definition."""
    low, high = sorted((luminance(one), luminance(other)))
    return (high + 0.05) / (low + 0.05)


@pytest.mark.parametrize("theme", ["light", "dark"])
def test_words_reach_contrast_4_5_and_marks_3(theme):
    colours = PALETTES[theme]
    words = [("text", "chip"), ("gain", "chip"), ("loss-text", "chip"), ("small-text", "chip")]
    words += [("small-text", "frame"), ("text", "frame"), ("class-text", "class"), ("small-text", "background")]
    assert all(contrast(colours[one], colours[other]) >= 4.5 for one, other in words)
    for mark in ("gain", "loss", "undecided"):
        assert contrast(colours[mark], colours["chip"]) >= 3


@pytest.mark.parametrize(
    "made",
    [
        pair(),
        pair(12, 12, 5),
        pair(50, 50, 2, 9000),
        pair(2, 10, 2, 4_000_000_000),
        pair(1, 1, 1),
        hostile_pair(),
        degenerate_pair(),
    ],
    ids=["small", "twelve", "fifty", "huge counts", "one cell", "hostile", "degenerate"],
)
def test_nothing_leaves_its_chip_or_the_page(made):
    page = picture_page([made], "long caption " * 60)
    for mark in flat(page.marks):
        if isinstance(mark, Words):
            width = width_of(mark.text, mark.size, mark.bold)
            left = mark.x - {"start": 0, "middle": width / 2, "end": width}[mark.anchor]
            assert left >= 8, mark
            assert left + width <= page.width - 8, mark
            assert 0 < mark.y < page.height
        elif isinstance(mark, Box):
            assert mark.x >= 0
            assert mark.x + mark.width <= page.width
            assert mark.y + mark.height <= page.height
    for told in page.marks:
        if isinstance(told, Told) and told.kind == "cell":
            box, *others = told.marks
            for mark in others:
                if isinstance(mark, Words):
                    assert width_of(mark.text, mark.size, mark.bold) <= box.width - 4, mark


def test_x2_of_a_panel_is_pearsons():
    # by hand: 20 records, expected 5 everywhere, (8 - 5)^2 / 5 in each of 4 cells = 7.2
    assert panel("", [[8, 2], [2, 8]]).x2 == pytest.approx(7.2)
    assert degenerate_pair().panels[0].x2 == 0


def test_long_names_are_cut_in_the_middle_and_long_text_is_broken():
    assert fitted("short", 10, 100) == "short"
    cut = fitted("transit_days of the first leg, 12 to 14", 10, 120)
    assert re.fullmatch(r"transit.*….*14", cut)
    assert width_of(cut, 10) <= 120
    assert wrapped("over 90 min", 10, 45, 3) == ("over 90", "min")
    assert wrapped("load_temperature", 10, 70, 2) == ("load_", "temperature") or width_of("temperature", 10) > 70
    assert len(wrapped("word " * 100, 10, 60, 3)) == 3
    assert wrapped("", 10, 60, 3) == ("",)
