"""What the README shows is what the commands print."""

import re
import shlex
from pathlib import Path

import pytest
from commandline import call

README = (Path(__file__).parents[1] / "README.md").read_text(encoding="utf-8")
ROOT = Path(__file__).parents[1]


def session(name: str) -> tuple[str, str]:
    """The first shown call of a command, and the screen below it."""
    found = re.search(rf"```console\n\$ bnx ({name} .*)\n((?:.*\n)*?)```", README)
    assert found is not None
    return found[1], found[2]


@pytest.mark.parametrize(
    ("name", "picture"), [("learn", "results/kdb2-tested.svg"), ("test", "residuals.svg")], ids=["learn", "test"]
)
def test_the_session_is_real(name: str, picture: str, tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    command, screen = session(name)
    monkeypatch.chdir(tmp_path)
    (tmp_path / "datasets").symlink_to(ROOT / "datasets")
    found = call(*shlex.split(command))
    assert found.code == 0
    assert found.out.rstrip() == screen.rstrip()
    shown = ROOT / "docs" / "pictures" / Path(picture).name
    assert (tmp_path / picture).read_text(encoding="utf-8") == shown.read_text(encoding="utf-8")


def test_every_command_named_is_one() -> None:
    named = set(re.findall(r"^\$ bnx (\w+)", README, re.MULTILINE))
    assert named == {"learn", "test", "show", "draw", "export", "classify", "profile"}


def test_every_file_named_exists() -> None:
    for name in re.findall(r"`((?:docs|datasets)/[\w./-]+)`", README):
        assert (ROOT / name).exists(), name


def test_the_two_commands_are_one_line_each() -> None:
    lines = [line for line in README.splitlines() if line.startswith("python3 -m venv")]
    assert [line.rpartition("&& ")[2].split()[0] for line in lines] == [".venv/bin/bnx", ".venv/bin/pytest"]
