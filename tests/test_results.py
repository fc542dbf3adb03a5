"""Results are written whole or not at all, and never over what somebody may want to keep."""

import errno
import json
from pathlib import Path
from typing import Any

import pytest
from commandline import FAST, call, small_results, small_table

from bnx.errors import DataError, SettingError
from bnx.files import write_bytes
from bnx.results import draw_all, json_text, new_folder


def earlier_run(folder: Path, *names: str) -> None:
    """Leave what an earlier run would have left."""
    folder.mkdir()
    document = {"format": "bnx-comparison/1", "structures": [{"name": name} for name in names]}
    (folder / "comparison.json").write_text(json.dumps(document))
    for name in names:
        (folder / f"{name}.json").write_text("old")
    (folder / "report.html").write_text("old")


def write(place: Path, overwrite: bool = False) -> None:
    with new_folder(str(place), overwrite) as folder:
        (folder / "comparison.json").write_text("new")


def files(place: Path) -> list[str]:
    return sorted(str(path.relative_to(place)) for path in place.rglob("*") if not path.is_dir())


def test_a_folder_appears_when_the_block_has_ended(tmp_path: Path) -> None:
    place = tmp_path / "a" / "b" / "out"
    with new_folder(str(place), False) as folder:
        (folder / "one.txt").write_text("1")
        assert not place.exists()
        assert folder.parent == place.parent
    assert files(tmp_path) == ["a/b/out/one.txt"]
    assert place.stat().st_mode & 0o777 == 0o755


def test_a_block_that_fails_leaves_no_trace_not_even_of_the_folders_above(tmp_path: Path) -> None:
    def fail() -> None:
        with new_folder(str(tmp_path / "a" / "b" / "out"), False) as folder:
            (folder / "half.txt").write_text("half")
            raise KeyboardInterrupt

    with pytest.raises(KeyboardInterrupt):
        fail()
    assert list(tmp_path.iterdir()) == []


def test_folders_above_that_others_use_by_now_stay(tmp_path: Path) -> None:
    def fail() -> None:
        with new_folder(str(tmp_path / "a" / "out"), False):
            (tmp_path / "a" / "theirs.txt").write_text("keep")
            raise DataError("no")

    with pytest.raises(DataError, match=r"^no$"):
        fail()
    assert files(tmp_path) == ["a/theirs.txt"]


def test_an_earlier_run_is_replaced_only_when_told_and_only_at_the_end(tmp_path: Path) -> None:
    place = tmp_path / "out"
    earlier_run(place, "naive", "tan")
    with pytest.raises(SettingError) as refused:
        write(place)
    assert str(refused.value) == (
        f"the folder {place} exists already; give another one with -o, or --overwrite to replace it"
    )

    def fail() -> None:
        with new_folder(str(place), True):
            raise DataError("no")

    with pytest.raises(DataError, match=r"^no$"):
        fail()
    assert files(place) == ["comparison.json", "naive.json", "report.html", "tan.json"]
    write(place, overwrite=True)
    assert files(tmp_path) == ["out/comparison.json"]
    assert (place / "comparison.json").read_text() == "new"


def test_an_empty_folder_may_be_filled(tmp_path: Path) -> None:
    (tmp_path / "out").mkdir()
    write(tmp_path / "out")
    assert files(tmp_path) == ["out/comparison.json"]


@pytest.mark.parametrize("stranger", ["notes.txt", "chosen.json", ".hidden"])
def test_a_folder_with_anything_else_in_it_is_left_alone(tmp_path: Path, stranger: str) -> None:
    place = tmp_path / "out"
    earlier_run(place, "naive")
    (place / stranger).write_text("keep")
    with pytest.raises(SettingError) as refused:
        write(place, overwrite=True)
    assert str(refused.value) == (
        f"the folder {place} holds {stranger}, which no run of bnx learn wrote, so it is left alone; "
        "give another folder with -o"
    )
    assert (place / stranger).read_text() == "keep"
    assert files(tmp_path) == sorted(["out/comparison.json", "out/naive.json", "out/report.html", f"out/{stranger}"])


@pytest.mark.parametrize("text", ["not json", "[]", "{}", '{"format": "other/1", "structures": []}'])
def test_a_comparison_of_another_program_protects_its_folder(tmp_path: Path, text: str) -> None:
    (tmp_path / "out").mkdir()
    (tmp_path / "out" / "comparison.json").write_text(text)
    with pytest.raises(SettingError, match=r"holds comparison\.json, which no run of bnx learn wrote"):
        write(tmp_path / "out", overwrite=True)
    assert (tmp_path / "out" / "comparison.json").read_text() == text


def test_a_folder_that_appeared_meanwhile_is_not_replaced(tmp_path: Path) -> None:
    place = tmp_path / "out"

    def race() -> None:
        with new_folder(str(place), False):
            earlier_run(place, "naive")

    with pytest.raises(SettingError, match="exists already"):
        race()
    assert files(tmp_path) == ["out/comparison.json", "out/naive.json", "out/report.html"]


def test_the_earlier_run_comes_back_if_the_new_one_cannot_take_its_place(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    place = tmp_path / "out"
    earlier_run(place, "naive")
    rename = Path.rename

    def refuse_the_new(self: Path, target: Any) -> Path:
        if target == place and self.name != "old":
            raise OSError(errno.EACCES, "Permission denied")
        return rename(self, target)

    monkeypatch.setattr(Path, "rename", refuse_the_new)
    with pytest.raises(DataError) as refused:
        write(place, overwrite=True)
    assert str(refused.value) == f"cannot write {place} (Permission denied); choose another folder with -o"
    assert files(tmp_path) == ["out/comparison.json", "out/naive.json", "out/report.html"]


def test_a_full_disk_is_said_in_one_sentence(tmp_path: Path) -> None:
    def fill() -> None:
        with new_folder(str(tmp_path / "out"), False):
            raise OSError(errno.ENOSPC, "No space left on device")

    with pytest.raises(DataError) as refused:
        fill()
    assert str(refused.value) == (
        f"cannot write {tmp_path / 'out'} (No space left on device); choose another folder with -o"
    )
    assert list(tmp_path.iterdir()) == []


def test_places_that_are_no_folder(tmp_path: Path) -> None:
    (tmp_path / "file").write_text("keep")
    with pytest.raises(SettingError, match=r"file is a file, but -o takes a folder; give another name$"):
        write(tmp_path / "file", overwrite=True)
    with pytest.raises(DataError, match=r"^cannot write .*; choose another folder with -o$"):
        write(tmp_path / "file" / "out")
    with pytest.raises(SettingError, match=r"^-o is empty; give the name of a folder$"), new_folder("", False):
        pass
    assert files(tmp_path) == ["file"]


def test_a_link_to_a_folder_stays_a_link(tmp_path: Path) -> None:
    earlier_run(tmp_path / "real", "naive")
    (tmp_path / "out").symlink_to(tmp_path / "real")
    write(tmp_path / "out", overwrite=True)
    assert (tmp_path / "out").is_symlink()
    assert files(tmp_path / "real") == ["comparison.json"]


def test_a_run_can_be_repeated_over_itself_and_gives_the_same_bytes(tmp_path: Path) -> None:
    settings = ("--class", "grade", "-o", str(tmp_path / "out"), "--structures", "naive,tan", *FAST)
    assert call("learn", small_table(), *settings, "--predictions", "--all-pairs").code == 0
    before = {path.name: path.read_bytes() for path in (tmp_path / "out").iterdir()}
    assert call("learn", small_table(), *settings, "--overwrite").code == 0
    after = {path.name: path.read_bytes() for path in (tmp_path / "out").iterdir()}
    assert set(before) - set(after) == {"predictions.parquet", "pairs.parquet"}
    assert after == {name: before[name] for name in after}


def test_without_a_drawing_engine_only_pictures_are_missing(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setenv("BNX_DOT", "no-such-program")
    drawn, notes = draw_all({"naive": (Path(small_results()) / "naive.dot").read_text()}, 1)
    assert drawn == {}
    assert notes == [
        "no picture was drawn, only .dot files were written: the environment variable BNX_DOT is 'no-such-program', "
        "which is no program; give the path of dot"
    ]
    run = call("learn", small_table(), "--class", "grade", "-o", str(tmp_path / "out"), "--structures", "naive", *FAST)
    assert (run.code, run.err) == (0, f"note: {notes[0]}\n")
    assert files(tmp_path / "out") == ["comparison.json", "naive.dot", "naive.json", "pairs.csv", "report.html"]


def test_json_text_reads_back_and_has_a_line_per_key() -> None:
    document = {"format": "x/1", "deep": {"a": [1, 2.5, None, "ü\n"]}, "flag": True}
    assert json.loads(json_text(document)) == document
    assert len(json_text(document).splitlines()) == 2 + len(document)


def test_a_file_is_written_whole_or_not_at_all(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    place = tmp_path / "f.csv"
    write_bytes(str(place), b"one", False)
    with pytest.raises(SettingError) as refused:
        write_bytes(str(place), b"two", False)
    assert str(refused.value) == (
        f"the file {place} exists already; give another one with -o, or --overwrite to replace it"
    )

    def refuse(self: Path, target: Any) -> Path:
        raise OSError(errno.ENOSPC, "No space left on device")

    with monkeypatch.context() as patch:
        patch.setattr(Path, "replace", refuse)
        with pytest.raises(DataError) as full:
            write_bytes(str(place), b"two", True)
    assert str(full.value) == f"cannot write {place} (No space left on device); choose another place with -o"
    assert (files(tmp_path), place.read_bytes()) == (["f.csv"], b"one")
    write_bytes(str(place), b"two", True)
    assert (files(tmp_path), place.read_bytes()) == (["f.csv"], b"two")
    with pytest.raises(SettingError, match=r"is a folder, but a file is to be written; add a file name$"):
        write_bytes(str(tmp_path), b"", True)
    with pytest.raises(DataError, match=r"^cannot write .*: there is no folder .*; make it, or give another -o$"):
        write_bytes(str(tmp_path / "none" / "f.csv"), b"", True)
