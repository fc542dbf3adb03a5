"""The benchmarks measure what they say: rivals agree with us, tables are as planted, pages hold what was stored."""

import json
from pathlib import Path
from typing import Any

import numpy as np
import part_pairs
import pyarrow.parquet
import pytest
from charts import measured as charts_measured
from child import Child, ChildError, python
from counting import engine_of, layout_of, plane_words, same_tables, statistics_of, tables_of
from make_table import BenchTable, make_table, write_table
from make_tall import SIZES, SizeError, make_tall, write_tall
from make_wide import make_wide, write_wide
from part_command import scikit_log_loss
from part_wide import bitmaps
from peak import LOOPS, WORDS, clock_rate, popcount_peak
from report import PARTS, load, measure, page
from rivals import (
    bincounts,
    chi_squares,
    crosstab,
    frame_of,
    groupby,
    one_hot,
    one_hot_tables,
    products_of,
    spread_cells,
)
from setting import Claim, Part, Setting
from sklearn.metrics import log_loss
from sklearn.model_selection import StratifiedKFold, cross_val_predict
from sklearn.naive_bayes import CategoricalNB
from smallrun import small_run
from timing import side_by_side

from bnx.kernels.contingency import DF, X2


@pytest.fixture(scope="module")
def table() -> BenchTable:
    return make_table(1_500)


@pytest.mark.parametrize("blocks", [1, 40])
def test_our_tables_are_those_of_bincount(table: BenchTable, blocks: int) -> None:
    layout = layout_of(table)
    ours, theirs = tables_of(engine_of(table, 2, blocks), layout), bincounts(table)
    assert len(theirs) == 1225
    assert same_tables(ours, layout, theirs)
    theirs[700][1][3] += 1
    assert not same_tables(ours, layout, theirs)


@pytest.mark.parametrize("count", [groupby, crosstab])
@pytest.mark.parametrize("categorical", [False, True])
def test_pandas_counts_the_same(table: BenchTable, count: Any, categorical: bool) -> None:
    layout = layout_of(table)
    (cells,) = count(frame_of(table, categorical), [("a3", "a17")])
    pair = int(np.flatnonzero((layout.left == 3) & (layout.right == 17))[0])
    counts = spread_cells(cells, (3, layout.heights[pair], layout.widths[pair]))
    assert same_tables(tables_of(engine_of(table, 1), layout), layout, [(pair, counts)])


def test_one_hot_products_count_the_same(table: BenchTable) -> None:
    layout = layout_of(table)
    theirs = one_hot_tables(table, layout, products_of(one_hot(table)))
    assert same_tables(tables_of(engine_of(table, 1), layout), layout, theirs)


def test_chi_squares_are_ours() -> None:
    table = make_table(400)
    few = BenchTable(table.codes[:6], table.sizes[:6], table.target)
    layout = layout_of(few)
    counts = tables_of(engine_of(few, 1), layout)
    np.testing.assert_allclose(chi_squares(counts, layout)[:, :2], statistics_of(counts, layout)[:, [X2, DF]])


def test_words_of_planes_by_listing_pairs() -> None:
    sizes = [2, 5, 3]
    listed = sum((sizes[i] - 1) * (sizes[j] - 1) for i in range(3) for j in range(i)) * 640 / 64
    assert plane_words(np.array(sizes), 640) == listed


@pytest.mark.parametrize("name", LOOPS)
def test_loops_count_ones(name: str) -> None:
    loop, planes, pairs = LOOPS[name]
    words = WORDS // planes
    bits = np.random.default_rng(1).integers(0, 2**63, (planes, words + 64), np.uint64)
    left = 4 if pairs == 8 else planes // 2
    shared = [bits[:left, None, 8 * turn : 8 * turn + words] & bits[left:, :words] for turn in range(3)]
    assert [one.shape[0] * one.shape[1] for one in shared] == [pairs] * 3
    assert loop(bits, 3) == np.bitwise_count(shared).sum()


def test_peak_is_within_what_a_machine_can_do() -> None:
    found = popcount_peak(1, 2)
    assert set(found) == set(LOOPS)
    assert all(1e7 < words < 1e12 for words in found.values())
    assert 1e8 < clock_rate(5, 20_000) < 2e10


def test_the_planted_dependences_are_in_the_table() -> None:
    table = make_table(20_000)
    assert float((table.codes[1] == table.codes[0] % table.sizes[1]).mean()) > 0.25
    assert (make_table(20_000).codes == table.codes).all()
    assert sorted(set(table.sizes.tolist())) == list(range(2, 13))


def test_words_depend_within_a_class_and_are_rare_to_common(tmp_path: Path) -> None:
    wide = make_wide(2_000, 60)
    shares = wide.codes.mean(axis=1)
    assert shares.min() < 0.05
    assert 0.3 < shares.max() < 0.7
    within = wide.codes[:, wide.target == 0]
    assert np.abs(np.corrcoef(within) - np.eye(60)).max() > 0.3
    write_wide(wide, tmp_path / "w.parquet")
    back = pyarrow.parquet.read_table(tmp_path / "w.parquet")
    assert back["w00007"].to_pylist() == np.where(wide.codes[7], "present", "absent").tolist()


def test_tall_files_hold_the_blocks_and_stay(tmp_path: Path) -> None:
    size = write_tall(tmp_path, 250, 100)
    assert [path.name for path in sorted(tmp_path.iterdir())] == [f"rows000{k}.parquet" for k in range(3)]
    back = pyarrow.parquet.read_table(tmp_path / "rows0002.parquet")
    table = make_tall(50, 2)
    assert back["a06"].to_pylist() == [f"level {k}" for k in table.codes[6]]
    assert (table.codes.max(axis=1) < SIZES).all()
    assert write_tall(tmp_path, 250, 100) == size
    with pytest.raises(SizeError, match="GB free"):
        write_tall(tmp_path / "more", 10**15, 10**14)


def test_csv_and_parquet_hold_the_same(tmp_path: Path) -> None:
    for name in ("t.csv", "t.parquet"):
        write_table(make_table(50), tmp_path / name)
    assert pyarrow.csv.read_csv(tmp_path / "t.csv").equals(pyarrow.parquet.read_table(tmp_path / "t.parquet"))


def test_bitmaps_are_twenty_by_twenty() -> None:
    frame = bitmaps()
    assert frame.shape == (1797, 401)
    assert 0.1 < (frame.drop(columns="digit") == "1").to_numpy().mean() < 0.6


def test_both_ways_to_cross_validate_agree(table: BenchTable) -> None:
    folds = StratifiedKFold(10, shuffle=True, random_state=1)
    model = CategoricalNB(alpha=1, min_categories=table.sizes)
    p = cross_val_predict(model, table.codes.T, table.target, cv=folds, method="predict_proba")
    assert scikit_log_loss(table) == pytest.approx(log_loss(table.target, p) / np.log(2), abs=1e-12)


def test_a_process_is_watched() -> None:
    child = python("import time; held = b'x' * 60_000_000; time.sleep(0.2); print(len(held))")
    assert child.output == "60000000\n"
    assert child.resident > 60_000_000
    assert child.anonymous == 0 or child.anonymous > 60_000_000
    with pytest.raises(ChildError, match="ended with 3"):
        python("raise SystemExit(3)")


def test_stages_are_read_from_what_the_command_writes() -> None:
    lines = "stage  seconds  processor seconds", "reading a file     0.52             0.49", "all  1.00  2.00"
    child = Child(1.0, 1.0, 1, 1, "", "\n".join(lines))
    assert child.stages() == [("reading a file", 0.52, 0.49), ("all", 1.0, 2.0)]


def test_rounds_are_kept_apart() -> None:
    seen: list[str] = []
    found = side_by_side({"a": lambda: seen.append("a"), "b": lambda: seen.append("b")}, 3)
    assert seen == ["a", "b"] * 3
    assert found["a"]["runs"] == 3
    assert found["a"]["least"] <= found["a"]["seconds"] <= found["a"]["most"]


@pytest.mark.parametrize(("measured", "at_least", "holds"), [(5, True, True), (4.9, True, False), (5.1, False, False)])
def test_claims(measured: float, at_least: bool, holds: bool) -> None:
    claim = Claim("speed", measured, 5, at_least)
    assert claim.holds is holds
    assert claim.row().endswith("| met |" if holds else "| **missed** |")


def test_steps_are_stored_and_left_out_on_resuming(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    done: list[str] = []

    def fails(_: Setting) -> dict[str, Any]:
        raise ChildError("it broke")

    def works(_: Setting) -> dict[str, Any]:
        done.append("first")
        return {"value": len(done)}

    monkeypatch.setitem(PARTS, "pairs", Part({"first": works, "second": fails}, lambda _: [], lambda _: []))
    for _ in range(2):
        assert measure("pairs", Setting(tmp_path), tmp_path, resume=True) == ["second"]
    assert done == ["first"]
    assert load(tmp_path / "pairs.json")["first"]["value"] == 1
    measure("pairs", Setting(tmp_path), tmp_path, resume=False)
    assert done == ["first"] * 2


def test_small_run_of_the_pairs_gives_a_page(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(part_pairs, "SAMPLED", 2)
    setting = Setting(tmp_path, 0.0005, 1)
    figures: dict[str, Any] = {name: {} for name in PARTS}
    for step in ("counting", "limit"):
        figures["pairs"][step] = {"machine": "one", **part_pairs.STEPS[step](setting)}
    assert json.loads(json.dumps(figures)) == figures
    text = page(figures)
    assert "| one np.bincount per pair |" in text
    assert "| 500 x 50 | 2 |" in text
    assert "its time is multiplied by 612" in text
    assert len(PARTS["pairs"].claims(figures["pairs"])) == 4


def test_matplotlib_draws_every_chart_of_the_page_once_for_each_theme() -> None:
    found = charts_measured(small_run().comparison)
    assert found.numbers[1] == 2 * found.numbers[0] > 0
    assert found.bytes[1] > found.bytes[0]
