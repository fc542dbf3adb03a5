"""Drawings that answer, by mouse and by keyboard: what they tell and open is what the comparison holds."""

from collections.abc import Iterator

import pytest
from drawing_reading import (
    arrow_of,
    arrows,
    chip_of,
    open_structure,
    panel_of,
    point_of,
    recommended,
    shown,
    strongest,
)
from pages import Made, Opened, opened
from playwright.sync_api import Browser, Locator, Page, expect
from printed_numbers import told

WAYS = ("mouse", "keyboard")
SLIDERS = {"bits": ("bits", 3), "gain": ("gain", 4)}


@pytest.fixture
def found(browser: Browser, demo: Made) -> Iterator[Opened]:
    with opened(browser, demo.path) as one:
        yield one
        one.assert_quiet()


def press(page: Page, control: Locator, way: str, key: str = "Enter") -> None:
    if way == "mouse":
        control.click()
    else:
        control.focus()
        page.keyboard.press(key)


@pytest.mark.parametrize("way", WAYS)
def test_the_strongest_edge_tells_the_figures_of_the_comparison(found: Opened, demo: Made, way: str) -> None:
    edge, tries = strongest(demo), demo.document["folds"] * demo.document["settings"]["repeats"]
    panel = open_structure(found.page, recommended(demo)["name"])
    idle = panel.locator(".told").inner_text()
    arrow = arrow_of(panel, edge)
    if way == "mouse":
        found.page.mouse.move(*point_of(found.page, arrow))
    else:
        arrow.focus()
    strip = panel.locator(".told")
    text = strip.inner_text()
    figures = [edge["bits"], edge["gain"], *(edge["gain_interval"] or []), edge["chosen_in"]]
    assert [one.inner_text() for one in strip.locator("bdi").all()[:2]] == [edge["parent"], edge["child"]]
    assert told(text, *figures, tries, edge["stability"], edge["gate_p"])
    assert edge["verdict"] in text
    spoken = arrow.get_attribute("aria-label") or ""
    assert spoken.translate({0x2068: None, 0x2069: None}) == text
    row = panel.locator("table.edges tr.lit")
    assert [row.locator("td").nth(place).inner_text() for place in (0, 1)] == [edge["parent"], edge["child"]]
    assert told(row.locator("td").nth(2).inner_text(), edge["bits"])
    if way == "mouse":
        found.page.mouse.move(0, 0)
    else:
        arrow.evaluate("(one) => one.blur()")
    assert strip.inner_text() == idle
    assert panel.locator("table.edges tr.lit").count() == 0


@pytest.mark.parametrize("way", WAYS)
def test_an_attribute_stays_lit_until_it_is_pressed_again(found: Opened, demo: Made, way: str) -> None:
    edge = strongest(demo)
    panel = open_structure(found.page, recommended(demo)["name"])
    chip = chip_of(panel, edge["child"])
    own = [one for one in recommended(demo)["edges"] if edge["child"] in (one["parent"], one["child"])]
    press(found.page, chip, way)
    expect(chip).to_have_attribute("aria-pressed", "true")
    found.page.mouse.move(0, 0)
    found.page.locator("#structures-reset").focus()
    assert panel.locator('.drawings [aria-label*=" → "].lit').count() == len(own)
    bits = next(one["bits_with_class"] for one in demo.document["schema"] if one["name"] == edge["child"])
    text = panel.locator(".told").inner_text()
    assert f"{bits:.3f} bits" in text
    assert all(one["parent"] in text and one["child"] in text for one in own)
    press(found.page, chip, way, " " if way == "keyboard" else "")
    expect(chip).to_have_attribute("aria-pressed", "false")
    press(found.page, chip, way)
    found.page.keyboard.press("Escape")
    expect(chip).to_have_attribute("aria-pressed", "false")


@pytest.mark.parametrize("way", WAYS)
def test_a_row_of_edges_lights_its_arrow(found: Opened, demo: Made, way: str) -> None:
    edge = strongest(demo)
    panel = open_structure(found.page, recommended(demo)["name"])
    row = panel.locator("table.edges tbody tr").first
    if way == "mouse":
        row.hover()
        assert "lit" in (arrow_of(panel, edge).get_attribute("class") or "")
    press(found.page, row.get_by_role("button"), way)
    dialog = found.page.get_by_role("dialog")
    assert set(dialog.locator("#pair-panel-title bdi").all_inner_texts()) == {edge["parent"], edge["child"]}
    found.page.keyboard.press("Escape")
    expect(row.get_by_role("button")).to_be_focused()


def test_tabs_are_gone_through_by_the_arrow_keys(found: Opened, demo: Made) -> None:
    tabs = found.page.locator("#structure-tabs").get_by_role("tab")
    assert tabs.count() == len(demo.document["structures"])
    assert [tab.get_attribute("tabindex") for tab in tabs.all()].count("0") == 1
    tabs.first.focus()
    for key, place in (("End", tabs.count() - 1), ("Home", 0), ("ArrowRight", 1), ("ArrowLeft", 0)):
        found.page.keyboard.press(key)
        expect(tabs.nth(place)).to_be_focused()
        expect(tabs.nth(place)).to_have_attribute("aria-selected", "true")
        panel = found.page.locator("#structure-panels > .structure:visible")
        assert panel.count() == 1
        assert panel.get_attribute("id") == tabs.nth(place).get_attribute("aria-controls")


def test_every_tab_shows_the_structure_it_names(found: Opened, demo: Made) -> None:
    for entry in demo.document["structures"]:
        panel = open_structure(found.page, entry["name"])
        expect(panel).to_be_visible()
        assert found.page.locator("#structure-panels > .structure:visible").count() == 1
        assert shown(arrows(panel)) == len(entry["edges"])
        for edge in entry["edges"]:
            assert arrow_of(panel, edge).count() == 1


@pytest.mark.parametrize("key", SLIDERS)
@pytest.mark.parametrize("way", WAYS)
def test_sliders_hide_the_edges_below_them(found: Opened, demo: Made, way: str, key: str) -> None:
    one, (field, digits) = recommended(demo), SLIDERS[key]
    panel = open_structure(found.page, one["name"])
    slider = found.page.locator(f"#least-{key}")
    assert shown(arrows(panel)) == len(one["edges"])
    if way == "mouse":
        slider.scroll_into_view_if_needed()
        box = slider.bounding_box()
        assert box is not None
        found.page.mouse.click(box["x"] + box["width"] / 2, box["y"] + box["height"] / 2)
    else:
        slider.focus()
        for _ in range(5):
            found.page.keyboard.press("PageUp")
    least = float(slider.input_value())
    stay = [edge for edge in one["edges"] if round(edge[field], digits) >= least]
    assert 0 < len(stay) < len(one["edges"])
    assert shown(arrows(panel)) == len(stay)
    assert all(arrow_of(panel, edge).is_visible() for edge in stay)
    assert panel.locator("table.edges tbody tr:not(.sifted)").count() == len(stay)
    assert told(found.page.locator("#edges-shown").inner_text(), len(stay), len(one["edges"]))
    assert told(found.page.locator(f"#least-{key}-told").inner_text(), least)
    press(found.page, found.page.locator("#structures-reset"), way)
    assert shown(arrows(panel)) == len(one["edges"])


@pytest.mark.parametrize("way", WAYS)
def test_two_structures_side_by_side_differ_in_the_edges_marked(found: Opened, demo: Made, way: str) -> None:
    page, one = found.page, recommended(demo)
    panel = open_structure(page, one["name"])
    choice = page.locator("#beside")
    other = next(two for two in demo.document["structures"] if two["name"] == "kdb2")
    if way == "mouse":
        choice.select_option(label=other["name"])
    else:
        choice.focus()
        while choice.locator("option:checked").inner_text() != other["name"]:
            page.keyboard.press("ArrowDown")
    drawings = panel.locator(".drawings .drawing")
    assert drawings.count() == 2
    pairs = [{frozenset((e["parent"], e["child"])) for e in each["edges"]} for each in (one, other)]
    ends = [{(e["parent"], e["child"]) for e in each["edges"]} for each in (one, other)]
    turned = sum((child, parent) in ends[1] for parent, child in ends[0])
    for place in (0, 1):
        signs = drawings.nth(place).locator("text.casing").all_text_contents()
        assert signs.count("+") == len(pairs[place] - pairs[1 - place])
        assert signs.count("⇄") == turned
    assert len(pairs[1] - pairs[0]) > 0
    assert told(page.locator("#differences dt").nth(1).inner_text().split(" (")[1], len(pairs[1] - pairs[0]))
    listed = page.locator("#differences dd").nth(1).get_by_role("button")
    assert {frozenset(each.locator("bdi").all_inner_texts()) for each in listed.all()} == pairs[1] - pairs[0]
    ids = page.evaluate("[...document.querySelectorAll('[id]')].map((one) => one.id)")
    assert len(ids) == len(set(ids))
    press(page, listed.first, way)
    expect(page.get_by_role("dialog")).to_be_visible()
    page.keyboard.press("Escape")
    expect(listed.first).to_be_focused()
    press(page, page.locator("#structures-reset"), way)
    assert drawings.count() == 1
    assert panel_of(page, one["name"]).locator(".casing").count() == 0


def test_two_drawings_side_by_side_stand_on_one_scale(found: Opened) -> None:
    page = found.page
    scale = "(one) => one.getBoundingClientRect().width / Number(one.getAttribute('width'))"
    choice = page.locator("#beside")
    for name in ("heldout", "tan"):
        choice.select_option(label=name)
        scales = [one.evaluate(scale) for one in page.locator(".drawings.two svg").all()]
        assert len(scales) == 2
        assert scales[0] == pytest.approx(scales[1], rel=0.02)


HIDDEN_NUMBERS = """[...document.querySelectorAll('.drawings.two .arrow:has(circle.casing)')].filter((arrow) => {
  const [sign, number] = ['circle.casing', 'text:not(.casing)'].map((part) => arrow.querySelector(part));
  const [disc, box] = [sign.getBoundingClientRect(), number.getBoundingClientRect()];
  const [x, y] = [disc.x + disc.width / 2, disc.y + disc.height / 2];
  return x > box.left && x < box.right && y > box.top && y < box.bottom;
}).length"""


def test_signs_on_arrows_leave_their_numbers_free(found: Opened) -> None:
    page = found.page
    page.locator("#beside").select_option(label="heldout")
    hidden = page.evaluate(HIDDEN_NUMBERS)
    assert page.locator(".drawings.two circle.casing").count() > 8
    assert hidden == 0
