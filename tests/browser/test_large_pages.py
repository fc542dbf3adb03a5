"""Pages of 60 attributes x 10 classes and of 400 attributes: small enough, quiet, and usable to their last row."""

import time
from collections.abc import Callable
from dataclasses import dataclass
from typing import Any

import pytest
from boxes import OUT_OF_CHIPS, STICKING_OUT
from drawing_reading import arrows, open_structure, shown
from ledger_reading import listed
from pages import Made, opened
from playwright.sync_api import Browser, Page, expect
from table_reading import pair_of

LARGE = ("wide", "very_wide")
MOST_BYTES = {"wide": 8_000_000, "very_wide": 8_000_000}
TRIANGLE = "#triangle-names g > text > title"
MOST_SECONDS = {"wide": 3.0, "very_wide": 6.0}


@dataclass(frozen=True)
class Large:
    """A page and which one it is."""

    name: str
    made: Made


@pytest.fixture(params=LARGE)
def large(request: pytest.FixtureRequest) -> Large:
    return Large(request.param, request.getfixturevalue(request.param))


def test_the_page_is_small_enough(large: Large) -> None:
    assert large.made.path.stat().st_size < MOST_BYTES[large.name]


@pytest.mark.parametrize("width", [1280, 420])
@pytest.mark.parametrize("scripts", [True, False])
def test_the_page_opens_quietly_within_its_width(browser: Browser, large: Large, scripts: bool, width: int) -> None:
    with opened(browser, large.made.path, width=width, scripts=scripts) as found:
        found.page.set_default_timeout(60_000)
        assert found.page.evaluate("document.scrollingElement.scrollWidth <= innerWidth")
        assert found.page.evaluate(STICKING_OUT) == []
        assert found.page.evaluate(OUT_OF_CHIPS) == []
        found.assert_quiet()


def test_edges_that_are_left_out_are_drawn_on_demand(browser: Browser, large: Large) -> None:
    """A drawing of many edges shows the clear gains; the switch brings all edges between attributes that are drawn."""
    with opened(browser, large.made.path) as found:
        page = found.page
        switch = page.locator("#all-edges")
        panel = open_structure(page, "tan")
        entry = next(one for one in large.made.document["structures"] if one["name"] == "tan")
        first = shown(arrows(panel))
        assert 0 < first < len(entry["edges"])
        assert page.locator("#edges-shown").inner_text().startswith(f"{first} of {len(entry['edges'])} edges shown")
        switch.focus()
        page.keyboard.press("Space")
        expect(switch).to_be_checked()
        every = arrows(panel).count()
        assert first < every <= len(entry["edges"])
        assert page.locator("#edges-shown").inner_text().startswith(f"{every} of {len(entry['edges'])} edges shown")
        late = panel.locator(".drawings .late").first
        late.focus()
        ends = panel.locator(".told bdi").all_inner_texts()[:2]
        assert any([edge["parent"], edge["child"]] == ends for edge in entry["edges"])
        switch.click()
        assert shown(arrows(panel)) == first
        found.assert_quiet()


def test_the_ledger_holds_its_pairs_to_the_last(browser: Browser, large: Large) -> None:
    """A page holds the 10,000 strongest pairs, and those that a structure joins or the triangle shows."""
    with opened(browser, large.made.path) as found:
        page = found.page
        held = [one["bits"] for one in pairs_of_page(large.made, set(page.locator(TRIANGLE).all_text_contents()))]
        assert page.locator("#pair-count").inner_text().startswith(f"{len(held):,} of {len(held):,} pairs")
        page.locator("#pair-table .pair-open").first.focus()
        for key, bits in (("End", min(held)), ("Home", max(held))):
            page.keyboard.press(key)
            page.keyboard.press("Enter")
            names = set(page.locator("#pair-panel-title bdi").all_inner_texts())
            page.keyboard.press("Escape")
            assert pair_of(large.made.document, list(names))["bits"] == bits
        found.assert_quiet()


def pairs_of_page(made: Made, in_triangle: set[str]) -> list[dict[str, Any]]:
    edges = [edge for one in made.document["structures"] for edge in one["edges"]]
    joined = {frozenset((edge["parent"], edge["child"])) for edge in edges}
    ranked = sorted(made.document["pairs"], key=lambda one: -one["bits"])
    rest = [one for one in ranked[10_000:] if (pair := {one["a"], one["b"]}) in joined or pair <= in_triangle]
    return [*ranked[:10_000], *rest]


def busy(page: Page, work: Callable[[Page], None]) -> float:
    """Measure how long a control keeps the page busy, in seconds."""
    before = time.perf_counter()
    work(page)
    page.evaluate("new Promise((done) => requestAnimationFrame(() => requestAnimationFrame(done)))")
    return time.perf_counter() - before


def test_filters_sift_every_pair(browser: Browser, large: Large) -> None:
    pairs = large.made.document["pairs"]
    with opened(browser, large.made.path) as found:
        found.page.locator("#pair-search").fill("attribute_007 attribute_006")
        assert listed(found.page) == [
            (one["a"], one["b"]) for one in pairs if {one["a"], one["b"]} == {"attribute_006", "attribute_007"}
        ]


@pytest.mark.speed
def test_the_page_opens_in_time(browser: Browser, large: Large) -> None:
    """Best of three openings from disk to the last script, in seconds; and what sorting and filtering take."""
    taken = []
    for _ in range(3):
        before = time.perf_counter()
        with opened(browser, large.made.path) as found:
            found.page.wait_for_selector("html.scripted")
            taken.append(time.perf_counter() - before)
            sort = busy(found.page, lambda page: page.locator('#pair-table [data-column="detectable"] button').click())
            search = busy(found.page, lambda page: page.locator("#pair-search").fill("07"))
    print(f"\n{large.name}: opens in {min(taken):.2f} s; sorts in {sort:.2f} s, filters in {search:.2f} s")
    assert min(taken) < MOST_SECONDS[large.name]
    assert max(sort, search) < 1.0
