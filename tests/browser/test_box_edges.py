"""A box that holds more than it shows says so at the edge behind which the rest lies."""

from typing import Any

import pytest
from pages import Made, opened
from playwright.sync_api import Browser, Page

SIGNS = """() => [...document.querySelectorAll('.box')].filter((one) => one.checkVisibility()).map((one) => ({
  name: one.getAttribute('aria-label'),
  more: one.scrollWidth - one.clientWidth > 1,
  sign: getComputedStyle(one).boxShadow !== 'none',
}))"""
SETTLED = "new Promise((done) => requestAnimationFrame(() => requestAnimationFrame(done)))"


def signs(page: Page) -> list[dict[str, Any]]:
    page.evaluate(SETTLED)
    found: list[dict[str, Any]] = page.evaluate(SIGNS)
    return found


@pytest.mark.parametrize("width", [1280, 420])
def test_boxes_that_scroll_sideways_and_no_others_show_it(browser: Browser, demo: Made, width: int) -> None:
    with opened(browser, demo.path, width=width) as found:
        found.page.locator("#all-columns").check()
        found.page.locator("#pair-all-columns").check()
        found.page.locator("#pair-table .pair-open").first.click()
        boxes = signs(found.page)
        assert any(one["more"] for one in boxes)
        assert [one["name"] for one in boxes if one["more"] != one["sign"]] == []


def test_the_sign_stands_at_the_edge_where_more_lies(browser: Browser, demo: Made) -> None:
    with opened(browser, demo.path, width=420) as found:
        box = found.page.locator("#pair-box")
        seen = []
        for place in ("0", "one.clientWidth / 3", "one.scrollWidth"):
            box.evaluate(f"(one) => {{ one.scrollLeft = {place}; }}")
            found.page.evaluate(SETTLED)
            seen.append(box.evaluate("(one) => ['more-before', 'more-after'].map((sign) => one.matches(`.${sign}`))"))
        assert seen == [[False, True], [True, True], [True, False]]
