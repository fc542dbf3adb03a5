"""What several commands share: common options, settings from options, and what goes to standard error."""

import os
from collections.abc import Collection, Sequence
from dataclasses import fields
from pathlib import Path
from typing import Annotated, Any, Literal

import typer

from bnx.classifier import Classifier
from bnx.errors import SettingError
from bnx.formats.evidence import check_evidence
from bnx.formats.mix_json import is_mix, members_of_mix, mixed_of
from bnx.formats.reading_json import read_json
from bnx.formats.structure_json import classifier_of, read_structure
from bnx.independence import TESTS
from bnx.mixed_classifier import MixedClassifier
from bnx.multiplicity import METHODS as ADJUSTMENTS
from bnx.reading import Source
from bnx.recipe import Recipe
from bnx.storing import MEMORY, Spill, Store
from bnx.text import printable

__all__ = [
    "Adjust",
    "Alpha",
    "Bins",
    "Categorical",
    "ClassColumn",
    "Data",
    "Ignore",
    "Jobs",
    "JsonOut",
    "Keep",
    "MaxLevels",
    "Missing",
    "Negligible",
    "Numeric",
    "Overwrite",
    "Quiet",
    "Seed",
    "SpillFolder",
    "StructureFile",
    "Test",
    "Theme",
    "Timings",
    "Weight",
    "check_spared",
    "colours",
    "listed",
    "opened",
    "opened_mix",
    "recipe_of",
    "say",
    "store_of",
    "threads",
]

Columns = list[str] | None

Data = Annotated[
    str,
    typer.Argument(
        metavar="DATA", help="CSV or TSV (also .gz, .zst), Parquet file or folder, Arrow file; - for standard input."
    ),
]
StructureFile = Annotated[
    str, typer.Argument(metavar="NAME.json", help="A structure file, or a mix, of bnx learn or bnx export.")
]


def named(ctx: typer.Context, param: typer.CallbackParam, value: str) -> str:
    """Refuse an empty name of a column, as an unset variable of a shell gives it.

    Raises:
        SettingError: the option was given, but names nothing.
    """
    source = ctx.get_parameter_source(param.name or "")
    if not value and source is not None and source.name == "COMMANDLINE":
        raise SettingError(f"{param.opts[0]} names no column; give the name of one, or drop the option")
    return value


ClassColumn = Annotated[str, typer.Option("--class", metavar="COL", help="The column to classify by.")]
Numeric = Annotated[Columns, typer.Option("--numeric", metavar="COL,...", help="Treat columns as numeric.")]
Categorical = Annotated[
    Columns, typer.Option("--categorical", metavar="COL,...", help="Treat columns of numbers as levels.")
]
Ignore = Annotated[Columns, typer.Option("--ignore", metavar="COL,...", help="Leave columns out.")]
Keep = Annotated[
    Columns,
    typer.Option("--keep", metavar="COL,...", help="Keep columns that would be left out; 'all' for every one."),
]
Missing = Annotated[
    str,
    typer.Option(
        "--missing",
        metavar="level|drop|sum-out",
        help="Blank cells: make them a level, drop their records, or sum them out as not observed.",
    ),
]
MaxLevels = Annotated[
    int, typer.Option("--max-levels", metavar="N", help="Levels kept per column; rarer ones are pooled.")
]
Bins = Annotated[
    str,
    typer.Option(
        "--bins",
        metavar="RULE",
        help="Cut points of numeric columns: auto, mdl, frequency:K, width:K or mdl+frequency:K.",
    ),
]
Test = Annotated[str, typer.Option("--test", metavar="|".join(TESTS), help="Test of independence.")]
Adjust = Annotated[str, typer.Option("--adjust", metavar="|".join(ADJUSTMENTS), help="Correction for many pairs.")]
Alpha = Annotated[float, typer.Option("--alpha", metavar="P", help="Level of the tests.")]
Negligible = Annotated[
    float, typer.Option("--negligible", metavar="BITS", help="Bits given the class that do not matter.")
]
Weight = Annotated[
    str,
    typer.Option(
        "--weight",
        metavar="COL",
        callback=named,
        help="A column that says how many records a row stands for; in bnx learn also weights that are no counts.",
        show_default=False,
    ),
]
Seed = Annotated[int, typer.Option("--seed", metavar="N", help="Seed of folds, halves and random tables.")]
Jobs = Annotated[
    int, typer.Option("--jobs", metavar="N", help="Threads; 0 for one per processor. Results do not depend on it.")
]
SpillFolder = Annotated[
    str | None,
    typer.Option(
        "--spill",
        metavar="DIR",
        help="Keep the rows on the disk of DIR, for tables larger than memory. Results do not depend on it.",
    ),
]
Quiet = Annotated[bool, typer.Option("--quiet", help="No progress and no notes on standard error.")]
Timings = Annotated[bool, typer.Option("--timings", help="Say on standard error how long each stage took.")]
JsonOut = Annotated[bool, typer.Option("--json", help="Print JSON instead of a table.")]
Theme = Annotated[
    str | None,
    typer.Option(
        "--theme",
        metavar="light|dark",
        help="Colours; not for .svg, which follows the reader's own setting.",
        show_default="light",
    ),
]
Overwrite = Annotated[bool, typer.Option("--overwrite", help="Replace what an earlier run wrote.")]


def check_spared(output: str, source: Source) -> None:
    """Refuse to write over the table itself, whatever --overwrite says.

    Raises:
        SettingError: the output is a file of the table.
    """
    if Path(output).resolve() in {path.resolve() for path in source.files}:
        raise SettingError(f"-o {output} is the table that is read; give another file")


def colours(theme: str | None, ending: str) -> Literal["light", "dark"]:
    """Take the colours of a picture.

    Raises:
        SettingError: there is no such theme, or the file follows its reader's.
    """
    if theme not in (None, "light", "dark"):
        raise SettingError(f"--theme: {theme!r} cannot be used; give light or dark")
    if theme and ending == ".svg":
        raise SettingError(
            f"--theme {theme} cannot be used for an .svg, which follows the reader's own setting; drop it"
        )
    return "dark" if theme == "dark" else "light"


def listed(option: str, values: Sequence[str] | None, known: Collection[str] = ()) -> tuple[str, ...]:
    """Split what may be given as several options, as a comma-separated list, or as both.

    A value that is a known name, or two of them joined by a colon, is taken whole whatever signs it holds.

    Raises:
        SettingError: a value names nothing.
    """
    found: list[str] = []
    for value in values or ():
        parts = [value] if _is_whole(value, known) else [part.strip() for part in value.split(",") if part.strip()]
        if not parts:
            raise SettingError(f"--{option}: {value!r} names nothing; give one or more names, or drop the option")
        found += parts
    return tuple(found)


def _is_whole(value: str, known: Collection[str]) -> bool:
    """Tell whether a value is a known name or a pair of them, so that its commas are no separators."""
    colons = [place for place, sign in enumerate(value) if sign == ":"]
    return value in known or any(value[:place] in known and value[place + 1 :] in known for place in colons)


def recipe_of(ctx: typer.Context, source: Source) -> Recipe:
    """Take the settings from the options of a command, which have the names of the fields.

    Raises:
        SettingError: a setting cannot be used.
    """
    settings: dict[str, Any] = {}
    for field in fields(Recipe):
        value = ctx.params.get(field.name)
        if isinstance(value, list | tuple):
            value = listed(field.name, value, source.columns) or None
        if value is not None:
            settings[field.name] = value
    return Recipe(**settings)


def opened(path: str) -> tuple[dict[str, Any], Classifier]:
    """Read a structure file and everything in it that a command may show.

    Raises:
        DataError, FormatError: there is no such file, or it is not what it claims to be.
    """
    document = read_structure(path)
    classifier = classifier_of(document, path)
    check_evidence(document, path)
    return document, classifier


def opened_mix(path: str) -> tuple[dict[str, Any], MixedClassifier] | None:
    """Read a mix file and everything in it that a command may show; None for a file that is no mix.

    Raises:
        DataError, FormatError: there is no such file, or it is not what it claims to be.
    """
    document = read_json(path)
    if not is_mix(document):
        return None
    classifier = mixed_of(document, path)
    for one, _ in members_of_mix(document, path):
        check_evidence(one, f"{path}, member {one['name']}")
    return document, classifier


def threads(jobs: int) -> int:
    """Turn the option into a number of threads.

    Raises:
        SettingError: the number is negative.
    """
    if jobs < 0:
        raise SettingError(f"--jobs: {jobs} cannot be used; give a number of threads, or 0 for one per processor")
    usable = len(os.sched_getaffinity(0)) if hasattr(os, "sched_getaffinity") else os.cpu_count()
    return jobs or usable or 1


def store_of(spill: str | None) -> Store:
    """Choose where what has a value per row is kept.

    Raises:
        DataError: nothing can be kept there.
    """
    return MEMORY if spill is None else Spill(spill)


def say(sentence: str, quiet: bool = False) -> None:
    """Write a note to standard error."""
    if not quiet:
        typer.echo(printable(sentence), err=True)
