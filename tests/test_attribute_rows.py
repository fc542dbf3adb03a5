"""The attributes as printed: headings, levels, blanks, pooled values, cautions, and what there is no room for."""

import copy
from typing import Any

import numpy as np
import pandas as pd
import pytest
from builders import compared
from readpage import Page
from smallrun import small_run

from bnx import attribute_rows as rows_of
from bnx.attribute_rows import Attribute, Words, attribute_rows
from bnx.documents import comparison_document
from bnx.report import report_html


def frame(rows: int = 3000) -> pd.DataFrame:
    """Draw a table with all that can be said of columns: blanks that speak, levels of one class, pooled values."""
    random = np.random.default_rng(12)
    late = random.random(rows) < 0.3
    route = np.where(late & (random.random(rows) < 0.2), "ferry", random.choice(["road", "rail"], rows))
    weight = pd.Series(np.round(random.gamma(2.0, 5.0, rows) + 4 * late, 2))
    weight[random.random(rows) < np.where(late, 0.25, 0.05)] = np.nan
    town = np.char.add("town ", np.minimum(random.geometric(0.05, rows), 60).astype(str))
    rare = np.where(np.arange(rows) < 9, "rare", "usual")
    return pd.DataFrame(
        {"route": route, "weight": weight, "town": town, "kind": rare, "end": np.where(late, "late", "in time")}
    )


def document(missing: str, **settings: Any) -> dict[str, Any]:
    quick = {"folds": 3, "smoothing": "laplace:1", "mix": False, "max_levels": 12}
    return comparison_document(compared(frame(), "end", missing=missing, **(quick | settings)))


@pytest.fixture(scope="module")
def level() -> dict[str, Any]:
    return document("level")


def shown(one: dict[str, Any], most: int = 300) -> dict[str, Attribute]:
    return {row.name: row for row in attribute_rows(one, most)}


def said(words: Words) -> str:
    return "".join(text for text, _ in words)


def test_headings_tell_kind_bits_blanks_and_pooled_values(level: dict[str, Any]) -> None:
    found, table = shown(level), frame()
    schema = {one["name"]: one for one in level["schema"]}
    order = [row.name for row in attribute_rows(level, 300)]
    assert order == sorted(order, key=lambda name: -schema[name]["bits_with_class"])
    assert [found[name].is_open for name in order] == [True, True, True, False]
    assert found["route"].kind == "3 levels"
    assert found["weight"].kind == f"numeric, cut into {len(schema['weight']['cuts']) + 1}"
    blank = table["weight"].isna().sum()
    assert found["weight"].notes == (f"{blank:,} blank, {100 * blank / len(table):.1f} %",)
    assert found["town"].kind == "13 levels"
    assert found["town"].notes == (f"{table['town'].nunique() - 12} rare values pooled",)
    assert found["route"].notes == ()
    assert max(row.bar for row in found.values()) == 100
    for name, row in found.items():
        assert row.bits == f"{schema[name]['bits_with_class']:.3f}"


def test_levels_hold_records_shares_and_bars(level: dict[str, Any]) -> None:
    table, found = frame(), shown(level)
    counts = pd.crosstab(table["route"], table["end"])[level["class_levels"]]
    usual = table["end"].value_counts(normalize=True)
    for row in found["route"].levels:
        own = counts.loc[row.name]
        assert row.rows == f"{own.sum():,}"
        assert row.share == f"{100 * own.sum() / len(table):.1f} %"
        for cell, name in zip(row.cells, level["class_levels"], strict=True):
            assert (cell.rows, cell.share) == (f"{own[name]:,}", f"{100 * own[name] / own.sum():.1f} %")
            assert cell.bar == pytest.approx(100 * own[name] / own.sum(), abs=0.06)
            assert cell.usual == pytest.approx(100 * usual[name], abs=0.06)
    assert [(head.name, head.share) for head in found["route"].heads] == [
        (name, f"{100 * usual[name]:.1f} %") for name in level["class_levels"]
    ]
    assert {row.name for row in found["kind"].levels if row.soft} == {"rare"}
    assert all(row.is_level for row in found["town"].levels)


def test_cautions_tell_of_blanks_and_of_levels_of_one_class(level: dict[str, Any]) -> None:
    table, found = frame(), shown(level)
    blank = table["weight"].isna().groupby(table["end"]).mean()
    caution = found["weight"].cautions[0]
    assert said(caution) == (
        f"Blanks are more frequent in late: {100 * blank['late']:.1f} % of its records are blank, "
        f"of all others {100 * blank['in time']:.1f} %."
    )
    assert [text for text, named in caution if named] == ["late"]
    assert [said(one) for one in found["route"].cautions] == ["Seen in one class only: ferry in late."]
    assert found["kind"].cautions == ()


def test_blanks_that_are_no_level_stand_below_the_levels() -> None:
    one = document("sum-out")
    row = shown(one)["weight"]
    last = row.levels[-1]
    assert (last.name, last.is_level) == ("not observed", False)
    assert last.rows == f"{frame()['weight'].isna().sum():,}"
    assert last.speaks is not None
    assert last.speaks[0] == "late"
    assert sum(int(level.rows.replace(",", "")) for level in row.levels) == len(frame())
    assert said(row.cautions[0]).startswith("Blanks are more frequent in late: ")
    assert "<em>not observed</em>" in report_html(one, {})
    assert shown(document("drop"))["weight"].notes == ()


def test_pooled_values_are_named_as_far_as_the_document_names_them(level: dict[str, Any]) -> None:
    rows = frame()["town"].value_counts()
    pooled = shown(level)["town"].pooled
    assert pooled is not None
    values, named, more = pooled
    assert values == f"{len(rows) - 12} rare values"
    assert len(named) == 20
    assert all(words == f"{rows[name]} records" or rows[name] == 1 for name, words in named)
    assert more == str(len(rows) - 32)
    assert f"({named[0][1]})" in Page(report_html(level, {})).text


def test_weights_give_shares_and_records_stay_records() -> None:
    table = frame().assign(w=np.linspace(0.5, 3.25, 3000))
    one = comparison_document(compared(table, "end", weight="w", folds=3, smoothing="laplace:1", mix=False))
    weights = table.groupby(["route", "end"])["w"].sum().unstack(fill_value=0.0)[one["class_levels"]]
    for row in shown(one)["route"].levels:
        shares = 100 * weights.loc[row.name] / weights.loc[row.name].sum()
        assert [cell.share for cell in row.cells] == [f"{share:.1f} %" for share in shares]
        assert row.rows == f"{(table['route'] == row.name).sum():,}"
    assert "records, and by weight their share" in Page(report_html(one, {})).text


def test_what_is_not_counted_or_has_no_room_is_said(level: dict[str, Any], monkeypatch: pytest.MonkeyPatch) -> None:
    one = copy.deepcopy(level)
    next(entry for entry in one["schema"] if entry["name"] == "town")["counted"] = None
    found = shown(one)
    assert found["town"].missing == "There are too many levels and classes to count them all."
    assert (found["town"].levels, found["town"].notes) == ((), ())
    monkeypatch.setattr(rows_of, "_CELLS_ON_PAGE", 9)
    found = shown(one)
    assert [name for name, row in found.items() if row.levels] == ["route"]
    assert found["weight"].missing == "There is no room for its levels on this page; comparison.json counts them."
    assert found["weight"].notes
    assert found["weight"].missing in Page(report_html(one, {})).text


def test_as_many_attributes_are_listed_as_asked_for(level: dict[str, Any]) -> None:
    assert len(attribute_rows(level, 2)) == 2


def test_numbers_out_of_bounds_have_a_table_but_no_drawing() -> None:
    one = copy.deepcopy(small_run().comparison)
    entry = next(entry for entry in one["schema"] if entry["numeric"])
    entry["counted"]["distribution"]["edges"][-1] = 1e307
    row = shown(one)[entry["name"]]
    assert row.chart is None
    assert row.not_drawn == "Its numbers are too large or too close to be drawn."
    assert len(row.levels) == len(entry["levels"])
    assert row.not_drawn in Page(report_html(one, {})).text
