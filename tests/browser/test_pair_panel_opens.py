"""The panel of a pair as a dialog: it takes the focus, holds it where it covers the page, and gives it back."""

from collections.abc import Callable

import pytest
from drawing_reading import arrow_of, panel_of, point_of, recommended, strongest
from pages import Made, opened
from playwright.sync_api import Browser, Locator, Page, expect

WIDTHS = (1280, 420)
CLOSED_BY = ("Escape", "button by mouse", "button by keyboard")


def from_arrow(page: Page, demo: Made) -> Locator:
    arrow = arrow_of(panel_of(page, recommended(demo)["name"]), strongest(demo))
    arrow.focus()
    page.keyboard.press("Enter")
    return arrow


def from_arrow_by_mouse(page: Page, demo: Made) -> Locator:
    arrow = arrow_of(panel_of(page, recommended(demo)["name"]), strongest(demo))
    page.mouse.click(*point_of(page, arrow))
    return arrow


def from_row_of_edges(page: Page, demo: Made) -> Locator:
    button = panel_of(page, recommended(demo)["name"]).locator("table.edges tbody tr").first.get_by_role("button")
    button.click()
    return button


def from_ledger(page: Page, demo: Made) -> Locator:
    button = page.locator("#pair-table .pair-open").first
    button.click()
    return button


def from_triangle(page: Page, demo: Made) -> Locator:
    page.locator("#triangle").focus()
    page.keyboard.press("Enter")
    return page.locator("#triangle")


OPENERS: tuple[Callable[[Page, Made], Locator], ...] = (
    from_arrow,
    from_arrow_by_mouse,
    from_row_of_edges,
    from_ledger,
    from_triangle,
)


def close(page: Page, way: str) -> None:
    button = page.locator("#pair-panel-close")
    if way == "Escape":
        page.keyboard.press("Escape")
    elif way == "button by mouse":
        button.click()
    else:
        page.keyboard.press("Tab")
        expect(button).to_be_focused()
        page.keyboard.press("Enter")


@pytest.mark.parametrize(
    ("opener", "way"), [*((one, "Escape") for one in OPENERS), *((from_ledger, way) for way in CLOSED_BY[1:])]
)
@pytest.mark.parametrize("width", WIDTHS)
def test_focus_goes_into_the_panel_and_comes_back(
    browser: Browser, demo: Made, width: int, opener: Callable[[Page, Made], Locator], way: str
) -> None:
    with opened(browser, demo.path, width=width) as found:
        page = found.page
        came_from = opener(page, demo)
        panel = page.get_by_role("dialog")
        expect(panel).to_be_visible()
        expect(panel).to_have_accessible_name(" ~ ".join(panel.locator("h2 bdi").all_inner_texts()))
        assert panel.evaluate("(one) => one.contains(document.activeElement)")
        close(page, way)
        expect(panel).to_be_hidden()
        expect(came_from).to_be_focused()
        found.assert_quiet()


def test_a_second_pair_takes_the_place_of_the_first(browser: Browser, demo: Made) -> None:
    """Beside the page the panel leaves the page in use; closing gives the focus to what opened it last."""
    with opened(browser, demo.path, height=1200) as found:
        page = found.page
        titles = []
        for place in (0, 1):
            page.locator("#pair-table .pair-open").nth(place).click()
            titles.append(page.locator("#pair-panel-title").inner_text())
        assert titles[0] != titles[1]
        assert page.locator("dialog[open]").count() == 1
        page.keyboard.press("Escape")
        expect(page.locator("#pair-table .pair-open").nth(1)).to_be_focused()


def test_where_it_covers_the_page_the_focus_stays_inside(browser: Browser, demo: Made) -> None:
    with opened(browser, demo.path, width=420) as found:
        from_ledger(found.page, demo)
        for _ in range(40):
            found.page.keyboard.press("Tab")
            assert found.page.evaluate("!document.activeElement.closest('main, header, nav, footer')")


@pytest.mark.parametrize("width", WIDTHS)
def test_the_panel_is_within_the_window_and_can_be_read_to_its_end(browser: Browser, demo: Made, width: int) -> None:
    with opened(browser, demo.path, width=width) as found:
        from_ledger(found.page, demo)
        panel = found.page.locator("#pair-panel")
        box = panel.bounding_box()
        assert box is not None
        assert box["x"] >= 0
        assert box["x"] + box["width"] <= width + 0.5
        assert panel.evaluate("(one) => one.scrollWidth <= one.clientWidth")
        last = panel.locator("dl dd").last
        last.scroll_into_view_if_needed()
        expect(last).to_be_in_viewport()
        expect(found.page.locator("#pair-panel-close")).to_be_in_viewport()
