"""bnx test: conditional independence of chosen pairs."""

import json
from typing import Annotated

import typer

from bnx.cli.shared import (
    Adjust,
    Alpha,
    Bins,
    Categorical,
    ClassColumn,
    Data,
    Ignore,
    Jobs,
    JsonOut,
    Keep,
    MaxLevels,
    Missing,
    Negligible,
    Numeric,
    Quiet,
    Test,
    listed,
    recipe_of,
    say,
    threads,
)
from bnx.pair_tests import run_pair_tests
from bnx.reading import open_source
from bnx.recipe import Recipe

__all__ = ["run"]


def run(
    ctx: typer.Context,
    data: Data,
    target: ClassColumn,
    attributes: Annotated[list[str] | None, typer.Argument(metavar="A B", help="Test all pairs of these.")] = None,
    given: Annotated[
        list[str] | None, typer.Option(metavar="Z,...", help="Attributes to take as given, besides the class.")
    ] = None,
    every: Annotated[bool, typer.Option("--all", help="Test every pair of attributes.")] = False,
    test: Test = Recipe.test,
    adjust: Adjust = Recipe.adjust,
    alpha: Alpha = Recipe.alpha,
    negligible: Negligible = Recipe.negligible,
    bins: Bins = "frequency:5",
    numeric: Numeric = None,
    categorical: Categorical = None,
    ignore: Ignore = None,
    keep: Keep = None,
    missing: Missing = Recipe.missing,
    max_levels: MaxLevels = Recipe.max_levels,
    jobs: Jobs = 0,
    json_out: JsonOut = False,
    quiet: Quiet = False,
) -> None:
    """Test pairs of attributes for independence given the class.

    "Not enough data" is not "independent": see the column of what this sample could have detected.
    """
    number = threads(jobs)
    source = open_source(data)
    conditions = listed("given", given, source.columns)
    found = run_pair_tests(source, recipe_of(ctx, source), attributes or (), conditions, every, number)
    typer.echo(json.dumps(found.to_dict(), ensure_ascii=False, allow_nan=False, indent=1) if json_out else str(found))
    for note in found.warnings:
        say(f"note: {note}", quiet)
