"""Options of ``bnx test``: each tells, the JSON holds those that were read, and notes say what they mean."""

import json
from dataclasses import fields
from inspect import signature
from itertools import combinations
from pathlib import Path

import numpy as np
import pytest
from commandline import call, small_rows, small_table, write

from bnx.cli.test import run
from bnx.recipe import Recipe

GRADE = ("--class", "grade")


def mixed_table(folder: Path) -> str:
    """Write a table in which every option has something to do: blanks, numbers of both kinds, a constant column."""
    random = np.random.default_rng(6)
    rows = []
    for row in small_rows(1200):
        trips = int(random.integers(0, 12))
        rows.append([*row[:-1], str(trips), "same", row[-1]])
    return write(
        folder / "mixed.csv", ("dock", "alarm", "lane", "shift", "site", "gap", "trips", "flat", "grade"), rows
    )


OPTIONS = {
    "--given lane": ("dock", "alarm"),
    "--explain": ("dock", "alarm"),
    "--strata": ("dock", "alarm"),
    "--ordered dock=few<some<many": ("dock", "alarm"),
    "--ordered trips": ("dock", "trips"),
    "--test chi2": ("dock", "trips", "--given", "site"),
    "--test g": ("dock", "alarm"),
    "--test monte-carlo": ("dock", "alarm"),
    "--test monte-carlo --seed 7": ("shift", "site", "--test", "monte-carlo"),
    "--adjust none": ("dock", "alarm", "lane", "shift"),
    "--adjust holm": ("dock", "alarm", "lane", "shift"),
    "--adjust by": ("dock", "alarm", "lane", "shift"),
    "--alpha 0.2": ("dock", "alarm"),
    "--negligible 9": ("--all",),
    "--bins width:3": ("dock", "gap"),
    "--bins mdl": ("dock", "gap"),
    "--numeric trips": ("dock", "trips"),
    "--categorical gap": ("--all", "--keep", "gap"),
    "--ignore lane": ("--all",),
    "--keep flat": ("--all",),
    "--close 0": ("--all",),
    "--missing drop": ("dock", "alarm"),
    "--max-levels 3": ("dock", "site"),
    "--weight trips": ("dock", "alarm"),
}


@pytest.mark.parametrize("options", OPTIONS)
def test_every_option_changes_what_is_found(options: str, tmp_path: Path) -> None:
    table, names = mixed_table(tmp_path), OPTIONS[options]
    before, after = (call("test", table, *GRADE, *names, "--json", *more) for more in ((), options.split(" ")))
    assert (before.code, after.code) == (0, 0), after
    plain, other = (json.loads(run.out)["tests"] for run in (before, after))
    assert plain != other


READ = {
    *("test", "adjust", "alpha", "negligible", "seed", "bins", "numeric", "categorical", "ignore", "keep", "missing"),
    *("max_levels", "weight"),
}


def test_the_settings_of_the_json_are_what_the_command_reads() -> None:
    """A setting is a field of the recipe that the command has an option for; the class has a place of its own."""
    assert {field.name for field in fields(Recipe)} & set(signature(run).parameters) - {"target"} == READ
    found = json.loads(call("test", small_table(), *GRADE, "dock", "alarm", "--json").out)["settings"]
    defaults = Recipe("grade", bins="frequency:5")
    assert found == {name: value for name, value in defaults.to_dict().items() if name in READ}
    auto = json.loads(call("test", small_table(), *GRADE, "dock", "alarm", "--json", "--bins", "auto").out)["settings"]
    assert auto["bins"] == "frequency:5", "which is what auto means where nothing is chosen out of fold"


@pytest.mark.parametrize("name", sorted(READ))
def test_a_setting_that_is_changed_is_told(name: str, tmp_path: Path) -> None:
    """Every setting stands among the options that change what is found."""
    option = f"--{name.replace('_', '-')}"
    options = next(one for one in OPTIONS if option in one.split(" "))
    words = options.split(" ")
    value = words[words.index(option) + 1]
    names = OPTIONS[options]
    found = json.loads(call("test", mixed_table(tmp_path), *GRADE, *names, "--json", *words).out)["settings"]
    expected = [value] if isinstance(found[name], list) else type(found[name])(value)
    assert found[name] == expected


def test_all_says_which_numbers_have_no_cut_point(tmp_path: Path) -> None:
    random = np.random.default_rng(2)
    rows = [
        [
            row[0],
            row[1],
            *(f"{x:.4f}" for x in random.normal(size=2)),
            f"{k % 2 + 3 * random.random():.4f}",
            "xy"[k % 2],
        ]
        for k, row in enumerate(small_rows(200))
    ]
    table = write(tmp_path / "t.csv", ("dock", "alarm", "noise", "chance", "tells", "kind"), rows)
    note = "note: no cut point was found in noise, chance, so there is nothing to test; give other --bins"
    run = call("test", table, "--class", "kind", "--all", "--bins", "mdl")
    assert note in run.err.splitlines()
    document = json.loads(call("test", table, "--class", "kind", "--all", "--bins", "mdl", "--json").out)
    assert note.removeprefix("note: ") in document["notes"]
    none = {frozenset((one["a"], one["b"])) for one in document["tests"] if one["method"] == "none"}
    flat = {"noise", "chance"}
    assert none == {pair for pair in map(frozenset, combinations(("dock", "alarm", "tells", *flat), 2)) if pair & flat}
    assert "cut point" not in call("test", table, "--class", "kind", "--all", "--bins", "frequency:5").err


@pytest.mark.parametrize("options", ["--given lane", "--explain", "--strata", "--ordered dock=few<some<many"])
def test_what_is_asked_for_is_in_the_text_too(options: str, tmp_path: Path) -> None:
    table = mixed_table(tmp_path)
    before, after = (call("test", table, *GRADE, "dock", "alarm", *more) for more in ((), options.split(" ")))
    assert before.out != after.out


def test_quiet_keeps_standard_error_empty(tmp_path: Path) -> None:
    table = mixed_table(tmp_path)
    loud, quiet = (call("test", table, *GRADE, "--all", "--keep", "flat", *more) for more in ((), ("--quiet",)))
    assert loud.out == quiet.out
    assert loud.err.splitlines()[-1].startswith("note: 7 pairs left out in advance (method none): ")
    assert quiet.err == ""
