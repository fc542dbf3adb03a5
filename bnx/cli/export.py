"""bnx export: hand over one structure of a results folder."""

from pathlib import Path
from typing import Annotated

import typer

from bnx.cli.shared import Overwrite, opened, opened_mix, say
from bnx.documents import dot_of
from bnx.errors import DataError, SettingError
from bnx.files import check_free, write_bytes
from bnx.results import json_text
from bnx.text import nearest

__all__ = ["run"]

FORMS = ("json", "dot")


def run(
    folder: Annotated[str, typer.Argument(metavar="DIR", help="A results folder of bnx learn.")],
    structure: Annotated[str, typer.Option(metavar="NAME", help="The structure to hand over.")],
    output: Annotated[str, typer.Option("-o", "--output", metavar="FILE", help="The file to write.")],
    to: Annotated[str, typer.Option(metavar="|".join(FORMS), help="Form of the file.")] = "json",
    overwrite: Overwrite = False,
) -> None:
    """Hand over one structure as one self-contained file, with its tables and the evidence that chose it."""
    _check_form(to, output)
    check_free(output, overwrite)
    path = str(_file_of(structure, folder))
    mix = opened_mix(path)
    if mix and to == "dot":
        raise SettingError("a mix has no edges of its own to draw; export its members, or give --to json")
    document, _ = mix or opened(path)
    write_bytes(output, (json_text(document) if to == "json" else dot_of(document)).encode(), overwrite)
    say(f"{output} written")


def _check_form(to: str, output: str) -> None:
    """Refuse a form that is unknown, and a file name that promises another one."""
    if to not in FORMS:
        raise SettingError(f"--to: {to!r} cannot be used; give {' or '.join(FORMS)}")
    ending = Path(output).suffix.lower().removeprefix(".")
    if ending in FORMS and ending != to:
        raise SettingError(f"-o {output} ends in .{ending}, but --to is {to}; give --to {ending} or another ending")


def _file_of(structure: str, folder: str) -> Path:
    """Find the file of a structure in a results folder."""
    place = Path(folder)
    if not (place / "comparison.json").is_file():
        raise DataError(f"{folder} holds no comparison.json; give the folder that bnx learn -o wrote")
    names = sorted(path.stem for path in place.glob("*.json") if path.stem != "comparison")
    if structure not in names:
        raise DataError(f"{folder} holds no structure {structure!r}; {nearest(structure, names)}")
    return place / f"{structure}.json"
