import json

import numpy as np
import pytest
from sklearn.metrics import mutual_info_score

from bnx.coding import code_table
from bnx.profiling import profile
from bnx.reading import open_source

ROWS = 400


@pytest.fixture
def coded(tmp_path):
    rng = np.random.default_rng(11)
    arrival = rng.choice(["sound", "rejected"], ROWS, p=[0.75, 0.25])
    dock = np.where(rng.random(ROWS) < 0.8, arrival == "sound", rng.random(ROWS) < 0.5)
    columns = {
        "id": [f"s{k}" for k in range(ROWS)],
        "dock": np.where(dock, "short", "long"),
        "note": np.where(arrival == "sound", "fine", rng.choice(["late", "warm"], ROWS)),
        "noise": rng.choice(["a", "b", "c", ""], ROWS),
        "rare": ["seldom"] * 3 + ["often"] * (ROWS - 3),
        "delay": rng.normal(size=ROWS).round(3),
        "arrival": arrival,
    }
    lines = [",".join(columns), *(",".join(map(str, line)) for line in zip(*columns.values(), strict=True))]
    path = tmp_path / "table.csv"
    path.write_text("\n".join(lines) + "\n")
    return code_table(open_source(str(path)), "arrival")


def test_figures_of_the_columns(coded):
    found = {column.name: column for column in profile(coded).columns}
    table = coded.table
    for name, codes in zip(table.schema.names, table.codes, strict=True):
        # Plug-in bits from scikit-learn; the correction is that of Miller 1955.
        plain = mutual_info_score(codes, table.target) / np.log(2)
        corrected = plain - (len(np.unique(codes)) - 1) / (2 * ROWS * np.log(2))
        assert found[name].bits == pytest.approx(max(corrected, 0), abs=1e-12)
    blanks = int((table.codes[table.schema.index("noise")] == 3).sum())
    assert (found["noise"].blanks, found["noise"].levels, found["noise"].kind) == (blanks, 3, "text")
    assert (found["rare"].rare, found["rare"].most, found["rare"].most_share) == (1, "often", 397 / 400)
    assert found["delay"].kind == "numeric"
    assert found["delay"].span == (table.schema.attributes[4].cuts[0], table.schema.attributes[4].cuts[-1])


def test_what_gives_the_class_away_is_said(coded):
    found = profile(coded)
    assert found.giveaways == ("note",)
    assert found.columns[1].share == pytest.approx(1, abs=0.01)
    assert (
        "warning: the class is nearly given away by note; make sure that this is known before the class is"
        in str(found).splitlines()
    )


def test_the_whole_is_told_in_words(coded):
    lines = str(profile(coded)).splitlines()
    sound = int((coded.table.target == 1).sum())
    assert lines[0] == (
        f"400 rows   class arrival: rejected {100 * (400 - sound) / 400:.3g} %, sound {sound / 4:.3g} %   "
        "5 attributes (1 numeric)"
    )
    header = "attribute type levels blank rare class bits share most frequent level, or outermost cuts"
    assert " ".join(lines[2].split()) == header
    assert "left out: id (a different value in every row; --keep id to use it)" in lines


def test_the_dict_is_json_with_all_figures(coded):
    found = profile(coded).to_dict()
    assert json.loads(json.dumps(found, allow_nan=False))["class"] == "arrival"
    assert found["rows"] == found["rows_read"] == ROWS
    assert [item["rows"] for item in found["classes"]] == np.bincount(coded.table.target).tolist()
    assert found["left_out"] == [{"name": "id", "reason": "a different value in every row; --keep id to use it"}]
    assert [item["name"] for item in found["attributes"] if item["gives_away"]] == ["note"]
    shares = np.bincount(coded.table.target) / ROWS
    assert found["class_bits"] == pytest.approx(-(shares * np.log2(shares)).sum())
