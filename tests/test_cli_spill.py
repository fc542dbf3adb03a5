"""The same results with the rows on a disk as in memory, and one sentence where they cannot lie there."""

import json
from pathlib import Path

import pytest
from commandline import FAST, call, refusal, small_table

from bnx.storing import Spill


def spilled(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> tuple[str, list[int]]:
    """Make a folder to spill to, and a list that grows with the bytes taken there."""
    taken: list[int] = []
    plain = Spill._new_map

    def new_map(store: Spill, size: int) -> object:
        taken.append(size)
        return plain(store, size)

    monkeypatch.setattr(Spill, "_new_map", new_map)
    folder = tmp_path / "disk"
    folder.mkdir()
    return str(folder), taken


@pytest.mark.parametrize("repeats", ["1", "2"])
def test_learn_finds_the_same_with_and_without(tmp_path: Path, monkeypatch: pytest.MonkeyPatch, repeats: str) -> None:
    folder, taken = spilled(tmp_path, monkeypatch)
    options = ("--class", "grade", "--repeats", repeats, "--quiet", "--predictions", *FAST)
    for name, more in (("plain", ()), ("spilled", ("--spill", folder, "--jobs", "2"))):
        run = call("learn", small_table(), "-o", str(tmp_path / name), *options, *more)
        assert (run.code, run.err) == (0, "")
    assert sum(taken) > 1 << 24
    names = sorted(path.name for path in (tmp_path / "plain").iterdir())
    assert names == sorted(path.name for path in (tmp_path / "spilled").iterdir())
    for name in names:
        assert (tmp_path / "plain" / name).read_bytes() == (tmp_path / "spilled" / name).read_bytes(), name
    assert list(Path(folder).iterdir()) == []


@pytest.mark.parametrize("command", [("test", "--all", "--json"), ("profile", "--json")])
def test_other_commands_find_the_same(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch, command: tuple[str, ...]
) -> None:
    folder, taken = spilled(tmp_path, monkeypatch)
    name, *options = command
    plain = call(name, small_table(), "--class", "grade", *options)
    run = call(name, small_table(), "--class", "grade", *options, "--spill", folder)
    assert sum(taken) > 1 << 24
    assert (run.code, json.loads(run.out)) == (0, json.loads(plain.out))


@pytest.mark.parametrize("folder", ["", "nowhere"])
def test_a_folder_that_is_not_there_is_refused(tmp_path: Path, folder: str) -> None:
    place = str(tmp_path / folder) if folder else ""
    for command in (("learn", "-o", str(tmp_path / "out")), ("test", "--all"), ("profile",)):
        name, *options = command
        assert refusal(name, small_table(), "--class", "grade", *options, "--spill", place) == (
            f"--spill {place}: there is no such folder; make it, or give another one"
        )
    assert not (tmp_path / "out").exists()
