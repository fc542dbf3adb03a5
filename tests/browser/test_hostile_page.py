"""Names and levels are data: none runs, none breaks a script, and each is found whole on the page."""

from collections.abc import Iterator

import pytest
from drawing_reading import arrows, open_structure
from hostile_table import CLASSES, LEVELS, NAMES, STRUCTURES, TARGET, shown
from ledger_reading import all_rows
from pages import Made, Opened, opened
from playwright.sync_api import Browser, expect

# What a reader can come by: texts, titles, and what a screen reader says; not the data of the scripts.
READABLE = """() => {
  const found = [];
  const walker = document.createTreeWalker(document.body, NodeFilter.SHOW_TEXT);
  for (let text = walker.nextNode(); text; text = walker.nextNode()) {
    if (!text.parentElement.closest('script, style')) found.push(text.data);
  }
  for (const one of document.querySelectorAll('[title]')) found.push(one.getAttribute('title'));
  return found;
}"""


@pytest.fixture
def found(browser: Browser, hostile: Made) -> Iterator[Opened]:
    with opened(browser, hostile.path, height=1200) as one:
        yield one
        one.assert_quiet()
        assert one.page.evaluate("typeof window.hacked") == "undefined"
        assert one.page.locator("body img, body b b, body script:not([type]) ~ script").count() == 0


@pytest.mark.parametrize("scripts", [True, False])
def test_nothing_runs_and_nothing_is_lost(browser: Browser, hostile: Made, scripts: bool) -> None:
    assert set(hostile.document["attributes"]) == set(NAMES)
    with opened(browser, hostile.path, scripts=scripts) as found:
        found.assert_quiet()
        texts = {text.strip() for text in found.page.evaluate(READABLE)}
        for text in (*NAMES, *LEVELS, *CLASSES, TARGET):
            assert texts & {text.strip(), shown(text).strip()}, text[:40]
        if scripts:
            assert found.page.evaluate("typeof window.hacked") == "undefined"
        assert found.page.title().startswith(TARGET)


def test_every_pair_opens_with_its_whole_names_and_levels(found: Opened, hostile: Made) -> None:
    page = found.page
    pairs = {frozenset((one["a"], one["b"])) for one in hostile.document["pairs"]}
    tables = {frozenset((one["a"], one["b"])): one for one in hostile.document["pair_tables"]}
    assert len(pairs) == len(NAMES) * (len(NAMES) - 1) // 2
    seen = set()
    page.locator("#pair-table .pair-open").first.focus()
    for _ in pairs:
        page.keyboard.press("Enter")
        names = frozenset(page.locator("#pair-panel-title bdi").all_text_contents())
        seen.add(names)
        heads = page.locator("#pair-panel-tables thead").first.locator("th:not(:first-child) bdi")
        assert heads.all_text_contents() == tables[names]["b_levels"]
        captions = page.locator("#pair-panel-tables caption bdi").all_text_contents()
        assert captions == list(hostile.document["class_levels"])
        page.keyboard.press("Escape")
        page.keyboard.press("ArrowDown")
    assert seen == pairs


def test_filters_find_hostile_names(found: Opened, hostile: Made) -> None:
    page, pairs = found.page, hostile.document["pairs"]
    choice = page.locator("#pair-attribute")
    assert choice.locator("option").all_text_contents()[1:] == hostile.document["attributes"]
    for place, name in enumerate(hostile.document["attributes"]):
        choice.select_option(index=place + 1)
        rows = {frozenset(row["names"]) for row in all_rows(page)}
        assert rows == {frozenset((one["a"], one["b"])) for one in pairs if name in (one["a"], one["b"])}
    page.locator("#pair-reset").click()
    for words in ("__proto__", "<script>", "$&", "שלום", "🚚"):
        page.locator("#pair-search").fill(words)
        rows = {frozenset(row["names"]) for row in all_rows(page)}
        assert rows == {frozenset((one["a"], one["b"])) for one in pairs if words in one["a"] + one["b"]}


def test_every_structure_answers(found: Opened, hostile: Made) -> None:
    for name in STRUCTURES:
        panel = open_structure(found.page, name)
        entry = next(one for one in hostile.document["structures"] if one["name"] == name)
        assert arrows(panel).count() == len(entry["edges"])
        told = set()
        for arrow in arrows(panel).all():
            arrow.focus()
            told.add(tuple(panel.locator(".told bdi").all_text_contents()[:2]))
        assert told == {(edge["parent"], edge["child"]) for edge in entry["edges"]}
    found.page.locator("#beside").select_option(label="tan")
    expect(found.page.locator("#differences")).to_be_visible()


def test_every_cell_of_the_triangle_names_its_pair(found: Opened, hostile: Made) -> None:
    page = found.page
    names = page.locator("#triangle-names g > text > title").all_text_contents()
    assert sorted(names) == sorted(map(shown, hostile.document["attributes"]))
    page.locator("#triangle").focus()
    for _ in NAMES:
        page.keyboard.press("ArrowDown")
    page.keyboard.press("Home")
    for column in range(len(NAMES) - 1):
        told = page.locator("#triangle-strip bdi").all_text_contents()[:2]
        assert told == [names[column], names[-1]]
        page.keyboard.press("ArrowRight")
