"""The ledger of pairs: every column sorts and every filter sifts, by mouse and by keyboard, as the comparison says."""

from collections.abc import Callable
from typing import Any

import pytest
from ledger_reading import all_rows, listed
from pages import Made, Opened
from playwright.sync_api import Locator, Page, expect
from table_reading import bits_twice

WAYS = ("mouse", "keyboard")
VERDICTS = ("dependent", "detected, but negligible", "negligible", "not enough data")
OUTCOMES = ("explained", "remains", "strengthened", "appears only given the class", "not enough data")
Pair = dict[str, Any]


def joining(document: dict[str, Any], pair: Pair) -> list[str]:
    ends = {pair["a"], pair["b"]}
    structures = document["structures"]
    return [one["name"] for one in structures if any({e["parent"], e["child"]} == ends for e in one["edges"])]


def joined_key(document: dict[str, Any], pair: Pair) -> tuple[int, bool]:
    names = joining(document, pair)
    return len(names), document["recommended"]["name"] in names


COLUMNS: dict[str, Callable[[dict[str, Any], Pair], Any]] = {
    "pair": lambda _, pair: (pair["a"].casefold(), pair["b"].casefold()),
    "verdict": lambda _, pair: VERDICTS.index(pair["verdict"]),
    "bits": lambda _, pair: pair["bits"],
    "at_most": lambda _, pair: pair["bits_at_most"],
    "marginal": lambda _, pair: pair["marginal_bits"],
    "double_counted": lambda _, pair: bits_twice(pair),
    "outcome": lambda _, pair: OUTCOMES.index(pair["outcome"]),
    "cramers_v": lambda _, pair: pair["cramers_v"],
    "statistic": lambda _, pair: pair["statistic"],
    "df": lambda _, pair: pair["df"],
    "adjusted_p": lambda _, pair: pair["adjusted_p"],
    "carried": lambda _, pair: pair["sample_carries_it"],
    "min_expected": lambda _, pair: pair["min_expected"],
    "detectable": lambda _, pair: pair["detectable_bits"],
    "joined": joined_key,
}


def ranked(demo: Made) -> list[Pair]:
    return sorted(demo.document["pairs"], key=lambda one: -one["bits"])


def names_of(pairs: list[Pair]) -> list[tuple[str, ...]]:
    return [(one["a"], one["b"]) for one in pairs]


def press(page: Page, control: Locator, way: str, key: str = "Space") -> None:
    if way == "mouse":
        control.click()
    else:
        control.focus()
        page.keyboard.press(key)


def sorted_pairs(demo: Made, key: str, down: bool) -> list[tuple[str, ...]]:
    """Sort by exact figures: equal ones keep the order of their bits, pairs without a figure come last."""
    rows = [(COLUMNS[key](demo.document, pair), pair) for pair in ranked(demo)]
    with_one = sorted((row for row in rows if row[0] is not None), key=lambda row: row[0], reverse=down)
    return names_of([pair for _, pair in [*with_one, *(row for row in rows if row[0] is None)]])


@pytest.mark.parametrize("way", WAYS)
def test_every_column_sorts_both_ways_by_exact_figures(found: Opened, demo: Made, way: str) -> None:
    page = found.page
    press(page, page.locator("#pair-all-columns"), way)
    heads = page.locator("#pair-table thead th:has(button)")
    keys = heads.evaluate_all("(all) => all.map((one) => one.dataset.column)")
    assert set(keys) - {"method"} == set(COLUMNS)
    for key in COLUMNS if way == "mouse" else ("pair", "bits", "detectable"):
        head = page.locator(f'#pair-table thead th[data-column="{key}"]')
        ways = set()
        for _ in range(2):
            press(page, head.locator("button"), way, "Enter")
            down = head.get_attribute("aria-sort") == "descending"
            ways.add(down)
            assert listed(page) == sorted_pairs(demo, key, down), (key, down)
            assert page.locator("#pair-table thead th[aria-sort]").count() == 1
        assert ways == {True, False}


def test_methods_sort_by_their_words(found: Opened) -> None:
    page = found.page
    page.locator("#pair-all-columns").check()
    page.locator('#pair-table thead th[data-column="method"] button').click()
    place = page.locator("#pair-table thead th").evaluate_all(
        "(all) => all.findIndex((one) => one.dataset.column === 'method')"
    )
    words = [row["cells"][place] for row in all_rows(page)]
    assert len(set(words)) > 1
    assert words in (sorted(words), sorted(words, reverse=True))


@pytest.mark.parametrize("way", WAYS)
def test_columns_are_brief_until_all_are_asked_for(found: Opened, way: str) -> None:
    page = found.page
    heads = page.locator("#pair-table thead th")
    brief = sum(one.is_visible() for one in heads.all())
    press(page, page.locator("#pair-all-columns"), way)
    assert sum(one.is_visible() for one in heads.all()) == heads.count() > brief
    press(page, page.locator("#pair-all-columns"), way)
    assert sum(one.is_visible() for one in heads.all()) == brief


@pytest.mark.parametrize("way", WAYS)
def test_each_verdict_can_be_left_out(found: Opened, demo: Made, way: str) -> None:
    page = found.page
    assert listed(page) == names_of(ranked(demo))
    boxes = page.locator('input[name="pair-verdict"]')
    assert [box.get_attribute("value") for box in boxes.all()] == list(VERDICTS)
    for box in boxes.all():
        word = box.get_attribute("value")
        press(page, box, way)
        assert listed(page) == names_of([one for one in ranked(demo) if one["verdict"] != word])
        press(page, box, way)
    for box in boxes.all()[1:]:
        press(page, box, way)
    assert listed(page) == names_of([one for one in ranked(demo) if one["verdict"] == "dependent"])
    press(page, page.locator("#pair-reset"), way)
    assert listed(page) == names_of(ranked(demo))


@pytest.mark.parametrize("way", WAYS)
def test_pairs_are_found_by_name(found: Opened, demo: Made, way: str) -> None:
    page, search = found.page, found.page.locator("#pair-search")
    for words in ("DOOR", "door wait", "dock_wait ~ door_alarm", "no attribute is called so"):
        if way == "mouse":
            search.fill(words)
        else:
            search.focus()
            page.keyboard.press("Control+a")
            page.keyboard.type(words)
        parts = words.lower().split()
        hits = [one for one in ranked(demo) if all(part in f"{one['a']} ~ {one['b']} ~ {one['a']}" for part in parts)]
        assert listed(page) == names_of(hits)
        assert page.locator("#pair-count").inner_text().startswith(f"{len(hits)} of {len(ranked(demo))} pairs")
        assert page.locator("#pair-none").is_visible() == (not hits)


@pytest.mark.parametrize("way", WAYS)
def test_pairs_are_sifted_by_attribute(found: Opened, demo: Made, way: str) -> None:
    page, choice = found.page, found.page.locator("#pair-attribute")
    assert choice.locator("option").all_inner_texts()[1:] == demo.document["attributes"]
    choice.focus()
    for name in demo.document["attributes"]:
        if way == "mouse":
            choice.select_option(label=name)
        else:
            page.keyboard.press("ArrowDown")
        assert listed(page) == names_of([one for one in ranked(demo) if name in (one["a"], one["b"])])


@pytest.mark.parametrize("way", WAYS)
def test_pairs_are_sifted_by_the_structures_that_join_them(found: Opened, demo: Made, way: str) -> None:
    page, choice = found.page, found.page.locator("#pair-joined")
    wanted = demo.document["recommended"]["name"]
    tests: dict[str, Callable[[list[str]], bool]] = {
        "any": bool,
        "recommended": lambda names: wanted in names,
        "none": lambda names: not names,
    }
    assert [one.get_attribute("value") for one in choice.locator("option").all()] == ["", *tests]
    choice.focus()
    for value, passes in tests.items():
        if way == "mouse":
            choice.select_option(value=value)
        else:
            page.keyboard.press("ArrowDown")
        hits = [one for one in ranked(demo) if passes(joining(demo.document, one))]
        assert 0 < len(hits) < len(ranked(demo))
        assert listed(page) == names_of(hits)
        assert f"({len(hits)})" in choice.locator("option:checked").inner_text()


def test_filters_hold_together_and_with_the_order(found: Opened, demo: Made) -> None:
    page = found.page
    page.locator('input[name="pair-verdict"][value="negligible"]').uncheck()
    page.locator("#pair-attribute").select_option(label="dock_wait")
    page.locator('#pair-table thead th[data-column="detectable"] button').click()
    order = sorted_pairs(demo, "detectable", False)
    kept = {
        names
        for names, one in zip(names_of(ranked(demo)), ranked(demo), strict=True)
        if one["verdict"] != "negligible" and "dock_wait" in names
    }
    assert listed(page) == [names for names in order if names in kept]


def test_the_ledger_is_gone_through_by_keys_and_enter_opens_a_pair(found: Opened, demo: Made) -> None:
    page, expected = found.page, names_of(ranked(demo))
    page.locator("#pair-table .pair-open").first.focus()
    assert page.locator('#pair-table .pair-open[tabindex="0"]').count() == 1
    steps = (("ArrowDown", 1), ("ArrowDown", 2), ("ArrowUp", 1), ("End", len(expected) - 1), ("Home", 0))
    for key, place in steps:
        page.keyboard.press(key)
        page.keyboard.press("Enter")
        title = page.get_by_role("dialog").locator("#pair-panel-title bdi")
        assert tuple(title.all_inner_texts()) == expected[place]
        page.keyboard.press("Escape")
        focused = page.locator("#pair-table tr[data-place]:has(:focus)")
        expect(focused).to_have_attribute("data-place", str(place))
        expect(focused).to_be_in_viewport()
    page.keyboard.press("PageDown")
    page.keyboard.press("PageDown")
    place = int(page.locator("#pair-table tr[data-place]:has(:focus)").get_attribute("data-place") or 0)
    assert place > 10
    page.keyboard.press("PageUp")
    page.keyboard.press("PageUp")
    expect(page.locator("#pair-table tr[data-place]:has(:focus)")).to_have_attribute("data-place", "0")
