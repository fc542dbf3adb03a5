"""The panel of every pair of the demo: each number is that of its own pair, class, cell, structure and fold."""

from collections.abc import Iterator
from typing import Any

import pytest
from pages import Made, opened
from playwright.sync_api import Browser, Page
from printed_numbers import numbers_in, tells, told
from table_reading import pair_of, structure

PANEL = """(panel) => {
  const texts = (place, what) => [...place.querySelectorAll(what)].map((one) => one.textContent);
  const pairs = (list) => texts(list, 'dt').map((label, place) => [label, texts(list, 'dd')[place]]);
  return {
    names: texts(panel, '#pair-panel-title bdi'),
    said: texts(panel, '#pair-panel-body > p:not(h3 ~ p)'),
    figures: Object.fromEntries(pairs(panel.querySelector('#pair-panel-figures'))),
    whatIf: [...panel.querySelectorAll('#pair-panel-what-if, li[data-structure]')]
      .map((one) => [one.dataset.structure ?? null, one.textContent]),
    tables: [...panel.querySelectorAll('table.class-table')].map((table) => ({
      caption: table.caption.textContent,
      levels: [...table.tHead.rows[0].cells].slice(1).map((one) => one.textContent),
      rows: [...table.tBodies[0].rows].map((row) => ({
        level: row.cells[0].textContent,
        cells: [...row.cells].slice(1).map((cell) => ({ parts: texts(cell, 'b, span, small'), shade: cell.className })),
      })),
    })),
    structures: [...panel.querySelectorAll('#pair-panel-structures tbody tr')].map((row) => ({
      name: row.dataset.structure,
      names: texts(row, 'bdi'),
      gain: row.cells[1].firstChild.textContent,
      verdict: texts(row.cells[1], '.role')[0],
      chosen: row.cells[3].firstChild.textContent,
      stability: texts(row.cells[3], '.role')[0],
      dots: texts(row, '.fold-point title'),
    })),
    folds: texts(panel, '.fold-list li'),
  };
}"""
FIGURES = {
    "bits given the class": ("bits",),
    "95 % interval, less chance": ("bits_low", "bits_high"),
    "at most, 95 %": ("bits_at_most",),
    "counted twice by naive, bits": ("double_counted_bits",),
    "bits without the class": ("marginal_bits",),
    "Cramér’s V": ("cramers_v",),
    "statistic": ("statistic",),
    "df": ("df",),
    "adjusted p": ("adjusted_p",),
    "smallest expected": ("min_expected",),
    "detectable bits": ("detectable_bits",),
}


@pytest.fixture(scope="module")
def panels(browser: Browser, demo: Made) -> Iterator[list[dict[str, Any]]]:
    """Open the panel of every pair from the ledger, by its keys, and read it."""
    with opened(browser, demo.path, height=1200) as found:
        yield list(read(found.page, len(demo.document["pairs"])))
        found.assert_quiet()


def read(page: Page, count: int) -> Iterator[dict[str, Any]]:
    page.locator("#pair-table .pair-open").first.focus()
    for _ in range(count):
        page.keyboard.press("Enter")
        yield page.locator("#pair-panel[open]").evaluate(PANEL)
        page.keyboard.press("Escape")
        page.keyboard.press("ArrowDown")


def edge_of(entry: dict[str, Any], names: list[str]) -> dict[str, Any] | None:
    return next((one for one in entry["edges"] if {one["parent"], one["child"]} == set(names)), None)


def test_every_pair_has_its_panel(panels: list[dict[str, Any]], demo: Made) -> None:
    opened_pairs = {frozenset(panel["names"]) for panel in panels}
    assert opened_pairs == {frozenset((one["a"], one["b"])) for one in demo.document["pairs"]}


def test_figures_are_those_of_the_pair(panels: list[dict[str, Any]], demo: Made) -> None:
    for panel in panels:
        pair = pair_of(demo.document, panel["names"])
        for label, fields in FIGURES.items():
            assert told(panel["figures"][label], *(pair[field] for field in fields)), (panel["names"], label)
        assert told(panel["figures"]["less what chance shows"], max(0.0, pair["bits_corrected"]))
        assert panel["figures"]["verdict"] == pair["verdict"]
        assert panel["figures"]["what the class explains"] == pair["outcome"]


def test_sentences_tell_figures_of_the_pair(panels: list[dict[str, Any]], demo: Made) -> None:
    settings = demo.document["settings"]
    keys = ("bits_corrected", "bits_at_most", "detectable_bits", "adjusted_p")
    for panel in panels:
        pair = pair_of(demo.document, panel["names"])
        values = [pair[key] for key in keys if pair[key] is not None]
        values += [settings["negligible"], 0.95, 1, 4, 5, abs(pair["double_counted_bits"] or 0.0)]
        told_numbers = numbers_in(" ".join(panel["said"]))
        assert len(told_numbers) >= 2 or pair["bits_at_most"] is None
        for one in told_numbers:
            assert any(tells(one, value) for value in values), (panel["names"], one, panel["said"])


def test_tables_hold_the_records_of_every_class(panels: list[dict[str, Any]], demo: Made) -> None:
    read_tables = 0
    for panel in panels:
        counted = pair_of(demo.document, panel["names"], "pair_tables")
        assert len(panel["tables"]) == len(counted["classes"]) == len(demo.document["class_levels"])
        for table, one in zip(panel["tables"], counted["classes"], strict=True):
            odds = one["odds"] or {}
            figures = [odds.get(key) for key in ("odds_ratio", "odds_low", "odds_high")]
            caption = table["caption"].removeprefix(one["class"]).replace("95 % interval", "")
            assert told(caption, one["rows"], *figures)
            assert table["levels"] == counted["b_levels"]
            assert [row["level"] for row in table["rows"]] == counted["a_levels"]
            parts = zip(one["observed"], one["expected"], one["residuals"], strict=True)
            for row, values in zip(table["rows"], parts, strict=True):
                for cell, three in zip(row["cells"], zip(*values, strict=True), strict=True):
                    check_cell(cell, *three)
                    read_tables += 1
    assert read_tables > 1000


def check_cell(cell: dict[str, Any], observed: int, expected: float | None, residual: float | None) -> None:
    """Compare the three numbers of a cell; its tint and hatching say the same as the sign."""
    assert told(cell["parts"][0], residual)
    assert told(cell["parts"][1], observed)
    assert told(cell["parts"][2], expected)
    steps = 0 if residual is None else sum(abs(residual) > limit for limit in (2, 4, 8))
    word = "near" if not steps else f"{'more' if residual and residual > 0 else 'fewer'}{steps}"
    assert cell["shade"].split() == ["residual", word]


def test_gains_stand_by_structure_and_fold(panels: list[dict[str, Any]], demo: Made) -> None:
    document = demo.document
    tries = document["folds"] * document["settings"]["repeats"]
    seen = 0
    for panel in panels:
        joining = [one["name"] for one in document["structures"] if edge_of(one, panel["names"])]
        assert sorted(one["name"] for one in panel["structures"]) == sorted(joining)
        for row, item in zip(panel["structures"], panel["folds"], strict=True):
            edge = edge_of(structure(document, row["name"]), panel["names"])
            assert edge is not None
            assert row["names"] == [edge["parent"], edge["child"]]
            assert told(row["gain"], edge["gain"], *(edge["gain_interval"] or []))
            assert row["verdict"] == edge["verdict"]
            assert told(row["chosen"], edge["chosen_in"], tries)
            assert told(row["stability"], edge["stability"])
            by_fold = [(place + 1, gain) for place, gain in enumerate(edge["gain_by_fold"])]
            figures = [figure for fold, gain in by_fold for figure in (fold, gain)]
            assert told(item.removeprefix(row["name"]), *figures)
            inside = [one for one in by_fold if one[1] is not None]
            assert told(" ".join(row["dots"]), *(figure for one in inside for figure in one))
            seen += 1
    assert seen == sum(len(one["edges"]) for one in document["structures"])


def test_what_would_change_is_told_by_the_gain(panels: list[dict[str, Any]], demo: Made) -> None:
    """The first structure told is the one whose tab is open, where it joins the two: here the recommended one."""
    document, wanted = demo.document, demo.document["recommended"]["name"]
    for panel in panels:
        joining = {one["name"]: edge for one in document["structures"] if (edge := edge_of(one, panel["names"]))}
        first = set(joining) - {name for name, _ in panel["whatIf"]}
        assert len(panel["whatIf"]) == len(joining)
        assert first == {wanted} or wanted not in joining
        for name, sentence in panel["whatIf"]:
            edge = joining[name or first.pop()]
            rare = 2 * edge["chosen_in"] < document["folds"] * document["settings"]["repeats"]
            amount = [] if f"{abs(edge['gain']):.4f}" == "0.0000" else [abs(edge["gain"])]
            figures = (
                ([edge["chosen_in"], document["folds"]] if edge["chosen_in"] else [])
                if rare
                else [*amount, edge["gain"], 0.95, *(edge["gain_interval"] or [])]
            )
            assert told(sentence, *figures), (panel["names"], sentence)
            assert rare or not amount or ("lose" in sentence) == (edge["gain"] > 0)
