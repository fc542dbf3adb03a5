"""Drawings that answer, by mouse and by keyboard: what they tell and open is what the comparison holds."""

from collections.abc import Iterator
from typing import Any

import pytest
from pages import Made, Opened, opened
from playwright.sync_api import Browser, Locator, Page, expect

ONLY = 'text.casing:text-is("+")'


@pytest.fixture
def found(browser: Browser, demo: Made) -> Iterator[Opened]:
    with opened(browser, demo.path) as one:
        yield one
        one.assert_quiet()


def recommended(demo: Made) -> dict[str, Any]:
    name = demo.document["recommended"]["name"]
    return next(one for one in demo.document["structures"] if one["name"] == name)


def strongest(demo: Made) -> dict[str, Any]:
    edges: list[dict[str, Any]] = recommended(demo)["edges"]
    return max(edges, key=lambda edge: edge["bits"])


def open_structure(page: Page, name: str) -> Locator:
    """Open the tab of a structure; give its panel."""
    for tab in page.get_by_role("tab").all():
        if tab.locator("b").inner_text() == name:
            tab.click()
    page.mouse.move(0, 0)  # else scrolling could bring an arrow under the pointer
    return page.locator(f'.structure[data-structure="{name}"]')


def arrow_of(panel: Locator, edge: dict[str, Any]) -> Locator:
    begin = f"\u2068{edge['parent']}\u2069 → \u2068{edge['child']}\u2069:"  # names are isolated from their surroundings
    return panel.locator(f'.drawings svg [role="button"][aria-label^="{begin}"]')


def shown_arrows(panel: Locator) -> int:
    return panel.locator(
        '.drawings > .drawing:first-child svg [role="button"][aria-label*=" → "]:not([hidden])'
    ).count()


@pytest.mark.parametrize("way", ["mouse", "keyboard"])
def test_the_strongest_edge_tells_the_figures_of_the_comparison(found: Opened, demo: Made, way: str) -> None:
    edge = strongest(demo)
    panel = open_structure(found.page, recommended(demo)["name"])
    arrow = arrow_of(panel, edge)
    if way == "mouse":
        arrow.dispatch_event("pointerenter")
    else:
        arrow.focus()
    told = panel.locator(".told").inner_text()
    assert told.startswith(f"{edge['parent']} → {edge['child']}")
    for figure in (f"{edge['bits']:.3f}", f"{edge['gain']:+.4f}", f"{edge['gain_se']:.4f}", edge["verdict"]):
        assert figure in told
    row = panel.locator("table.edges tr.lit")
    assert row.locator("td").nth(0).inner_text() == edge["parent"]
    assert row.locator("td").nth(2).inner_text() == f"{edge['bits']:.3f}"


@pytest.mark.parametrize("way", ["mouse", "keyboard"])
def test_an_arrow_opens_the_tables_of_its_pair_and_focus_comes_back(found: Opened, demo: Made, way: str) -> None:
    edge = strongest(demo)
    arrow = arrow_of(open_structure(found.page, recommended(demo)["name"]), edge)
    if way == "mouse":
        arrow.dispatch_event("click")
    else:
        arrow.focus()
        found.page.keyboard.press("Enter")
    dialog = found.page.get_by_role("dialog")
    expect(dialog).to_be_visible()
    ends = {edge["parent"], edge["child"]}
    assert set(dialog.locator("#pair-panel-title bdi").all_inner_texts()) == ends
    pair = next(one for one in demo.document["pairs"] if {one["a"], one["b"]} == ends)
    figures = dialog.locator("#pair-panel-figures dd").all_inner_texts()
    assert f"{pair['bits']:.4f}" in figures
    told = dialog.inner_text()
    for one in demo.document["structures"]:
        assert not any({e["parent"], e["child"]} == ends for e in one["edges"]) or one["name"] in told
    found.page.keyboard.press("Escape")
    expect(dialog).to_be_hidden()
    expect(arrow).to_be_focused()


def test_the_tables_of_a_pair_hold_the_records_that_were_counted(found: Opened, demo: Made) -> None:
    edge = strongest(demo)
    ends = {edge["parent"], edge["child"]}
    counted = next(one for one in demo.document["pair_tables"] if {one["a"], one["b"]} == ends)
    arrow_of(open_structure(found.page, recommended(demo)["name"]), edge).dispatch_event("click")
    dialog = found.page.get_by_role("dialog")
    text = dialog.inner_text()
    numbers = {int(count) for one in counted["classes"] for row in one["observed"] for count in row}
    assert len(numbers) > 10
    for number in numbers:
        assert f"{number:,}" in text


def test_tabs_are_gone_through_by_the_arrow_keys(found: Opened, demo: Made) -> None:
    tabs = found.page.get_by_role("tab")
    assert tabs.count() == len(demo.document["structures"])
    tabs.first.focus()
    found.page.keyboard.press("End")
    expect(tabs.last).to_be_focused()
    expect(tabs.last).to_have_attribute("aria-selected", "true")
    assert found.page.locator("#structure-panels > .structure:visible").count() == 1
    found.page.keyboard.press("Home")
    found.page.keyboard.press("ArrowRight")
    expect(tabs.nth(1)).to_be_focused()


@pytest.mark.parametrize("way", ["mouse", "keyboard"])
def test_the_slider_hides_edges_of_fewer_bits(found: Opened, demo: Made, way: str) -> None:
    one = recommended(demo)
    panel = open_structure(found.page, one["name"])
    slider = found.page.locator("#least-bits")
    assert shown_arrows(panel) == len(one["edges"])
    if way == "mouse":
        slider.scroll_into_view_if_needed()
        box = slider.bounding_box()
        assert box is not None
        found.page.mouse.click(box["x"] + box["width"] / 2, box["y"] + box["height"] / 2)
    else:
        slider.focus()
        for _ in range(3):
            found.page.keyboard.press("PageUp")
    least = float(slider.input_value())
    assert least > 0
    stay = sum(float(f"{edge['bits']:.3f}") >= least for edge in one["edges"])
    assert 0 < stay < len(one["edges"])
    assert shown_arrows(panel) == stay
    assert f"{stay} of {len(one['edges'])} edges shown" in found.page.locator("#edges-shown").inner_text()
    found.page.get_by_role("button", name="Reset", exact=True).click()
    assert shown_arrows(panel) == len(one["edges"])


def test_two_structures_side_by_side_differ_in_the_edges_marked(found: Opened, demo: Made) -> None:
    one = recommended(demo)
    other = next(two for two in demo.document["structures"] if two["name"] == "kdb2")
    panel = open_structure(found.page, one["name"])
    found.page.locator("#beside").select_option(label=other["name"])
    assert panel.locator(".drawings .drawing").count() == 2
    pairs = [{frozenset((e["parent"], e["child"])) for e in each["edges"]} for each in (one, other)]
    marked = panel.locator(".drawings .drawing").nth(1).locator(ONLY)
    assert marked.count() == len(pairs[1] - pairs[0]) > 0
    assert panel.locator(".drawings .drawing").nth(0).locator(ONLY).count() == len(pairs[0] - pairs[1])
    ids = found.page.evaluate("[...document.querySelectorAll('[id]')].map((one) => one.id)")
    assert len(ids) == len(set(ids))
    found.page.locator("#beside").select_option(value="")
    assert panel.locator(".drawings .drawing").count() == 1
    assert panel.locator(".casing").count() == 0
