"""The ledger and the triangle of pairs against an independent sort and filter of the comparison (pandas)."""

from collections.abc import Iterator

import pandas as pd
import pytest
from pages import Made, Opened, opened
from playwright.sync_api import Browser, Page, expect

ROWS = """(all) => all.map((row) =>
  [Number(row.dataset.place), [...row.querySelectorAll('th bdi')].map((one) => one.textContent)])"""
SCROLLED_TO_THE_END = """(one) => {
  const before = one.scrollTop;
  one.scrollTop += one.clientHeight / 2;
  return one.scrollTop === before;
}"""


@pytest.fixture
def found(browser: Browser, demo: Made) -> Iterator[Opened]:
    with opened(browser, demo.path, height=1200) as one:
        yield one
        one.assert_quiet()


def table(demo: Made) -> pd.DataFrame:
    return pd.DataFrame(demo.document["pairs"])


def listed(page: Page) -> list[tuple[str, ...]]:
    """All pairs of the ledger in their order: only the rows in sight stand in the page, so it is scrolled through."""
    rows: dict[int, tuple[str, ...]] = {}
    box = page.locator("#pair-box")
    box.evaluate("(one) => { one.scrollTop = 0; }")
    while True:
        page.evaluate("new Promise((done) => requestAnimationFrame(() => requestAnimationFrame(done)))")
        for place, names in page.locator("#pair-table tbody tr[data-place]").evaluate_all(ROWS):
            rows[place] = tuple(names)
        if box.evaluate(SCROLLED_TO_THE_END):
            return [rows[place] for place in sorted(rows)]


def pairs_of(rows: pd.DataFrame) -> list[tuple[str, ...]]:
    return list(zip(rows["a"], rows["b"], strict=True))


@pytest.mark.parametrize("key", ["bits", "marginal", "double_counted"])
def test_columns_sort_both_ways_by_exact_figures(found: Opened, demo: Made, key: str) -> None:
    column = {"marginal": "marginal_bits", "double_counted": "double_counted_bits"}.get(key, key)
    rows = table(demo)
    found.page.locator("#pair-all-columns").check()
    button = found.page.locator(f'#pair-table thead th[data-column="{key}"] button')
    orders = []
    for _ in range(2):
        button.click()
        figures = rows.set_index(["a", "b"])[column]
        orders.append([figures[pair] for pair in listed(found.page)])
    expected = rows[column].sort_values().to_list()
    assert sorted(orders) == sorted([expected, expected[::-1]])


def test_pairs_can_be_filtered_by_verdict_attribute_and_name(found: Opened, demo: Made) -> None:
    page, rows = found.page, table(demo)
    assert sorted(listed(page)) == sorted(pairs_of(rows))
    for word in rows["verdict"].unique():
        if word != "dependent":
            page.locator(f'input[name="pair-verdict"][value="{word}"]').uncheck()
    dependent = rows[rows["verdict"] == "dependent"]
    assert listed(page) == pairs_of(dependent.sort_values("bits", ascending=False))
    page.get_by_role("button", name="Reset filters").click()
    page.locator("#pair-search").fill("DOOR")
    holds = rows["a"].str.contains("door") | rows["b"].str.contains("door")
    assert sorted(listed(page)) == sorted(pairs_of(rows[holds]))
    page.locator("#pair-search").fill("no attribute is called so")
    expect(page.locator("#pair-none")).to_be_visible()
    page.get_by_role("button", name="Reset filters").click()
    page.locator("#pair-attribute").select_option(label="season")
    own = (rows["a"] == "season") | (rows["b"] == "season")
    assert sorted(listed(page)) == sorted(pairs_of(rows[own]))
    assert page.locator("#pair-count").inner_text().startswith(f"{own.sum()} of {len(rows)} pairs")


def test_the_ledger_is_gone_through_by_keys_and_enter_opens_a_pair(found: Opened, demo: Made) -> None:
    page = found.page
    expected = pairs_of(table(demo).sort_values("bits", ascending=False))
    page.locator("#pair-table .pair-open").first.focus()
    page.keyboard.press("ArrowDown")
    page.keyboard.press("Enter")
    dialog = page.get_by_role("dialog")
    assert tuple(dialog.locator("#pair-panel-title bdi").all_inner_texts()) == expected[1]
    page.keyboard.press("Escape")
    page.keyboard.press("End")
    page.keyboard.press("Enter")
    assert tuple(dialog.locator("#pair-panel-title bdi").all_inner_texts()) == expected[-1]


def test_the_triangle_starts_at_the_strongest_pair_and_moves_by_keys(found: Opened, demo: Made) -> None:
    page = found.page
    strongest = max(demo.document["pairs"], key=lambda one: one["bits"])
    page.locator("#triangle").focus()
    strip = page.locator("#triangle-strip")
    assert set(strip.locator("bdi").all_inner_texts()[:2]) == {strongest["a"], strongest["b"]}
    assert f"{strongest['bits']:.4f} bits given the class" in strip.inner_text()
    before = strip.inner_text()
    page.keyboard.press("ArrowDown")
    page.keyboard.press("ArrowDown")
    page.keyboard.press("ArrowRight")
    assert strip.inner_text() != before
    shown = set(strip.locator("bdi").all_inner_texts()[:2])
    page.keyboard.press("Enter")
    dialog = page.get_by_role("dialog")
    expect(dialog).to_be_visible()
    assert set(dialog.locator("#pair-panel-title bdi").all_inner_texts()) == shown
