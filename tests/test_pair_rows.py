"""The ledger of pairs on the page: nothing lost, every figure the document's, every order that of the exact figures."""

import copy
import json
import re
from typing import Any

import pandas as pd
import pytest
from readpage import Page
from smallrun import HOSTILE_NAMES, SmallRun, small_run

from bnx.findings import drawn_pairs
from bnx.pair_columns import PAIR_COLUMNS, VERDICT_ORDER
from bnx.pair_rows import PAIRS_ON_PAGE, ROWS_WITHOUT_SCRIPT, pair_ledger, ranked
from bnx.printed import pair_row
from bnx.report import report_html
from bnx.verdicts import OUTCOMES

FIGURES = {
    "bits": "bits",
    "at_most": "bits_at_most",
    "marginal": "marginal_bits",
    "double_counted": "double_counted_bits",
    "cramers_v": "cramers_v",
    "statistic": "statistic",
    "df": "df",
    "adjusted_p": "adjusted_p",
    "min_expected": "min_expected",
    "detectable": "detectable_bits",
}


@pytest.fixture
def document() -> dict[str, Any]:
    return copy.deepcopy(small_run().comparison)


def block(document: dict[str, Any]) -> dict[str, Any]:
    """Read what the script is given, by column."""
    text = pair_ledger(document, frozenset()).block
    held: dict[str, Any] = json.loads(re.sub(r"^<script[^>]*>|</script>$", "", text))
    return {**held, "columns": {column["key"]: column for column in held["columns"]}}


def words(column: dict[str, Any]) -> list[str]:
    """Write out a column row by row, as the script does."""
    spelled = column["words"]
    if "runs" in column:
        spelled = [word for word, run in zip(spelled, column["runs"], strict=True) for _ in range(run)]
    return [spelled[at] for at in column.get("at") or column["rank"]]


def rows_by(column: dict[str, Any], down: bool) -> list[int]:
    """Order rows by rank, pairs without a figure last, ties in the first order, as the script does."""
    rank = column["rank"]
    blank = max(rank) if column["blank"] else -1
    return sorted(range(len(rank)), key=lambda row: (rank[row] == blank, -rank[row] if down else rank[row], row))


def strongest_first(document: dict[str, Any]) -> pd.DataFrame:
    return pd.DataFrame(document["pairs"]).sort_values("bits", ascending=False, kind="stable", ignore_index=True)


@pytest.mark.parametrize("down", [False, True])
@pytest.mark.parametrize("key", FIGURES)
def test_every_order_is_that_of_the_exact_figures(document: dict[str, Any], key: str, down: bool) -> None:
    for number, pair in enumerate(document["pairs"]):
        if number % 3 == 0 and key not in {"bits", "df"}:
            pair[FIGURES[key]] = None
        elif number % 4 == 0:
            pair[FIGURES[key]] = document["pairs"][1][FIGURES[key]]
    table = strongest_first(document)
    table.loc[table["verdict"] != "dependent", "double_counted_bits"] = None
    expected = table.sort_values(FIGURES[key], ascending=not down, kind="stable", na_position="last").index
    assert rows_by(block(document)["columns"][key], down) == expected.tolist()


def test_words_are_sorted_as_the_page_says(document: dict[str, Any]) -> None:
    columns, table = block(document)["columns"], strongest_first(document)
    for key, order in (("verdict", VERDICT_ORDER), ("outcome", OUTCOMES)):
        expected = table[key].map(order.index).sort_values(kind="stable").index
        assert rows_by(columns[key], down=False) == expected.tolist()
    names = table["a"].str.casefold() + "\0" + table["b"].str.casefold()
    assert rows_by(columns["pair"], down=False) == names.sort_values(kind="stable").index.tolist()
    assert rows_by(columns["carried"], down=False) == (
        table["sample_carries_it"].sort_values(kind="stable").index.tolist()
    )


@pytest.mark.parametrize("is_hostile", [False, True])
def test_every_listed_pair_is_in_the_block_with_its_figures_as_printed(is_hostile: bool) -> None:
    document = small_run(is_hostile).comparison
    held = block(document)
    ends = [(held["names"][a], held["names"][b]) for a, b in zip(held["a"], held["b"], strict=True)]
    pairs = sorted(document["pairs"], key=lambda one: -one["bits"])
    assert ends == [(pair["a"], pair["b"]) for pair in pairs]
    for column in PAIR_COLUMNS:
        if column.key not in {"pair", "joined"}:
            printed = [getattr(pair_row(pair), column.key) for pair in pairs]
            assert words(held["columns"][column.key]) == printed
    if is_hostile:
        assert {*HOSTILE_NAMES[:-1]} <= set(held["names"])


def test_printed_figures_are_the_documents_to_the_digits_shown(document: dict[str, Any]) -> None:
    columns = block(document)["columns"]
    pairs = sorted(document["pairs"], key=lambda one: -one["bits"])
    for key, digits in (("bits", 4), ("double_counted", 4), ("marginal", 4), ("at_most", 4), ("cramers_v", 2)):
        for word, pair in zip(words(columns[key]), pairs, strict=True):
            exact = pair[FIGURES[key]]
            if key == "double_counted" and pair["verdict"] != "dependent":
                exact = None
            assert word == ("–" if exact is None else f"{exact:.{digits}f}")


def test_equal_figures_printed_differently_keep_their_own_words() -> None:
    one = ranked([0.5, None, 0.5, 0.1], ["about 0.5", "–", "0.5", "0.1"])
    assert (one.rank, one.blank, one.runs) == ((1, 2, 1, 0), True, ())
    assert [one.words[at] for at in one.at] == ["about 0.5", "–", "0.5", "0.1"]


def test_structures_that_join_a_pair_are_named(document: dict[str, Any]) -> None:
    held = block(document)
    joined = [drawn_pairs(one) for one in document["structures"]]
    number = words(held["columns"]["joined"])
    assert held["structures"][held["recommended"]] == document["recommended"]["name"]
    for row, (a, b) in enumerate(zip(held["a"], held["b"], strict=True)):
        key = frozenset((held["names"][a], held["names"][b]))
        expected = [place for place, pairs in enumerate(joined) if key in pairs]
        assert held["sets"][held["set"][row]] == expected
        assert number[row] == f"{len(expected)} of {len(joined)}"


def many(document: dict[str, Any], number: int) -> dict[str, Any]:
    """Put so many pairs of invented attributes before the document's own, which become the weakest."""
    first = document["pairs"][0]
    names = [f"n{place:03d}" for place in range(200)]
    ends = [(a, b) for row, a in enumerate(names) for b in names[row + 1 :]][:number]
    strong = [{**first, "a": a, "b": b, "bits": 1 + 1 / (place + 1)} for place, (a, b) in enumerate(ends)]
    schema = [{**document["schema"][0], "name": name} for name in names]
    return {
        **document,
        "attributes": [*names, *document["attributes"]],
        "schema": [*schema, *document["schema"]],
        "pairs": [*strong, *document["pairs"]],
    }


def test_above_the_limit_weak_pairs_stay_if_a_structure_joins_them_or_the_triangle_shows_them(
    document: dict[str, Any],
) -> None:
    joined = frozenset().union(*(drawn_pairs(one) for one in document["structures"]))
    own = [frozenset((pair["a"], pair["b"])) for pair in document["pairs"]]
    shown = next(pair for pair in own if pair not in joined)
    ledger = pair_ledger(many(document, PAIRS_ON_PAGE), frozenset({shown}))
    assert ledger.number == PAIRS_ON_PAGE + len(joined) + 1
    assert {pair for pair in ledger.place if pair in own} == joined | {shown}
    assert ledger.joined == len(joined)
    assert sum(count for _, count in ledger.verdicts) == ledger.number
    assert len(ledger.block) < 1_200_000
    text = Page(report_html(many(document, PAIRS_ON_PAGE), {})).text
    out = len(own) - len(joined)
    assert f"The page holds the 10,000 strongest pairs and {len(joined)} more that a structure joins" in text
    assert f"{out} more that the comparison lists are not on it. pairs.csv holds all." in text


def test_the_strongest_rows_stand_without_scripts(document: dict[str, Any]) -> None:
    page = Page(report_html(many(document, 100), {}))
    head, *rows = page.tables["pair-table"]
    assert head == [column.label for column in PAIR_COLUMNS]
    assert len(rows) == ROWS_WITHOUT_SCRIPT
    assert [row[2] for row in rows] == [f"{1 + 1 / (place + 1):.4f}" for place in range(ROWS_WITHOUT_SCRIPT)]
    assert rows[0][0].strip() == "n000 ~ n001"


def test_pairs_of_a_small_table_all_stand_without_scripts(document: dict[str, Any]) -> None:
    rows = Page(report_html(document, {})).tables["pair-table"][1:]
    pairs = sorted(document["pairs"], key=lambda one: -one["bits"])
    expected = [[f"{one['a']} ~ {one['b']}", one["verdict"], f"{one['bits']:.4f}"] for one in pairs]
    assert [[cell.strip() for cell in row[:3]] for row in rows] == expected


def test_hostile_names_end_no_block(document: dict[str, Any]) -> None:
    hostile: SmallRun = small_run(hostile=True)
    page = Page(report_html(hostile.comparison, {}))
    held = [json.loads(text) for text in page.data]
    assert any(set(HOSTILE_NAMES[:-1]) <= set(one.get("names", ())) and "sets" in one for one in held)
    assert not re.search(r"[<>&\u2028\u2029]", "".join(page.data))
