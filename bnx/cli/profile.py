"""bnx profile: what is in a table."""

import json

import typer

from bnx.cli.shared import (
    Categorical,
    ClassColumn,
    Data,
    Ignore,
    JsonOut,
    Keep,
    MaxLevels,
    Missing,
    Numeric,
    SpillFolder,
    Weight,
    recipe_of,
    store_of,
    threads,
)
from bnx.profiling import profile
from bnx.reading import open_source
from bnx.recipe import Recipe

__all__ = ["run"]


def run(
    ctx: typer.Context,
    data: Data,
    target: ClassColumn,
    numeric: Numeric = None,
    categorical: Categorical = None,
    ignore: Ignore = None,
    keep: Keep = None,
    missing: Missing = Recipe.missing,
    max_levels: MaxLevels = Recipe.max_levels,
    weight: Weight = Recipe.weight,
    spill: SpillFolder = None,
    json_out: JsonOut = False,
) -> None:
    """Say what is in a table: types, levels, blanks, rare levels, duplicates, columns that give the class away."""
    source = open_source(data)
    coded = recipe_of(ctx, source).code(source, threads(0), store_of(spill), only_counts=True)
    found = profile(coded)
    typer.echo(json.dumps(found.to_dict(), ensure_ascii=False, allow_nan=False, indent=1) if json_out else str(found))
