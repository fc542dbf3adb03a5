"""The page on paper: every section in its order, nothing cut at the edge of the sheet, no controls, some pages."""

import re
from collections.abc import Iterator

import pytest
from boxes import CUT, OUT_OF_CHIPS, OUT_OF_DRAWINGS, OVERLAPPING, STICKING_OUT
from pages import Made, Opened, opened
from playwright.sync_api import Browser

A4 = (794, 1123)  # pixels at 96 to the inch
PAGE = re.compile(rb"/Type\s*/Page\b")
BOOKMARK = re.compile(rb"/Title\s*\(((?:\\.|[^\\)])*)\)")
HEADINGS = """[...document.querySelectorAll('main > section')].map((one) => one.querySelector('h1, h2').textContent)"""
HIDDEN_BEHIND_AN_EDGE = """() => [...document.querySelectorAll('.box')].filter((one) => one.checkVisibility()
  && (one.scrollWidth > one.clientWidth + 1 || one.scrollHeight > one.clientHeight + 1))
  .map((one) => one.getAttribute('aria-label'))"""
CONTROLS = "nav, input, select, .controls, #theme, #pair-panel, .scripted-only"
PAGES = ("demo", "hostile")


@pytest.fixture(params=PAGES)
def printed(browser: Browser, request: pytest.FixtureRequest) -> Iterator[Opened]:
    """Lay a page out as it is when it is printed on A4."""
    with opened(browser, request.getfixturevalue(request.param).path, width=A4[0], height=A4[1]) as found:
        found.page.emulate_media(media="print")
        found.page.evaluate("dispatchEvent(new Event('beforeprint'))")
        yield found
        found.assert_quiet()


def test_everything_is_on_the_sheet(printed: Opened) -> None:
    assert printed.page.evaluate("document.scrollingElement.scrollWidth") <= A4[0]
    assert printed.page.evaluate(HIDDEN_BEHIND_AN_EDGE) == []
    for fault in (STICKING_OUT, OUT_OF_CHIPS, OUT_OF_DRAWINGS, CUT, OVERLAPPING):
        assert printed.page.evaluate(fault) == []


def test_controls_are_left_out(printed: Opened) -> None:
    assert printed.page.locator(CONTROLS).count() > 20
    assert [one for one in printed.page.locator(CONTROLS).all() if one.is_visible()] == []


def test_every_section_is_there(printed: Opened) -> None:
    for section in printed.page.locator("main > section").all():
        assert section.is_visible()
        assert len(section.inner_text()) > 100
    assert printed.page.locator("footer").is_visible()


@pytest.mark.parametrize("scripts", [True, False])
def test_it_prints_to_a_few_pages_with_all_headings(browser: Browser, demo: Made, scripts: bool) -> None:
    with opened(browser, demo.path, scripts=scripts) as found:
        headings = ["".join(one.split()) for one in found.page.evaluate(HEADINGS) if one.isascii()]
        paper = found.page.pdf(format="A4", outline=True, tagged=True)
    bookmarks = ["".join(one.decode("latin-1").split()) for one in BOOKMARK.findall(paper)]
    assert len(headings) >= 6
    assert [one for one in headings if one not in bookmarks] == []
    assert 4 <= len(PAGE.findall(paper)) <= 25


def test_the_ledger_prints_its_first_rows_from_the_first(browser: Browser, demo: Made) -> None:
    """Only rows in sight stand in the page, wherever it was scrolled to: on paper these are the strongest 40."""
    ranked = sorted(demo.document["pairs"], key=lambda one: -one["bits"])[:40]
    with opened(browser, demo.path) as found:
        found.page.locator("#pair-table .pair-open").first.focus()
        found.page.keyboard.press("End")
        found.page.emulate_media(media="print")
        found.page.evaluate("dispatchEvent(new Event('beforeprint'))")
        rows = found.page.locator("#pair-table tbody tr")
        names = [tuple(row.locator("th bdi").all_text_contents()) for row in rows.all()]
        assert names == [(one["a"], one["b"]) for one in ranked]
        found.page.emulate_media(media="screen")
        found.page.evaluate("dispatchEvent(new Event('afterprint'))")
        assert found.page.locator("#pair-table tbody tr.gap").count() >= 1
