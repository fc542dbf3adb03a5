"""Records of each level by class, blanks, pooled values and distributions, against pandas on the same table."""

from pathlib import Path
from typing import Any

import numpy as np
import pandas as pd
import pytest
from builders import coded, compared, started, whole
from opentables import load
from published import BERKELEY
from sklearn.datasets import load_iris

from bnx import level_counts
from bnx.columns import Extent
from bnx.documents import comparison_document
from bnx.level_counts import POOLED_NAMED, count_levels

Document = dict[str, Any]
BLANK, OTHER = "(blank)", "(other)"


def described(frame: pd.DataFrame, target: str, **settings: Any) -> Document:
    quick = {"folds": 3, "smoothing": "laplace:1", "mix": False}
    return comparison_document(compared(frame, target, **(quick | settings)))


def entries(document: Document) -> dict[str, Document]:
    return {one["name"]: one for one in document["schema"]}


def crosstab(column: pd.Series, classes: pd.Series, levels: list[str], document: Document) -> list[list[int]]:
    """Count levels by class as pandas does, in the order of the document."""
    table = pd.crosstab(column, classes).reindex(index=levels, columns=document["class_levels"], fill_value=0)
    return table.to_numpy().tolist()


def as_levels(entry: Document, numbers: pd.Series) -> pd.Series:
    """Name the interval of each number as pandas cuts them."""
    own = [level for level in entry["levels"] if level != BLANK]
    bins = [-np.inf, *entry["cuts"], np.inf]
    return pd.cut(numbers, bins, labels=own).astype(object)


def assert_counted(entry: Document, column: pd.Series, classes: pd.Series, document: Document) -> None:
    """Every level and the distribution of an attribute hold the rows that pandas finds."""
    counted = entry["counted"]
    if entry["numeric"]:
        numbers = column.astype(float)
        found = counted["distribution"]
        table = pd.crosstab(pd.cut(numbers, found["edges"], labels=False), classes)
        wanted = table.reindex(
            index=range(len(found["edges"]) - 1), columns=document["class_levels"], fill_value=0
        ).to_numpy(copy=True)
        if numbers.min() == found["edges"][0]:  # belongs to the first bin
            first = classes[numbers == numbers.min()].value_counts()
            wanted[0] += [first.get(level, 0) for level in document["class_levels"]]
        assert found["rows"] == wanted.tolist()
        assert sum(map(sum, found["rows"])) == numbers.notna().sum()
        assert (found["lowest"], found["highest"]) == (numbers.min(), numbers.max())
        assert set(entry["cuts"]) <= set(found["edges"][1:-1])
        column = as_levels(entry, numbers)
    assert counted["rows"] == crosstab(column.fillna(BLANK), classes, entry["levels"], document)


def test_the_demo_is_counted_as_pandas_counts_it(demo_frame: pd.DataFrame) -> None:
    document = described(demo_frame, "arrival", ignore=("shipment_id",))
    assert document["attributes_counted"] == len(document["schema"]) == 12
    for name, entry in entries(document).items():
        assert_counted(entry, demo_frame[name], demo_frame["arrival"], document)
        counted, blank = entry["counted"], demo_frame[name].isna()
        assert sum(map(sum, counted["rows"])) == len(demo_frame)
        assert counted["different_values"] == demo_frame[name].nunique()
        assert counted["masses"] is None
        assert counted["pooled"] is None
        assert (counted["blanks"] is not None) == blank.any()
        if blank.any():
            assert counted["blanks"]["level"] == entry["levels"][-1] == BLANK
            assert counted["blanks"]["rows"] == counted["rows"][-1]


@pytest.fixture(scope="module")
def demo_frame() -> pd.DataFrame:
    path = Path(__file__).parent.parent / "datasets" / "cold_chain.csv"
    return pd.read_csv(path, keep_default_na=False, na_values=[""])


def test_blanks_not_observed_are_counted_beside_the_levels(demo_frame: pd.DataFrame) -> None:
    document = described(demo_frame, "arrival", ignore=("shipment_id",), missing="sum-out")
    for name, entry in entries(document).items():
        blank = demo_frame[name].isna()
        assert BLANK not in entry["levels"]
        assert sum(map(sum, entry["counted"]["rows"])) == (~blank).sum()
        if blank.any():
            wanted = demo_frame["arrival"][blank].value_counts()
            assert entry["counted"]["blanks"]["level"] is None
            assert entry["counted"]["blanks"]["rows"] == [wanted.get(one, 0) for one in document["class_levels"]]
    assert sum(one["counted"]["blanks"] is not None for one in document["schema"]) >= 3


def test_rows_that_are_dropped_count_nowhere(demo_frame: pd.DataFrame) -> None:
    document = described(demo_frame, "arrival", ignore=("shipment_id",), missing="drop")
    kept = demo_frame.dropna()
    assert document["rows"] == len(kept) < len(demo_frame)
    for name, entry in entries(document).items():
        assert entry["counted"]["blanks"] is None
        assert_counted(entry, kept[name], kept["arrival"], document)


@pytest.mark.parametrize("bins", ["mdl", "frequency:5", "width:4", "frequency:60"])
def test_iris_is_spread_as_pandas_cuts_it(bins: str) -> None:
    measurements, species = load_iris(return_X_y=True)
    frame = pd.DataFrame(measurements, columns=["sepal_l", "sepal_w", "petal_l", "petal_w"])
    frame["species"] = [f"s{k}" for k in species]
    numeric = ("sepal_l", "sepal_w", "petal_l", "petal_w")
    document = described(frame, "species", bins=bins, numeric=numeric, keep=("all",))
    for name, entry in entries(document).items():
        assert_counted(entry, frame[name], frame["species"], document)
        assert 2 <= len(entry["counted"]["distribution"]["rows"]) <= 60


def test_a_published_table_is_counted_as_printed() -> None:
    """Fold numbers and structures change nothing: all rows are counted."""
    frame = load("ucb_admissions")
    by = {"structures": ("naive", "tan"), "folds": 5, "seed": 4}
    document = described(frame, "Admit", **by)
    counted = entries(document)["Dept"]["counted"]["rows"]
    order = [document["class_levels"].index(level) for level in ("Admitted", "Rejected")]
    assert np.array(counted)[:, order].tolist() == BERKELEY.sum(axis=1).tolist()
    gender = entries(document)["Gender"]
    table = dict(zip(gender["levels"], np.array(gender["counted"]["rows"])[:, order].tolist(), strict=True))
    assert [table["Male"], table["Female"]] == BERKELEY.sum(axis=0).tolist()


def test_rows_that_count_records_give_records() -> None:
    frame = load("ucb_admissions")
    cells = frame.value_counts().rename("n").reset_index()
    assert described(cells, "Admit", weight="n")["schema"] == described(frame, "Admit")["schema"]


def test_weights_that_count_nothing_are_summed_beside_the_rows() -> None:
    frame = load("ucb_admissions").iloc[::4].reset_index(drop=True)
    random = np.random.default_rng(3)
    weight = np.round(random.gamma(2.0, size=len(frame)), 3) + 0.001
    frame.loc[random.random(len(frame)) < 0.1, "Dept"] = np.nan
    for missing in ("level", "sum-out"):
        document = described(frame.assign(w=weight), "Admit", weight="w", missing=missing)
        scaled = pd.Series(weight / weight.mean())
        entry = entries(document)["Dept"]
        found = entry["counted"]
        filled = frame["Dept"].fillna(BLANK)
        sums = scaled.groupby([filled, frame["Admit"]]).sum().unstack()[document["class_levels"]]
        assert np.allclose(found["masses"], sums.reindex(entry["levels"]), rtol=1e-6)
        assert np.allclose(found["blanks"]["masses"], sums.loc[BLANK], rtol=1e-6)
        assert found["rows"] == crosstab(filled, frame["Admit"], entry["levels"], document)


def pooling(rows: int = 4000) -> pd.DataFrame:
    """Draw towns whose rows fall off, some of them blank, so that most towns must be pooled."""
    random = np.random.default_rng(8)
    towns = np.minimum(random.geometric(0.02, rows), 140)
    town = pd.Series([f"town {k:03d}" for k in towns])
    town[random.random(rows) < 0.05] = np.nan
    grade = np.where(towns < 30, "near", random.choice(["near", "far"], rows))
    return pd.DataFrame({"town": town, "side": random.choice(["a", "b"], rows), "grade": grade})


@pytest.mark.parametrize("missing", ["level", "sum-out"])
def test_pooled_values_are_counted_and_those_of_most_rows_named(missing: str) -> None:
    frame = pooling()
    document = described(frame, "grade", missing=missing, max_levels=10)
    entry = entries(document)["town"]
    rows = frame["town"].value_counts()
    kept = [level for level in entry["levels"] if level not in (OTHER, BLANK)]
    rare = rows.drop(kept)
    pooled = entry["counted"]["pooled"]
    assert len(kept) == 10
    assert rows[kept].min() >= rare.max()
    assert (pooled["level"], pooled["values"]) == (OTHER, len(rare))
    assert entry["counted"]["different_values"] == len(rows)
    assert len(pooled["most_frequent"]) == POOLED_NAMED < len(rare)
    assert [one["rows"] for one in pooled["most_frequent"]] == sorted(rare, reverse=True)[:POOLED_NAMED]
    assert all(rare[one["value"]] == one["rows"] for one in pooled["most_frequent"])
    folded = frame["town"].where(frame["town"].isna() | frame["town"].isin(kept), OTHER)
    levels = entry["levels"]
    assert entry["counted"]["rows"] == crosstab(folded.fillna(BLANK), frame["grade"], levels, document)


def test_counts_beyond_what_is_kept_are_said_to_be_missing(monkeypatch: pytest.MonkeyPatch) -> None:
    """Those of most bits come first; one that does not fit is skipped, a smaller one after it may fit."""
    random = np.random.default_rng(1)
    target = random.integers(0, 2, 500)
    close, large = np.where(random.random(500) < 0.9, target, 1 - target), random.integers(0, 30, 500)
    table = coded(np.array([random.integers(0, 2, 500), large, close]), target)
    engine = started(table)
    monkeypatch.setattr(level_counts, "MOST_NUMBERS", 8)
    found = count_levels(engine, whole(engine, table), table.schema, [Extent(30)] * 3)
    assert [one is not None for one in found] == [True, False, True]
    assert found[2] is not None
    assert found[2].rows.tolist() == pd.crosstab(close, target).to_numpy().tolist()
    frame = pd.DataFrame({"a": close, "b": large, "t": target}).astype(str)
    document = described(frame, "t")
    assert document["attributes_counted"] == 1
    assert [one["name"] for one in document["schema"] if one["counted"] is None] == ["b"]


def test_a_column_without_a_number_has_no_distribution() -> None:
    frame = pd.DataFrame({"a": ["1", "2"] * 30, "n": [""] * 60, "one": ["7"] * 60, "t": list("xxy") * 20})
    document = described(frame, "t", numeric=("n", "one"), keep=("all",))
    found = entries(document)
    for name in ("n", "one"):
        assert found[name]["counted"]["distribution"] is None
    assert found["n"]["counted"]["different_values"] == 0
    assert sum(found["n"]["counted"]["blanks"]["rows"]) == 60
