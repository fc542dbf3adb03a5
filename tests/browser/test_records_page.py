"""Single records: every figure and every bar is that of the comparison, by mouse and keys, in all themes and widths."""

import copy
import re
from pathlib import Path
from typing import Any

import pytest
from conftest import page_made
from hostile_table import TARGET
from pages import Made, opened, rgb, unfolded
from playwright.sync_api import Browser
from printed_numbers import numbers_in, tells, told
from record_reading import KINDS, cards, right, said, told_of

from bnx.palette import PALETTES

RECORDS = "#records details.record"
SIDEWAYS = "document.scrollingElement.scrollWidth > innerWidth"


def rows_of(made: Made) -> list[dict[str, Any]]:
    found: list[dict[str, Any]] = made.document["records"]["rows"]
    return found


def visible(text: str | None) -> str:
    """Write a text as the page does, whose control characters become a sign that can be seen."""
    return re.sub("[\x00-\x08\x0b\x0c\x0e-\x1f\x7f-\x9f]", "\ufffd", text or "not observed")


def part(text: str, value: float | None) -> bool:
    """Judge whether a cell prints a part of some bits, or a dash where it has none that can be printed."""
    if text == "–":
        return value is None or abs(value) < 0.005
    return tells(numbers_in(text)[0], value or 0.0) and len(numbers_in(text)) == 1


@pytest.mark.parametrize("name", ["demo", "hostile", "wide"])
def test_every_figure_of_every_record_is_that_of_the_comparison(
    browser: Browser, name: str, request: pytest.FixtureRequest
) -> None:
    made = request.getfixturevalue(name)
    levels, rows = made.document["class_levels"], rows_of(made)
    with opened(browser, made.path) as found:
        shown = cards(found.page.locator(RECORDS))
        found.assert_quiet()
    assert len(shown) == len(rows) == 12
    for card, row in zip(shown, rows, strict=True):
        (naive, p), (other, q) = (said(row, side, levels) for side in ("naive", "structure"))
        assert card["names"] == [visible(one) for one in (row["truth"], naive, other)]
        if name == "demo":
            assert told(card["heading"].replace("kdb2", ""), row["line"], p, q, row["disagreement"])
        words = {"both": "both are right", "neither": "neither is right", "naive": "naive is right"}
        right_words = words.get(right(row, levels), f"{made.document['records']['structure']} is right")
        assert right_words in card["heading"]
        assert card["ends"] == [visible(row["against"]), visible(row["for"])]
        assert [one["name"] for one in card["rows"]] == [visible(one["name"]) for one in row["attributes"]]
        for line, one in zip(card["rows"], row["attributes"], strict=True):
            assert line["level"] == visible(one["level"])
            assert line["parents"] == [visible(parent) for parent in one["parents"]]
            assert line["role"].startswith("given") == bool(one["parents"])
            for text, key in zip(line["cells"][2:], ("naive", "twice", "adds", "structure"), strict=True):
                assert part(text, one[f"{key}_bits"]), (line, one)
        last = card["foot"][-1]
        assert [part(last[1], row["naive"]["log_odds_bits"]), part(last[4], row["structure"]["log_odds_bits"])] == [
            True,
            True,
        ]
        assert part(card["foot"][-2][1], row["prior_bits"])
        assert len(card["foot"]) == 2 + bool(row["rest"]["attributes"])
        if row["rest"]["attributes"]:
            rest = card["foot"][0]
            assert told(rest[0], row["rest"]["attributes"])
            keys = ("naive", "twice", "adds", "structure")
            assert all(part(text, row["rest"][f"{key}_bits"]) for text, key in zip(rest[1:], keys, strict=True))
        sides = (row["naive"], row["structure"])
        printed = [one["temperature"] for one in sides] + [one["offset_bits"] for one in sides]
        structure = made.document["records"]["structure"]
        assert told(card["words"][-1].replace(structure, ""), *printed)


def test_printed_columns_add_up_to_the_log_odds(browser: Browser, demo: Made) -> None:
    """Every figure is rounded to .01, so that a sum of k of them may be off by .005 (k + 1)."""
    with opened(browser, demo.path) as found:
        shown = cards(found.page.locator(RECORDS))
    for card in shown:
        lines = [line["cells"] for line in card["rows"]]
        for column in (2, 5):
            bits = [float(cells[column]) for cells in lines] + [float(one[column - 1]) for one in card["foot"]]
            assert sum(bits[:-1]) == pytest.approx(bits[-1], abs=0.005 * len(bits) + 1e-9)
        for cells in lines:
            naive, twice, adds, structure = (0.0 if one == "–" else float(one) for one in cells[2:])
            assert naive - twice + adds == pytest.approx(structure, abs=0.0200001)


@pytest.mark.parametrize("name", ["demo", "wide"])
def test_bars_are_as_long_as_their_bits(browser: Browser, name: str, request: pytest.FixtureRequest) -> None:
    made = request.getfixturevalue(name)
    hatched = 0
    with opened(browser, made.path) as found:
        shown = cards(found.page.locator(RECORDS))
    for card, row in zip(shown, rows_of(made), strict=True):
        assert len(card["ticks"]) >= 3
        zero = next(x for x, bits in card["ticks"] if bits == 0)
        x, bits = card["ticks"][-1]
        scale = (x - zero) / bits
        assert all(abs(x - zero) == pytest.approx(scale * bits, abs=0.2) for x, bits in card["ticks"])
        for line, one in zip(card["rows"], row["attributes"], strict=True):
            assert line["zero"] == zero
            naive, twice, given = one["naive_bits"], one["twice_bits"] or 0.0, one["structure_bits"]
            ends = {"once": (0.0, naive - twice), "twice": (naive - twice, naive), "given": (0.0, given)}
            assert (line["twice"] is not None) == bool(twice)
            for kind, bits_of in ends.items():
                if line[kind] is not None:
                    low, high = sorted(zero + scale * one for one in bits_of)
                    assert line[kind]["x"] == pytest.approx(low, abs=0.3)
                    assert line[kind]["x"] + line[kind]["width"] == pytest.approx(high, abs=0.3)
            if line["twice"]:
                hatched += 1
                assert line["twice"]["fill"].startswith('url("#twice-hatch")')
    assert hatched > 20


def test_the_first_sentences_tell_who_was_right_and_what_was_counted_twice(browser: Browser, demo: Made) -> None:
    records, levels = demo.document["records"], demo.document["class_levels"]
    with opened(browser, demo.path) as found:
        first, second, third = found.page.locator("#records > p").all_text_contents()
        names = found.page.locator("#records > p").nth(1).locator("bdi").all_text_contents()
    who = [right(row, levels) for row in records["rows"]]
    structure = records["structure"]
    assert f"{structure} alone is right in {who.count('structure')}, naive alone in {who.count('naive')}" in first
    differ = records["differ"]
    assert f"In {differ['records']} of all 6,000" in first
    assert f"{structure} is right in {differ['structure_right']}, naive in {differ['naive_right']}" in first
    assert "say nothing of the average" in first
    expected: list[str] = []
    for kind in KINDS:
        means = told_of(demo.document, *kind)
        ranked = sorted((name for name in means if means[name][1]), key=lambda name: (-means[name][0], name))[:3]
        expected += ranked
        for name in ranked:
            assert f"{name} ({means[name][0]:.2f} bits, in {means[name][1]} of 12)" in second
    assert names == expected
    assert "mind who gets this page" in third


@pytest.mark.parametrize("by", ["mouse", "keyboard"])
def test_the_first_record_is_open_and_each_can_be_opened(browser: Browser, demo: Made, by: str) -> None:
    with opened(browser, demo.path) as found:
        records = found.page.locator(RECORDS)
        assert [one["open"] for one in cards(records)] == [True] + [False] * 11
        for number in (0, 4, 11):
            before = cards(records)[number]["open"]
            heading = records.nth(number).locator("summary")
            if by == "keyboard":
                heading.focus()
                found.page.keyboard.press("Enter")
            else:
                heading.click()
            assert cards(records)[number]["open"] != before
        records.nth(11).locator("summary").focus()
        found.page.keyboard.press("Tab")
        label = found.page.evaluate("document.activeElement.getAttribute('aria-label')")
        assert label == f"Evidence in row {rows_of(demo)[11]['line']:,}"
        found.assert_quiet()


@pytest.mark.parametrize("theme", ["light", "dark"])
def test_bars_have_the_colours_of_the_theme_and_the_hatching_is_there(browser: Browser, demo: Made, theme: Any) -> None:
    colours = PALETTES[theme]
    fill = "(one) => getComputedStyle(one).fill"
    with opened(browser, demo.path, theme=theme) as found:
        page = found.page
        kinds = {"told-once": "bar", "told-given": "text", "hatch-line": "bar", "hatch-ground": "background"}
        for kind, token in kinds.items():
            assert page.locator(f"#records .{kind}").first.evaluate(fill) == rgb(colours[token])
        assert page.locator("#twice-hatch").count() == 1
        box = page.locator(f"{RECORDS}[open] .told-twice").first.bounding_box()
        assert box is not None
        assert box["width"] > 3


@pytest.mark.parametrize("name", ["demo", "hostile", "wide"])
@pytest.mark.parametrize("width", [420, 900])
def test_nothing_scrolls_sideways_but_the_tables(
    browser: Browser, name: str, width: int, request: pytest.FixtureRequest
) -> None:
    with opened(browser, request.getfixturevalue(name).path, width=width) as found:
        unfolded(found.page)
        assert not found.page.evaluate(SIDEWAYS)
        box = found.page.locator(f"{RECORDS} svg.evidence").nth(1).bounding_box()
        assert box is not None
        assert 180 < box["width"] < 330
        found.assert_quiet()


def test_hostile_names_and_levels_stay_texts(browser: Browser, hostile: Made) -> None:
    with opened(browser, hostile.path) as found:
        unfolded(found.page)
        texts = "".join(found.page.locator(RECORDS).all_text_contents())
        assert "<script>" in texts
        assert found.page.locator("#records script, #records img").count() == 0
        assert found.page.evaluate("window.hacked") is None
        assert hostile.document["class"] == TARGET


def test_closed_records_print_their_heading(browser: Browser, demo: Made) -> None:
    with opened(browser, demo.path) as found:
        found.page.emulate_media(media="print")
        headings = found.page.locator(f"{RECORDS} > summary")
        assert headings.count() == 12
        assert all(one.is_visible() for one in headings.all())
        assert found.page.locator(f"{RECORDS} table").nth(0).is_visible()
        assert not found.page.locator(f"{RECORDS} table").nth(1).is_visible()
        assert not found.page.locator("#records .how").is_visible()


NONE = {"structure": None, "reason": "No structure compared has an edge.", "differ": None, "rows": []}


@pytest.mark.parametrize(
    ("records", "words"),
    [
        (None, "none were asked for (--records 0)"),
        (NONE, "No records are shown. No structure compared has an edge."),
        (NONE | {"structure": "tan"}, "naive and tan say the same of all"),
    ],
)
def test_the_page_says_why_no_records_are_shown(
    browser: Browser, demo: Made, tmp_path: Path, records: dict[str, Any] | None, words: str
) -> None:
    document = copy.deepcopy(demo.document) | {"records": records}
    made = page_made(tmp_path, document, {})
    with opened(browser, made.path) as found:
        text = found.page.locator("#records").inner_text()
        assert words in text
        assert found.page.locator(RECORDS).count() == 0
        assert "mind who" not in text
        found.assert_quiet()


def test_cells_not_observed_stand_in_a_line_of_their_own(browser: Browser, demo: Made, tmp_path: Path) -> None:
    document = copy.deepcopy(demo.document)
    row = document["records"]["rows"][0]
    child = next(one for one in row["attributes"] if one["parents"])
    root, dropped = [one for one in row["attributes"] if not one["parents"]][:2]
    unknown = {"structure_bits": None, "twice_bits": None, "adds_bits": None, "turned_round": False}
    child |= unknown
    root |= unknown | {"level": None, "naive_bits": 0.0}
    dropped |= {"left_out": True, "structure_bits": 0.0, "twice_bits": 0.0, "adds_bits": -dropped["naive_bits"]}
    row["structure"]["summed_out_bits"] = -1.23
    made = page_made(tmp_path, document, {})
    with opened(browser, made.path) as found:
        card = cards(found.page.locator(RECORDS).first)[0]
        found.assert_quiet()
    by_name = {line["name"]: line for line in card["rows"]}
    assert by_name[child["name"]]["role"].endswith("a cell is not observed")
    assert by_name[child["name"]]["cells"][3:] == ["–", "–", "–"]
    assert by_name[root["name"]]["level"] == "not observed"
    assert by_name[child["name"]]["given"] is None
    assert by_name[dropped["name"]]["role"] == f"left out by {document['records']['structure']}"
    assert by_name[dropped["name"]]["twice"] is None
    assert card["foot"][0] == ["what hangs on cells not observed", "0.00", "", "", "-1.23"]


def test_the_section_can_be_reached_from_the_top(browser: Browser, demo: Made) -> None:
    with opened(browser, demo.path) as found:
        links = found.page.locator("nav.sections a").all_text_contents()
        assert links.index("Attributes") + 1 == links.index("Records") == links.index("How it was done") - 1
        found.page.locator("nav.sections a", has_text=re.compile("^Records$")).click()
        top = found.page.locator("#records").evaluate("(one) => one.getBoundingClientRect().top")
        assert -50 < top < 200
