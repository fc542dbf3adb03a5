"""How fast, as ratios measured side by side in one run: ``pytest -m speed tests/speed -s``; no time is asserted.

Both bounds stand for a million rows of 50 attributes (2 to 12 levels) and 3 classes.
"""

import json
from pathlib import Path

import pytest
from make_table import BenchTable, make_table, write_parquet
from measuring import (
    bincounts,
    cross_validations,
    engine_of,
    learn,
    pair_tasks,
    processors,
    same_tables,
    scikit_log_loss,
    scikit_parallel,
    side_by_side,
)

pytestmark = [pytest.mark.speed, pytest.mark.timeout(3600)]

RUNS = 3


@pytest.fixture(scope="module")
def table() -> BenchTable:
    return make_table()


def test_pair_tables_against_one_bincount_per_pair(table: BenchTable) -> None:
    assert same_tables(table, engine_of(table, 2), bincounts(table))  # also compiles what is timed
    times = side_by_side(pair_tasks(table), RUNS)
    theirs = times["one np.bincount per pair"].seconds
    for name, one in times.items():
        print(f"\n{name}: {one.seconds:.3f} s, {theirs / one.seconds:.1f} times as fast", end="")
    assert theirs >= 20 * times["bnx, one thread"].seconds
    if processors() > 1:
        assert theirs >= 35 * times["bnx, two threads"].seconds


def test_blocks_do_not_change_the_tables() -> None:
    table = make_table(10_000)
    assert same_tables(table, engine_of(table, 2, 40), bincounts(table))


def test_the_whole_command_against_one_cross_validation(table: BenchTable, tmp_path: Path) -> None:
    path, output = tmp_path / "table.parquet", tmp_path / "results"
    write_parquet(make_table(3_000), path)
    learn(path, output)  # compiles what is timed
    write_parquet(table, path)
    times = side_by_side(cross_validations(table, path, output), RUNS)
    ours = times["bnx learn, the whole command, two threads"].seconds
    for name, one in times.items():
        print(f"\n{name}: {one.seconds:.1f} s, {one.processor_seconds:.1f} processor seconds", end="")
    assert ours < times["scikit-learn, CategoricalNB alone"].seconds
    document = json.loads((output / "comparison.json").read_text(encoding="utf-8"))
    assert document["rows"] == len(table.target)
    assert len(document["attributes"]) == len(table.sizes)


def test_both_ways_to_cross_validate_agree() -> None:
    table = make_table(3_000)
    assert scikit_log_loss(table) == pytest.approx(scikit_parallel(table), abs=1e-12)


def test_the_planted_dependences_are_in_the_table() -> None:
    table = make_table(20_000)
    assert float((table.codes[1] == table.codes[0] % table.sizes[1]).mean()) > 0.25
    again = make_table(20_000)
    assert (again.codes == table.codes).all()
    assert sorted(set(table.sizes.tolist())) == list(range(2, 13))
