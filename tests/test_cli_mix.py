"""The mix on the command line: offered with a file, which is classified with, shown and drawn member by member."""

import csv
import json
from functools import cache
from pathlib import Path
from tempfile import mkdtemp

import numpy as np
import pandas as pd
import pytest
from commandline import FAST, call, refusal

from bnx.formats.mix_json import members_of_mix, mixed_of
from bnx.formats.reading_json import read_json


@cache
def results() -> Path:
    """Learn from records of which two structures each explain a part, so that mixing them pays."""
    random = np.random.default_rng(6)
    folder = Path(mkdtemp(prefix="bnx-mix-"))
    target = random.integers(0, 2, 400)
    first = (target + (random.random((400, 4)).T < 0.35)) % 2
    columns = [*first, (first[0] + first[1] + (random.random(400) < 0.3)) % 2]
    with (folder / "table.csv").open("w", newline="", encoding="utf-8") as out:
        writer = csv.writer(out)
        writer.writerow([*(f"a{i}" for i in range(len(columns))), "kind"])
        rows = zip(*columns, target, strict=True)
        writer.writerows([*(f"v{cell}" for cell in row[:-1]), "pq"[row[-1]]] for row in rows)
    run = call(
        "learn", str(folder / "table.csv"), "--class", "kind", "--structures", "naive,tan,kdb2", *FAST,
        "-o", str(folder / "out"),
    )  # fmt: skip
    assert run.code == 0, run
    (folder / "printed.txt").write_text(run.out, encoding="utf-8")
    return folder


def comparison() -> dict[str, object]:
    return dict(json.loads((results() / "out/comparison.json").read_text(encoding="utf-8")))


def test_an_offered_mix_is_told_and_written() -> None:
    mix = comparison()["mix"]
    assert isinstance(mix, dict)
    assert mix["offered"], "drawn so that it is"
    printed = (results() / "printed.txt").read_text(encoding="utf-8")
    assert f"mix: {mix['words']}" in printed
    assert "It may serve where only the probabilities count" in printed
    assert "mix.json" in printed
    document = read_json(str(results() / "out/mix.json"))
    assert [(one["name"], one["weight"]) for one in document["members"]] == [
        (one["name"], one["weight"]) for one in mix["members"]
    ]
    for one, _ in members_of_mix(document, "mix.json"):
        assert one == json.loads((results() / f"out/{one['name']}.json").read_text(encoding="utf-8"))
    assert mix["words"] in (results() / "out/report.html").read_text(encoding="utf-8")


def test_a_mix_classifies_as_its_members_say(tmp_path: Path) -> None:
    table, out = str(results() / "table.csv"), tmp_path / "p.csv"
    assert call("classify", str(results() / "out/mix.json"), table, "-o", str(out)).code == 0
    power, mix = 0.0, read_json(str(results() / "out/mix.json"))
    for one in mix["members"]:
        own = tmp_path / f"{one['name']}.csv"
        call("classify", str(results() / f"out/{one['name']}.json"), table, "-o", str(own))
        power = power + one["weight"] * np.log(pd.read_csv(own)[["p:p", "p:q"]].to_numpy())
    p = np.exp(power)
    p /= p.sum(axis=1, keepdims=True)
    counts = np.array(mix["members"][0]["structure"]["class"]["rows"])
    p *= ((1 - counts / counts.sum()) / (1 - p)) ** mix["sharpness"]
    p /= p.sum(axis=1, keepdims=True)
    assert pd.read_csv(out)[["p:p", "p:q"]].to_numpy() == pytest.approx(p, abs=1e-12)
    moved = tmp_path / "moved.csv"
    call("classify", str(results() / "out/mix.json"), table, "-o", str(moved), "--prior", "p=.2,q=.8")
    p *= np.array([0.2, 0.8]) / counts
    p /= p.sum(axis=1, keepdims=True)
    assert pd.read_csv(moved)[["p:p", "p:q"]].to_numpy() == pytest.approx(p, abs=1e-12)


def test_a_mix_is_shown_and_drawn_member_by_member(tmp_path: Path) -> None:
    path = str(results() / "out/mix.json")
    members = read_json(path)["members"]
    shown = call("show", path, "a1").out
    assert shown.startswith("mix: ")
    assert [f"weight {one['weight']:.3f}: {one['name']}" in shown for one in members] == [True] * len(members)
    assert json.loads(call("show", path, "--json").out)["format"] == "bnx-mix/1"
    assert refusal("show", path, "--separated", "a0", "a1") == (
        "--separated asks one structure, but this is a mix; bnx export a member and ask that"
    )
    assert call("draw", path, "-o", str(tmp_path / "m.dot")).code == 0
    assert sorted(one.name for one in tmp_path.iterdir()) == sorted(f"m-{one['name']}.dot" for one in members)
    for one in members:
        drawn = (tmp_path / f"m-{one['name']}.dot").read_text(encoding="utf-8")
        assert f"weight {one['weight']:.2f} of a mix" in drawn


def test_a_mix_is_exported_whole(tmp_path: Path) -> None:
    out = tmp_path / "handed.json"
    assert call("export", str(results() / "out"), "--structure", "mix", "-o", str(out)).code == 0
    assert out.read_text(encoding="utf-8") == (results() / "out/mix.json").read_text(encoding="utf-8")
    given = ("--structure", "mix", "--to", "dot", "-o", str(tmp_path / "x.dot"))
    sentence = refusal("export", str(results() / "out"), *given)
    assert sentence == "a mix has no edges of its own to draw; export its members, or give --to json"


@pytest.mark.parametrize(
    ("change", "sentence"),
    [
        ({"members": []}, "it has no members"),
        ({"members": [{"weight": 1, "structure": {"format": "other"}}]}, "its members are not all 'bnx-structure/1'"),
        ({"members": [{"weight": "1", "structure": {}}]}, "the members are no structures with weights"),
        ({"sharpness": 2}, "the sharpness is 2, not a number from -1 to 1"),
        ({"sharpness": None}, "the sharpness is None, not a number from -1 to 1"),
        ({"class": {"name": "kind", "levels": ["a", "b"]}}, "its members differ in attributes or class"),
        ({"members": [{"weight": 1}]}, "the members are no structures with weights"),
        ({"members": 3}, "the members are no structures with weights"),
    ],
)
def test_a_broken_mix_is_refused(change: dict[str, object], sentence: str, tmp_path: Path) -> None:
    document = read_json(str(results() / "out/mix.json"))
    path = tmp_path / "mix.json"
    path.write_text(json.dumps(document | change), encoding="utf-8")
    assert sentence in refusal("classify", str(path), str(results() / "table.csv"), "-o", "-")


def test_weights_that_are_no_shares_and_strange_members_are_refused(tmp_path: Path) -> None:
    document = read_json(str(results() / "out/mix.json"))
    path = tmp_path / "mix.json"
    document["members"][0]["weight"] += 0.5
    path.write_text(json.dumps(document), encoding="utf-8")
    assert "are not shares of 1" in refusal("show", str(path))
    document["members"][0]["weight"] -= 0.5
    document["members"][0]["structure"]["class"]["levels"] = ["p", "other"]
    path.write_text(json.dumps(document), encoding="utf-8")
    assert refusal("show", str(path))
    assert mixed_of(read_json(str(results() / "out/mix.json")), "mix.json").weights


def test_without_the_mix_there_is_no_word_of_it(tmp_path: Path) -> None:
    run = call(
        "learn", str(results() / "table.csv"), "--class", "kind", "--structures", "naive,tan,kdb2", *FAST, "--no-mix",
        "-o", str(tmp_path / "out"),
    )  # fmt: skip
    assert run.code == 0
    assert "mix" not in run.out.rpartition("\n")[0].replace(str(tmp_path), "")
    assert not (tmp_path / "out/mix.json").exists()
    assert json.loads((tmp_path / "out/comparison.json").read_text(encoding="utf-8"))["mix"] is None


@pytest.mark.parametrize(
    ("content", "sentence"),
    [
        (b"[" * 100_000, "nests brackets too deeply"),
        (b'{"format": "bnx-mix/1", "x": ' + b"9" * 5_000 + b"}", "holds a number with too many digits"),
        ("{}".encode("utf-16"), "is not text in UTF-8 (at byte 0)"),
        (b'{"format": ', "is not JSON (line 1"),
        (b"[]", "has the format no JSON object"),
    ],
)
def test_a_file_that_is_no_json_of_ours_is_told_in_a_sentence(content: bytes, sentence: str, tmp_path: Path) -> None:
    path = tmp_path / "mix.json"
    path.write_bytes(content)
    assert sentence in refusal("classify", str(path), str(results() / "table.csv"), "-o", "-")
    assert sentence in refusal("show", str(path))
    assert "is a folder, not a file" in refusal("show", str(tmp_path))


def test_two_members_of_one_name_are_refused(tmp_path: Path) -> None:
    document = read_json(str(results() / "out/mix.json"))
    one = document["members"][0]
    twice = [{**one, "weight": 0.5}, {**one, "weight": 0.5}]
    path = tmp_path / "mix.json"
    path.write_text(json.dumps(document | {"members": twice}), encoding="utf-8")
    assert "two of its members have the same name" in refusal("show", str(path))


@pytest.mark.parametrize("option", ["--weight", "--group", "--fold-column"])
def test_an_empty_name_of_a_column_is_refused(option: str) -> None:
    sentence = refusal("learn", str(results() / "table.csv"), "--class", "kind", option, "")
    assert sentence == f"{option} names no column; give the name of one, or drop the option"


def test_a_mix_may_be_all_of_a_structure_that_is_not_picked(tmp_path: Path) -> None:
    """Two attributes depend a little: the tree is better by .006 bits, within the region, so naive Bayes is picked."""
    random = np.random.default_rng(0)
    shift = 0.0216
    cells = []
    for first, second, sign in ((0.35, 0.4, -1), (0.65, 0.6, 1)):
        alone = np.outer([1 - first, first], [1 - second, second])
        cells.append(alone / 2 + sign * shift / 2 * np.array([[1, -1], [-1, 1]]))
    drawn = random.choice(8, 30_000, p=np.ravel(cells))
    kind, one, two = np.unravel_index(drawn, (2, 2, 2))
    frame = pd.DataFrame({"one": one, "two": two, "kind": kind}).astype(str)
    frame.to_csv(tmp_path / "t.csv", index=False)
    given = (str(tmp_path / "t.csv"), "--class", "kind", "--structures", "naive,tan", "--resamples", "0")
    assert call("learn", *given, "-o", str(tmp_path / "out")).code == 0
    document = json.loads((tmp_path / "out/comparison.json").read_text(encoding="utf-8"))
    assert document["recommended"]["name"] == "naive"
    assert document["mix"]["words"] == "1.00 tan"
    assert not document["mix"]["offered"]


def test_names_and_words_that_are_not_those_of_the_members_are_refused(tmp_path: Path) -> None:
    document = read_json(str(results() / "out/mix.json"))
    renamed = [{**one, "name": "../x"} for one in document["members"]]
    path = tmp_path / "mix.json"
    for change in ({"members": renamed}, {"words": None}):
        path.write_text(json.dumps(document | change), encoding="utf-8")
        assert "its words or the names of its members are not theirs" in refusal("show", str(path))
        assert "its words or the names of its members are not theirs" in refusal(
            "draw", str(path), "-o", str(tmp_path / "m.svg")
        )


def test_no_picture_is_drawn_where_one_is_there_already(tmp_path: Path) -> None:
    path = str(results() / "out/mix.json")
    last = read_json(path)["members"][-1]["name"]
    (tmp_path / f"m-{last}.dot").write_text("mine", encoding="utf-8")
    assert "exists already" in refusal("draw", path, "-o", str(tmp_path / "m.dot"))
    assert [one.name for one in tmp_path.iterdir()] == [f"m-{last}.dot"]
