"""The attributes on the page: every figure against its own field, opened by keyboard, in both themes, on a phone."""

import re
from typing import Any

import pytest
from boxes import CUT, OUT_OF_DRAWINGS, OVERLAPPING, STICKING_OUT
from contrast import TOO_FAINT
from hostile_table import CLASSES, LEVELS, NAMES, shown
from pages import Made, Opened, Theme, opened, rgb, unfolded
from playwright.sync_api import Browser, Locator, Page
from printed_numbers import told
from table_reading import table_of

from bnx.palette import PALETTES

ATTRIBUTE = "#attributes details.attribute"
PATH = re.compile(r"M([-\d.]+) ([-\d.]+)V([-\d.]+)H([-\d.]+)V[-\d.]+z")
CELLS = "(row) => [...row.cells].map((cell) => [...cell.childNodes].map((part) => part.textContent).join(' ; '))"


def blocks(page: Page) -> list[Locator]:
    return page.locator(ATTRIBUTE).all()


def ranked(document: dict[str, Any]) -> list[dict[str, Any]]:
    return sorted(document["schema"], key=lambda one: -one["bits_with_class"])


def test_headings_tell_what_became_of_each_column(found: Opened, demo: Made) -> None:
    document = demo.document
    assert len(blocks(found.page)) == len(document["schema"])
    for block, entry in zip(blocks(found.page), ranked(document), strict=True):
        summary = block.locator("summary")
        assert summary.locator(".name").text_content() == entry["name"]
        assert told(summary.locator(".attribute-bits").inner_text(), entry["bits_with_class"])
        blanks, kind = entry["counted"]["blanks"], summary.locator(".attribute-kind").inner_text()
        assert told(kind, len(entry["levels"]) - (blanks is not None))
        assert kind.startswith("numeric") == entry["numeric"]
        notes = summary.locator(".attribute-notes").inner_text()
        if blanks:
            assert told(notes.split("; ")[0], sum(blanks["rows"]), sum(blanks["rows"]) / document["rows"])
        else:
            assert notes == ""
        width = float(summary.locator("rect.bar-fill").get_attribute("width") or "")
        assert width == pytest.approx(100 * entry["bits_with_class"] / ranked(document)[0]["bits_with_class"], abs=0.06)


def test_every_figure_of_a_level_is_that_of_the_comparison(found: Opened, demo: Made) -> None:
    unfolded(found.page)
    classes = demo.document["class_levels"]
    for block, entry in zip(blocks(found.page), ranked(demo.document), strict=True):
        counted, table = entry["counted"], table_of(block.locator("table"))
        assert table["heads"][1:3] == ["speaks for", "records"]
        assert table["heads"][3:] == classes
        of_class = [sum(column) for column in zip(*counted["rows"], strict=True)]
        rows = block.locator("tbody tr").all()
        for row, level, counts, says in zip(rows, entry["levels"], counted["rows"], counted["speaks_for"], strict=True):
            cells = row.evaluate(CELLS)
            assert cells[0] == level
            assert told(cells[2], sum(counts), sum(counts) / demo.document["rows"])
            for cell, count in zip(cells[3:], counts, strict=True):
                assert told(cell, count, count / sum(counts))
            assert says is None or told(cells[1], says["bits"])
            assert cells[1].split(" ")[0] == (says["class"] if says else "–")
            bars = [float((one or "").strip("%")) for one in attributes(row, ".bar-fill", "width")]
            assert bars == pytest.approx([100 * count / sum(counts) for count in counts], abs=0.06)
            usual = [float((one or "").strip("%")) for one in attributes(row, ".usual", "x")]
            assert usual == pytest.approx([100 * one / sum(of_class) for one in of_class], abs=0.06)
        last = block.locator("tfoot tr").evaluate(CELLS)
        assert told(last[2], demo.document["rows"])
        assert all(told(cell, one, one / sum(of_class)) for cell, one in zip(last[3:], of_class, strict=True))


def attributes(place: Locator, selector: str, key: str) -> list[str | None]:
    return [one.get_attribute(key) for one in place.locator(selector).all()]


def test_numbers_are_drawn_by_class_and_cut_where_they_are_cut(found: Opened, demo: Made) -> None:
    unfolded(found.page)
    numeric = [entry for entry in ranked(demo.document) if entry["numeric"]]
    drawings = found.page.locator("svg.spread").all()
    assert len(drawings) == len(numeric) >= 2
    for drawing, entry in zip(drawings, numeric, strict=True):
        counts = entry["counted"]["distribution"]["rows"]
        words = drawing.get_attribute("aria-label") or ""
        assert drawing.get_attribute("role") == "img"
        assert words.startswith(entry["name"])
        assert told(words.removeprefix(entry["name"]), *entry["cuts"])
        assert drawing.locator("text.cut-value").all_text_contents() == [f"{cut:.6g}" for cut in entry["cuts"]]
        places = [float(one or "") for one in attributes(drawing, "text.cut-value", "x")]
        assert places == sorted(places)
        paths = attributes(drawing, "path.spread-bars", "d")
        assert len(paths) == len(demo.document["class_levels"])
        for number, path in enumerate(paths):
            bars = [[float(one) for one in bar] for bar in PATH.findall(path or "")]
            areas = [(right - left) * (low - high) for left, low, high, right in bars]
            rows = [row[number] for row in counts if row[number]]
            assert len(areas) <= len(rows)  # a bar of less than a tenth of a pixel is none
            assert sum(areas) > 0
            for x in places:
                assert all(right <= x + 0.1 or left >= x - 0.1 for left, _, _, right in bars)
            if len(areas) == len(rows):
                shares = [row / sum(rows) for row in rows]
                assert [area / sum(areas) for area in areas] == pytest.approx(shares, abs=0.01)


def test_the_first_are_open_and_the_others_open_by_keyboard(found: Opened) -> None:
    page = found.page
    opened_first = page.locator(ATTRIBUTE).evaluate_all("(all) => all.map((one) => one.open)")
    assert opened_first == [place < 3 for place in range(len(opened_first))]
    block = page.locator(ATTRIBUTE).nth(5)
    block.locator("summary").focus()
    assert not block.locator("table").is_visible()
    page.keyboard.press("Enter")
    assert block.locator("table").is_visible()
    page.keyboard.press("Tab")
    assert page.evaluate("document.activeElement.getAttribute('role')") == "region"
    assert page.evaluate("document.activeElement.closest('details').open")
    block.locator("summary").focus()
    page.keyboard.press("Space")
    assert not block.locator("table").is_visible()


def test_a_reader_hears_the_name_first_and_the_table_last(found: Opened) -> None:
    block = found.page.locator(f"{ATTRIBUTE}:has(svg.spread)").first
    order = block.evaluate(
        "(one) => [...one.querySelectorAll('summary, svg.spread, table')].map((part) => part.tagName.toLowerCase())"
    )
    assert order == ["summary", "svg", "table"]
    assert (
        block.locator("summary")
        .evaluate("(one) => one.textContent.trim()")
        .startswith(block.locator("summary .name").text_content() or "none")
    )
    assert block.locator("tbody th").count() == block.locator('tbody th[scope="row"]').count() > 0
    assert block.locator("thead th").count() == block.locator('thead th[scope="col"]').count() > 0


@pytest.mark.parametrize("theme", ["light", "dark"])
def test_colours_are_those_of_the_theme(browser: Browser, demo: Made, theme: Theme) -> None:
    with opened(browser, demo.path, theme=theme) as found:
        unfolded(found.page)
        colours = PALETTES[theme]
        for selector, part, token in (
            (".level-bar .bar-fill", "fill", "bar"),
            (".level-bar .usual", "fill", "text"),
            ("path.spread-bars", "fill", "bar"),
            ("path.spread-every", "stroke", "text"),
            ("path.cut-line", "stroke", "unjudged"),
        ):
            place = found.page.locator(f"#attributes {selector}").first
            assert place.evaluate(f"(one) => getComputedStyle(one).{part}") == rgb(colours[token]), selector
        read, faint = found.page.evaluate(TOO_FAINT)
        assert read > 500
        assert faint == []
        assert found.page.locator("#attributes [style]").count() == 0
        found.assert_quiet()


@pytest.mark.parametrize("name", ["demo", "hostile"])
def test_on_a_phone_only_the_boxes_scroll(browser: Browser, name: str, request: pytest.FixtureRequest) -> None:
    with opened(browser, request.getfixturevalue(name).path, width=420) as found:
        unfolded(found.page)
        assert found.page.evaluate("document.scrollingElement.scrollWidth <= innerWidth")
        for fault in (STICKING_OUT, OUT_OF_DRAWINGS, CUT, OVERLAPPING):
            assert found.page.evaluate(fault) == []
        wide = "(all) => all.filter((one) => one.scrollWidth > one.clientWidth).map((one) => one.tabIndex)"
        boxes = found.page.locator("#attributes .box").evaluate_all(wide)
        assert boxes
        assert set(boxes) == {0}
        found.assert_quiet()


def test_hostile_names_and_levels_are_shown_as_they_are(browser: Browser, hostile: Made) -> None:
    with opened(browser, hostile.path) as found:
        unfolded(found.page)
        names = found.page.locator(f"{ATTRIBUTE} summary .name").all_text_contents()
        assert sorted(names) == sorted(map(shown, NAMES))
        levels = found.page.locator("#attributes tbody th .name").all_text_contents()
        assert set(levels) == set(map(shown, LEVELS))
        heads = found.page.locator("#attributes thead th .name").all_text_contents()
        assert set(heads) == set(map(shown, CLASSES))
        assert found.page.evaluate("window.hacked") is None
        regions = attributes(found.page.locator("#attributes"), '[role="region"]', "aria-label")
        assert {f"Levels of {shown(name)}" for name in NAMES} <= set(regions)
        found.assert_quiet()


def test_closed_attributes_print_their_heading(browser: Browser, demo: Made) -> None:
    with opened(browser, demo.path) as found:
        found.page.emulate_media(media="print")
        for block in blocks(found.page):
            assert block.locator("summary").is_visible()
        assert found.page.locator(f"{ATTRIBUTE} table:visible").count() == 3


def test_all_of_it_is_there_without_scripts(browser: Browser, demo: Made) -> None:
    with opened(browser, demo.path, scripts=False) as found:
        block = found.page.locator(ATTRIBUTE).last
        block.locator("summary").click()
        assert block.locator("table").is_visible()


def test_a_wide_table_lists_those_of_most_bits(browser: Browser, very_wide: Made) -> None:
    with opened(browser, very_wide.path) as found:
        names = found.page.locator(f"{ATTRIBUTE} summary .name").all_text_contents()
        assert names == [one["name"] for one in ranked(very_wide.document)[:300]]
        assert "comparison.json describes all 400." in found.page.locator("#attributes").inner_text()
        assert very_wide.document["attributes_counted"] == 400
        assert found.page.locator("#attributes .level-table").count() == 300
        box = found.page.locator("#attributes .attribute-list")
        assert box.evaluate("(one) => one.scrollHeight > one.clientHeight")
        assert box.get_attribute("tabindex") == "0"
