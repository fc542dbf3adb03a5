"""Text stands inside its box, apart from other text, and stands out from its ground, in both themes and widths."""

import pytest
from boxes import CUT, OUT_OF_CHIPS, OUT_OF_DRAWINGS, OVERLAPPING, STICKING_OUT
from contrast import TOO_FAINT
from pages import Theme, opened, unfolded
from playwright.sync_api import Browser

WIDTHS = (1280, 420)
PAGES = ("demo", "hostile")


@pytest.mark.parametrize("width", WIDTHS)
@pytest.mark.parametrize("name", PAGES)
@pytest.mark.parametrize("scripts", [True, False])
def test_the_page_never_scrolls_sideways(
    browser: Browser, name: str, width: int, scripts: bool, request: pytest.FixtureRequest
) -> None:
    with opened(browser, request.getfixturevalue(name).path, width=width, scripts=scripts) as found:
        assert found.page.evaluate("document.scrollingElement.scrollWidth <= innerWidth")
        assert found.page.evaluate(STICKING_OUT) == []
        unfolded(found.page)
        assert found.page.evaluate("document.scrollingElement.scrollWidth <= innerWidth")


@pytest.mark.parametrize("width", WIDTHS)
@pytest.mark.parametrize("name", PAGES)
def test_text_stays_inside_its_box(browser: Browser, name: str, width: int, request: pytest.FixtureRequest) -> None:
    with opened(browser, request.getfixturevalue(name).path, width=width) as found:
        unfolded(found.page)
        assert found.page.locator("g.chip").count() > 0
        for fault in (OUT_OF_CHIPS, OUT_OF_DRAWINGS, CUT, OVERLAPPING):
            assert found.page.evaluate(fault) == []


@pytest.mark.parametrize("name", PAGES)
def test_text_stays_inside_the_panel(browser: Browser, name: str, request: pytest.FixtureRequest) -> None:
    with opened(browser, request.getfixturevalue(name).path, width=420) as found:
        found.page.locator("#pair-table .pair-open").first.click()
        unfolded(found.page)
        panel = found.page.locator("#pair-panel")
        assert panel.evaluate("(one) => one.scrollWidth <= one.clientWidth")
        assert found.page.evaluate(CUT) == []
        assert found.page.evaluate(OUT_OF_DRAWINGS) == []


@pytest.mark.parametrize("theme", ["light", "dark"])
@pytest.mark.parametrize("name", PAGES)
def test_text_stands_out_from_its_ground(
    browser: Browser, name: str, theme: Theme, request: pytest.FixtureRequest
) -> None:
    with opened(browser, request.getfixturevalue(name).path, theme=theme) as found:
        found.page.locator("#pair-table .pair-open").first.click()
        unfolded(found.page)
        checked, faint = found.page.evaluate(TOO_FAINT)
        assert checked > 300
        assert faint == []


FAULTS = {
    "sticking out": (".answer h1 { width: 2000px }", STICKING_OUT),
    "out of chips": ("g.chip text { font-size: 90px }", OUT_OF_CHIPS),
    "out of drawings": ("#triangle-names text { font-size: 90px }", OUT_OF_DRAWINGS),
    "cut": ("#score-table td { max-width: 9px; overflow: hidden; display: block }", CUT),
    "overlapping": ("#score-table { line-height: 2px }", OVERLAPPING),
}


@pytest.mark.parametrize("fault", FAULTS)
def test_what_leaves_its_box_is_noticed(browser: Browser, request: pytest.FixtureRequest, fault: str) -> None:
    style, check = FAULTS[fault]
    with opened(browser, request.getfixturevalue("hostile").path, trusted=True) as found:
        found.page.add_style_tag(content=style)
        assert found.page.evaluate(check) != []


@pytest.mark.parametrize(
    "style", [".quiet { color: #bbb }", ".bnx-fill-text { fill: #ccc }", "td.residual { color: #fc4 }"]
)
def test_text_that_is_too_faint_is_noticed(browser: Browser, request: pytest.FixtureRequest, style: str) -> None:
    with opened(browser, request.getfixturevalue("demo").path, trusted=True) as found:
        found.page.locator("#pair-table .pair-open").first.click()
        found.page.add_style_tag(content=style)
        unfolded(found.page)
        assert found.page.evaluate(TOO_FAINT)[1] != []
