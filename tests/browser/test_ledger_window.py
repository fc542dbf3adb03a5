"""The ledger of pairs fits its box with the verdict in sight, cuts no figure, and shows no hole where rows belong."""

import pytest
from pages import Made, opened
from playwright.sync_api import Browser, expect

CUT_CELLS = """(all) => all.filter((one) => one.offsetWidth && one.scrollWidth > one.clientWidth)
  .map((one) => one.textContent)"""
HOLE = """(box) => {
  box.scrollTop += box.clientHeight - box.querySelector('thead').offsetHeight;
  const frame = box.getBoundingClientRect();
  return [0.3, 0.6, 0.95].filter((share) => {
    const at = document.elementFromPoint(frame.left + 40, frame.top + share * frame.height);
    return !at.closest('tr[data-place]');
  });
}"""


@pytest.mark.parametrize("width", [1280, 1200])
def test_the_ledger_fits_and_cuts_nothing(browser: Browser, demo: Made, width: int) -> None:
    with opened(browser, demo.path, width=width) as found:
        box = found.page.locator("#pair-box")
        assert box.evaluate("(one) => one.scrollWidth <= one.clientWidth")
        box.evaluate("(one) => { one.scrollTop = one.scrollHeight / 3; }")
        found.page.evaluate("new Promise((done) => requestAnimationFrame(() => requestAnimationFrame(done)))")
        cells = found.page.locator("#pair-table tr[data-place] > *")
        assert any("about" in text for text in cells.all_inner_texts())
        assert cells.evaluate_all(CUT_CELLS) == []


@pytest.mark.parametrize("width", [1280, 420])
def test_a_whole_window_of_rows_waits_before_it_is_scrolled_to(browser: Browser, demo: Made, width: int) -> None:
    with opened(browser, demo.path, width=width, height=700) as found:
        box = found.page.locator("#pair-box")
        box.scroll_into_view_if_needed()
        assert box.evaluate(HOLE) == []


def test_paper_needs_no_event_to_hold_the_first_rows(browser: Browser, demo: Made) -> None:
    with opened(browser, demo.path) as found:
        found.page.locator("#pair-box").evaluate("(one) => { one.scrollTop = 900; }")
        found.page.emulate_media(media="print")
        expect(found.page.locator("#pair-table .gap")).to_have_count(0)
        assert found.page.locator("#pair-table tbody tr").first.get_attribute("data-place") == "0"
