"""The commands beside ``bnx learn``: what they print and what they write."""

import json
import re
from pathlib import Path

import numpy as np
import pandas as pd
import pytest
from commandline import NAMES, call, small_results, small_table, write

from bnx.formats.structure_json import classifier_of, read_structure


def test_profile_prints_a_table_or_json() -> None:
    run = call("profile", small_table(), "--class", "grade")
    assert run.code == 0
    assert [line.split()[0] for line in run.out.splitlines()[3:9]] == list(NAMES[:-1])
    found = json.loads(call("profile", small_table(), "--class", "grade", "--json", "--ignore", "dock,alarm").out)
    assert [one["name"] for one in found["attributes"]] == list(NAMES[2:-1])


def test_show_prints_the_structure_and_tables_asked_for() -> None:
    path = f"{small_results()}/kdb2.json"
    document = read_structure(path)
    run = call("show", path, "alarm")
    assert run.out.startswith("kdb2 (up to 2 parents)   class grade: few, many, some\n240 rows of small.csv; ")
    for edge in document["edges"]:
        assert re.search(rf"^{edge['parent']} -> {edge['child']}  .* {edge['chosen_in']} of 4  ", run.out, re.M)
    table = run.out.rpartition("\nalarm\n")[2].splitlines()
    parents = next(one["parents"] for one in document["attributes"] if one["name"] == "alarm")
    assert table[0].split() == ["grade", *parents, "few", "many", "some", "rows"]
    assert sum(int(line.split()[-1]) for line in table[1:]) == 240
    assert json.loads(call("show", path, "--json").out) == document


def test_show_answers_separation() -> None:
    naive = f"{small_results()}/naive.json"
    free = call("show", naive, "--separated", "dock", "alarm", "--given", "grade")
    assert free.out == "naive makes dock and alarm independent given grade: every path between them is blocked.\n"
    bound = call("show", naive, "--separated", "dock", "alarm", "--json")
    expected = {"structure": "naive", "a": "dock", "b": "alarm", "given": [], "separated": False}
    assert json.loads(bound.out) == expected


@pytest.mark.parametrize(
    ("name", "start"), [("f.svg", b"<"), ("sp ü.png", b"\x89PNG"), ("f.pdf", b"%PDF"), ("f.dot", b"digraph")]
)
def test_draw_writes_every_form(tmp_path: Path, name: str, start: bytes) -> None:
    run = call("draw", f"{small_results()}/kdb2.json", "-o", str(tmp_path / name))
    assert (run.code, run.out, run.err) == (0, "", f"{tmp_path / name} written\n")
    assert (tmp_path / name).read_bytes().lstrip().startswith(start)
    assert [path.name for path in tmp_path.iterdir()] == [name]


def test_draw_dark_differs_from_light(tmp_path: Path) -> None:
    for theme in ("light", "dark"):
        call("draw", f"{small_results()}/kdb2.json", "-o", str(tmp_path / f"{theme}.dot"), "--theme", theme)
    assert (tmp_path / "light.dot").read_text() != (tmp_path / "dark.dot").read_text()


def test_draw_leaves_out_weak_edges(tmp_path: Path) -> None:
    document = read_structure(f"{small_results()}/kdb2.json")
    most = max(edge["bits"] for edge in document["edges"])
    for name, least in (("all", "0"), ("strongest", str(most))):
        call("draw", f"{small_results()}/kdb2.json", "-o", str(tmp_path / f"{name}.dot"), "--least-bits", least)
    drawn = {name: (tmp_path / f"{name}.dot").read_text().count('id="e') for name in ("all", "strongest")}
    assert drawn["all"] > drawn["strongest"]


def test_draw_leaves_out_edges_of_little_held_out_gain(tmp_path: Path) -> None:
    document = read_structure(f"{small_results()}/kdb2.json")
    most = max(edge["gain"] for edge in document["edges"])
    for name, least in (("all", "-1"), ("best", str(most))):
        call("draw", f"{small_results()}/kdb2.json", "-o", str(tmp_path / f"{name}.dot"), "--least-gain", least)
    drawn = {name: (tmp_path / f"{name}.dot").read_text() for name in ("all", "best")}
    assert drawn["all"].count('id="e') == len(document["edges"])
    best = [edge for edge in document["edges"] if edge["gain"] == most]
    assert drawn["best"].count('id="e') == len(best)
    assert f"left out: those that gain less than {most:g} bits on held-out rows" in drawn["best"]


def test_export_hands_over_the_same_classifier(tmp_path: Path) -> None:
    out = tmp_path / "chosen.json"
    assert call("export", small_results(), "--structure", "kdb2", "-o", str(out)).code == 0
    assert read_structure(str(out)) == read_structure(f"{small_results()}/kdb2.json")
    assert (
        call("export", small_results(), "--structure", "kdb2", "-o", str(tmp_path / "f.dot"), "--to", "dot").code == 0
    )
    assert (tmp_path / "f.dot").read_text() == (Path(small_results()) / "kdb2.dot").read_text()


def test_classify_gives_the_classifiers_probabilities_in_csv_parquet_and_on_standard_output(tmp_path: Path) -> None:
    path = f"{small_results()}/kdb2.json"
    shown = call("classify", path, small_table(), "-o", "-")
    assert (shown.code, shown.err) == (0, "")
    for name in ("out.csv", "out.parquet"):
        run = call("classify", path, small_table(), "-o", str(tmp_path / name))
        assert (run.code, run.out, run.err) == (0, "", f"240 records classified into {tmp_path / name}\n")
    assert (tmp_path / "out.csv").read_bytes().decode() == shown.out
    frame = pd.read_parquet(tmp_path / "out.parquet")
    levels = classifier_of(read_structure(path), path).target.levels
    p = frame[[f"p:{level}" for level in levels]].to_numpy()
    assert np.allclose(p.sum(axis=1), 1.0, rtol=0, atol=1e-12)
    assert frame["most_probable"].tolist() == [levels[k] for k in p.argmax(axis=1)]
    assert frame["row"].tolist() == list(range(240))
    pd.testing.assert_frame_equal(pd.read_csv(tmp_path / "out.csv"), frame, check_dtype=False)


def test_classify_takes_what_it_has_never_seen(tmp_path: Path) -> None:
    rows = [
        ["never", "few", "", "", "site 0", "abc", "x"],
        ["", "", "", "", "", "", ""],
        ["few", "few", "few", "few", "x", "1", "x"],
    ]
    table = write(tmp_path / "new.csv", (*NAMES[:-1], "something else"), rows)
    run = call("classify", f"{small_results()}/kdb2.json", table, "-o", "-")
    assert run.code == 0
    assert run.out.count("\n") == 4
    assert run.err == (
        "note: cells that are blank or hold a value not known from training were summed out: "
        "dock (2 records), alarm (1 record), lane (2 records), site (2 records), gap (2 records)\n"
    )
    assert call("classify", f"{small_results()}/kdb2.json", table, "-o", "-", "--quiet").err == ""


def test_classify_reads_standard_input() -> None:
    text = Path(small_table()).read_text(encoding="utf-8")
    path = f"{small_results()}/naive.json"
    assert (
        call("classify", path, "-", "-o", "-", stdin=text).out == call("classify", path, small_table(), "-o", "-").out
    )
