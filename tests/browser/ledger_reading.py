"""The ledger of pairs read to its end: only the rows in sight stand in the page, so it is scrolled through."""

from typing import Any

from playwright.sync_api import Page

ROWS = """(all) => all.map((row) => ({
  place: Number(row.dataset.place),
  names: [...row.querySelectorAll('th bdi')].map((one) => one.textContent),
  cells: [...row.cells].map((one) => one.textContent),
}))"""
AT_THE_END = """(one) => {
  const before = one.scrollTop;
  one.scrollTop += one.clientHeight / 2;
  return one.scrollTop === before;
}"""
DRAWN = "new Promise((done) => requestAnimationFrame(() => requestAnimationFrame(done)))"


def all_rows(page: Page) -> list[dict[str, Any]]:
    """Give every row of the ledger in its order: its names and its cells."""
    rows: dict[int, dict[str, Any]] = {}
    box = page.locator("#pair-box")
    box.evaluate("(one) => { one.scrollTop = 0; }")
    while True:
        page.evaluate(DRAWN)
        for row in page.locator("#pair-table tbody tr[data-place]").evaluate_all(ROWS):
            rows[row["place"]] = row
        if box.evaluate(AT_THE_END):
            assert sorted(rows) == list(range(len(rows)))
            return [rows[place] for place in sorted(rows)]


def listed(page: Page) -> list[tuple[str, ...]]:
    """Give the two names of every row."""
    return [tuple(row["names"]) for row in all_rows(page)]
