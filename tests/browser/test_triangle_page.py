"""The triangle of pairs: mouse and arrow keys go to the cell of two attributes, which is told and opens their panel."""

import json
from typing import Any

import pytest
from pages import Made, Opened
from playwright.sync_api import Page, expect
from printed_numbers import numbers_in, tells
from table_reading import pair_of


def order(page: Page) -> list[str]:
    return page.locator("#triangle-names g > text > title").all_text_contents()


def told_pair(page: Page) -> set[str]:
    return set(page.locator("#triangle-strip bdi").all_inner_texts()[:2])


def strongest_pair(demo: Made) -> dict[str, Any]:
    pairs: list[dict[str, Any]] = demo.document["pairs"]
    return max(pairs, key=lambda one: one["bits"])


def middle_of(page: Page, row: int, column: int) -> tuple[float, float]:
    """Bring a cell into sight; find its middle in the window."""
    cell = json.loads(page.locator("#data-triangle").text_content() or "")["cell"]
    at = page.locator("#triangle svg.triangle").evaluate(
        """(svg, [x, y]) => {
          const place = () => new DOMPoint(x, y).matrixTransform(svg.getScreenCTM());
          scrollBy(0, place().y - innerHeight / 2);
          return [place().x, place().y];
        }""",
        [(column + 0.5) * cell, (row + 0.5) * cell],
    )
    return at[0], at[1]


def test_the_triangle_starts_at_the_strongest_pair_and_tells_its_figures(found: Opened, demo: Made) -> None:
    page, pair = found.page, strongest_pair(demo)
    page.locator("#triangle").focus()
    assert told_pair(page) == {pair["a"], pair["b"]}
    text = page.locator("#triangle-strip").inner_text()
    keys = ("bits", "bits_low", "bits_high", "marginal_bits", "double_counted_bits")
    assert pair["verdict"] == "dependent"
    for printed in numbers_in(text.replace("95 % interval less chance", "")):
        assert any(tells(printed, pair[key]) for key in keys), printed
    assert f"{pair['bits']:.4f}" in text
    assert pair["verdict"] in text


def test_arrow_keys_reach_every_cell_and_stay_inside(found: Opened, demo: Made) -> None:
    page = found.page
    names = order(page)
    assert sorted(names) == sorted(demo.document["attributes"])
    page.locator("#triangle").focus()
    for _ in range(len(names)):
        page.keyboard.press("ArrowUp")
        page.keyboard.press("ArrowLeft")
    row, column, seen = 1, 0, set()
    while row < len(names):
        page.keyboard.press("Home")
        for column in range(row):
            assert told_pair(page) == {names[row], names[column]}
            text = page.locator("#triangle-strip").inner_text()
            assert f"{pair_of(demo.document, [names[row], names[column]])['bits']:.4f}" in text
            seen.add((row, column))
            page.keyboard.press("ArrowRight")
        assert told_pair(page) == {names[row], names[row - 1]}, "the diagonal holds it back"
        page.keyboard.press("ArrowDown")
        row += 1
    assert len(seen) == len(demo.document["pairs"])
    before = told_pair(page)
    page.keyboard.press("ArrowDown")
    assert told_pair(page) == before, "the last row holds it back"
    page.keyboard.press("Home")
    assert told_pair(page) == {names[-1], names[0]}
    page.keyboard.press("End")
    assert told_pair(page) == {names[-1], names[-2]}


@pytest.mark.parametrize("key", ["Enter", "Space"])
def test_a_key_opens_the_pair_in_hand_and_focus_comes_back(found: Opened, demo: Made, key: str) -> None:
    page, pair = found.page, strongest_pair(demo)
    page.locator("#triangle").focus()
    page.keyboard.press(key)
    dialog = page.get_by_role("dialog")
    assert set(dialog.locator("#pair-panel-title bdi").all_inner_texts()) == {pair["a"], pair["b"]}
    page.keyboard.press("Escape")
    expect(page.locator("#triangle")).to_be_focused()
    assert told_pair(page) == {pair["a"], pair["b"]}


def test_the_mouse_tells_and_opens_the_cell_under_it(found: Opened, demo: Made) -> None:
    page = found.page
    names = order(page)
    for row, column in ((len(names) - 1, 0), (1, 0), (7, 4)):
        x, y = middle_of(page, row, column)
        page.mouse.move(x, y)
        assert told_pair(page) == {names[row], names[column]}
        page.mouse.click(x, y)
        dialog = page.get_by_role("dialog")
        assert set(dialog.locator("#pair-panel-title bdi").all_inner_texts()) == {names[row], names[column]}
        page.keyboard.press("Escape")


@pytest.mark.parametrize("way", ["mouse", "keyboard"])
def test_marks_show_the_measure_that_is_chosen(found: Opened, way: str) -> None:
    page = found.page
    choices = page.locator("#triangle-measure input")
    sides = json.loads(page.locator("#data-triangle").text_content() or "")["measures"]
    assert choices.count() == len(sides) == 3
    choices.first.focus()
    for place in (1, 2, 0):
        if way == "mouse":
            page.locator("#triangle-measure label").nth(place).click()
        else:
            page.keyboard.press("ArrowRight")
        expect(choices.nth(place)).to_be_checked()
        transforms = [str(one.get_attribute("transform")) for one in page.locator("#triangle-marks use").all()]
        scales = [one.split("scale(")[1].removesuffix(")") for one in transforms]
        assert scales == sides[place]["sides"]
        visible = [one for one in page.locator("svg.scale").all() if one.is_visible()]
        assert [one.get_attribute("data-measure") for one in visible] == [str(place)]
