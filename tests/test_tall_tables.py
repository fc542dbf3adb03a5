"""Tall tables are read, coded, dealt and sorted a stretch at a time: stretches, threads and files change nothing."""

import tracemalloc
from collections import Counter
from pathlib import Path

import numpy as np
import pytest
from builders import coded as coded_rows
from builders import silent
from hypothesis import HealthCheck, given, settings
from hypothesis import strategies as st
from tablefiles import parquet_of, source_of, texts

from bnx import cells, duplicates, passes
from bnx.coding import Coded, code_table
from bnx.dealing import deal
from bnx.engines import start_local
from bnx.errors import DataError
from bnx.folds import assign_blocks
from bnx.recipe import Recipe
from bnx.storing import MEMORY, Spill

Columns = dict[str, list[str]]
PLAIN = settings(max_examples=40, deadline=None, suppress_health_check=[HealthCheck.function_scoped_fixture])


@st.composite
def tables(draw: st.DrawFn) -> Columns:
    """Draw columns of texts, of few and of many numbers, with blanks in the class and elsewhere."""
    rows = draw(st.integers(60, 250))
    random = np.random.default_rng(draw(st.integers(0, 10_000)))
    columns = {
        "few": [f"l{k}" for k in random.integers(0, 4, rows)],
        "many": [f"t{k}" for k in random.integers(0, 40, rows)],
        "coded": [f"{k / 4:g}" for k in random.integers(0, 60, rows)],
        "measured": [f"{k:.4f}" for k in random.normal(size=rows)],
        "arrival": [("sound", "rejected", "downgraded")[k] for k in random.integers(0, 3, rows)],
    }
    for cells_of_one in columns.values():
        if draw(st.booleans()):
            cells_of_one[:] = [cell if random.random() < 0.9 else "" for cell in cells_of_one]
    again = draw(st.integers(0, 30))
    return {name: values + values[:again] for name, values in columns.items()}


def same(one: Coded, other: Coded) -> bool:
    """Tell whether everything that was coded and noticed is the same."""
    return (
        (one.table.schema, one.left_out, one.warnings, one.rows_read, one.duplicates)
        == (other.table.schema, other.left_out, other.warnings, other.rows_read, other.duplicates)
        and one.table.codes.dtype == other.table.codes.dtype
        and np.array_equal(one.table.codes, other.table.codes)
        and np.array_equal(one.table.target, other.table.target)
        and np.array_equal(one.table.lines.numbers(), other.table.lines.numbers())
    )


@given(tables(), st.sampled_from([1, 3, 64, 100]), st.integers(1, 3), st.sampled_from(["level", "drop"]), st.booleans())
@PLAIN
def test_stretches_threads_and_files_change_nothing(
    tmp_path: Path, columns: Columns, stretch: int, jobs: int, missing: str, as_text: bool
) -> None:
    source = (source_of if as_text else parquet_of)(tmp_path, columns)
    recipe = Recipe("arrival", missing=missing, keep=("all",), numeric=("coded", "measured"))
    whole = recipe.code(source)
    with pytest.MonkeyPatch.context() as patch:
        patch.setattr(cells, "STRETCH", stretch)
        patch.setattr(duplicates, "_HASHES", 50)
        patch.setattr(passes, "_BYTES", 500)
        patch.setattr(passes, "_COLUMNS", 2)
        assert same(whole, recipe.code(source, jobs))
        assert same(whole, recipe.code(source, jobs, Spill(str(tmp_path))))


@given(tables())
@PLAIN
def test_coded_rows_read_back_as_the_rows_of_the_file(tmp_path: Path, columns: Columns) -> None:
    """An oracle in plain lists: blanks dropped, levels by name, repeats by counting whole rows."""
    with pytest.MonkeyPatch.context() as patch:
        patch.setattr(cells, "STRETCH", 16)
        coded = code_table(source_of(tmp_path, columns), "arrival", missing="drop", keep=[*columns][:-1], jobs=2)
    kept = [k for k, row in enumerate(zip(*columns.values(), strict=True)) if "" not in row]
    assert coded.table.lines.numbers().tolist() == kept
    for name in ("few", "many"):
        assert texts(coded, name) == [columns[name][k] for k in kept]
    for name in ("coded", "measured"):
        domain = coded.table.schema.attributes[coded.table.schema.index(name)]
        numbers = np.array([float(columns[name][k]) for k in kept])
        found = coded.table.codes[coded.table.schema.index(name)]
        if domain.numeric:
            assert np.array_equal(found, np.searchsorted(domain.cuts, numbers))
    rows = Counter(tuple(values[k] for values in columns.values()) for k in kept)
    assert coded.duplicates == sum(rows.values()) - len(rows)


@given(st.integers(1, 700), st.sampled_from([3, 7]), st.integers(1, 3), st.booleans())
@PLAIN
def test_rows_are_dealt_the_same_stretch_by_stretch(
    tmp_path: Path, rows: int, folds: int, jobs: int, gaps: bool
) -> None:
    """Blocks of 64 lines stand for the usual 65,536."""
    random = np.random.default_rng(rows)
    columns = {"a": [f"v{k}" for k in random.integers(0, 3, rows + 9)]}
    columns["arrival"] = ["x", "y", "x", "y", "x", "y", "x", "y", "x", *random.choice(["x", "y", "z"], rows)]
    if gaps:
        columns["arrival"] = [cell if k % 3 else "" for k, cell in enumerate(columns["arrival"])]
    with pytest.MonkeyPatch.context() as patch:
        patch.setattr("bnx.dealing.STRETCH_ROWS", 64)
        patch.setattr("bnx.dealing.assign_blocks", lambda *given: assign_blocks(*given, 64))
        coded = Recipe("arrival", keep=("all",)).code(parquet_of(tmp_path, columns))
        if len(coded.table.target) < folds:
            return
        found, number = deal(coded, Recipe("arrival", folds=folds), 1, jobs, MEMORY)
    assert number == folds
    expected = assign_blocks(coded.table.target, coded.table.lines.numbers(), 1, folds, 1, 64)
    assert np.array_equal(found, expected)


@pytest.mark.parametrize("spill", [False, True])
@pytest.mark.parametrize("chunk", [50, 1 << 20])
def test_sorting_in_place_gives_the_same_engine(tmp_path: Path, spill: bool, chunk: int) -> None:
    random = np.random.default_rng(2)
    columns = {f"a{k}": [f"v{x}" for x in random.integers(0, 2 + k, 400)] for k in range(4)}
    columns["arrival"] = random.choice(["x", "y", "z"], 400).tolist()
    store = Spill(str(tmp_path)) if spill else MEMORY
    coded = code_table(source_of(tmp_path, columns), "arrival", store=store)
    blocks = random.integers(0, 6, 400)
    plain = start_local(coded.table, blocks, 6, 1, silent, chunk=chunk)
    before = coded.table.codes.copy()
    copied = start_local(coded.table, blocks, 6, 2, silent, store, chunk=chunk)
    assert np.array_equal(coded.table.codes, before)
    placed = start_local(coded.table, blocks, 6, 2, silent, store, chunk=chunk, in_place=True)
    assert placed.codes is coded.table.codes
    for one in (copied, placed):
        for name in ("codes", "target", "order", "starts", "class_counts"):
            assert np.array_equal(getattr(plain, name), getattr(one, name)), name
        assert all(np.array_equal(a, b) for a, b in zip(plain.margins, one.margins, strict=True))


def test_dealing_and_sorting_in_place_need_little_memory() -> None:
    """Blocks, groups and classes are a byte a row each; everything else is a chunk or a stretch."""
    random = np.random.default_rng(4)
    rows, chunk = 1_000_000, 1 << 14
    table = coded_rows(random.integers(0, 5, (16, rows)), random.integers(0, 3, rows))
    coded = Coded(table, (), (), {}, rows, 0)
    deal(coded, Recipe("class"), 0, 1, MEMORY)  # compiles, or loads what is compiled
    tracemalloc.start()
    try:
        blocks, _ = deal(coded, Recipe("class"), 0, 1, MEMORY)
        engine = start_local(table, blocks, 40, 1, silent, chunk=chunk, in_place=True)
        peak = tracemalloc.get_traced_memory()[1]
    finally:
        tracemalloc.stop()
    assert engine.rows == rows
    assert 3 * rows <= peak < 3 * rows + 7_000_000
    assert peak < table.codes.nbytes / 1.5


@pytest.mark.parametrize("jobs", [1, 2, 3, 5])
@pytest.mark.parametrize("as_text", [True, False])
def test_of_several_faults_the_first_in_the_file_is_told(tmp_path: Path, jobs: int, as_text: bool) -> None:
    columns = {name: [str(k) for k in range(200_000)] for name in ("a", "b", "c", "d")}
    columns["arrival"] = ["x", "y"] * 100_000
    columns["a"][180_000] = "late"
    columns["d"][70_500] = "early"
    columns["c"][70_600] = "early as well"
    source = (source_of if as_text else parquet_of)(tmp_path, columns)
    with pytest.raises(DataError) as caught:
        code_table(source, "arrival", numeric=["a", "b", "c", "d"], jobs=jobs)
    told = str(caught.value).removesuffix("; every cell of it must hold a finite number or be blank")
    # both early faults lie in one block, of which the first column is told
    assert told == "row 70,601 has 'early as well' in the numeric column 'c'"
