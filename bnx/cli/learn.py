"""bnx learn: the main job."""

import json
from typing import Annotated

import typer

from bnx.cli.ahead import compiling_ahead
from bnx.cli.progress import told
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
    Overwrite,
    Quiet,
    Seed,
    SpillFolder,
    Test,
    Timings,
    Weight,
    named,
    recipe_of,
    say,
    store_of,
    threads,
)
from bnx.cli.summary import summary
from bnx.cli.timings import Clock
from bnx.comparison import compare
from bnx.errors import SettingError
from bnx.reading import open_source
from bnx.recipe import DEFAULT_STRUCTURES, Recipe
from bnx.results import new_folder, write_results
from bnx.text import count_of

__all__ = ["MOST_NOTES", "run"]

MOST_NOTES = 20
"""Notes that are written to standard error; a table with thousands of columns may give cause for thousands."""


def run(
    ctx: typer.Context,
    data: Data,
    target: ClassColumn,
    output: Annotated[str, typer.Option("-o", "--output", metavar="DIR", help="Folder for the results.")],
    structures: Annotated[
        list[str] | None,
        typer.Option(
            metavar="NAME,...",
            help="Structures to compare: naive, tan, tan-tested, kdbK, kdbK-tested, kdb, kdb-trimmed, heldout.",
            show_default=",".join(DEFAULT_STRUCTURES),
        ),
    ] = None,
    baseline: Annotated[
        str, typer.Option(metavar="NAME", help="The structure that the others are compared with.")
    ] = Recipe.baseline,
    test: Test = Recipe.test,
    adjust: Adjust = Recipe.adjust,
    alpha: Alpha = Recipe.alpha,
    negligible: Negligible = Recipe.negligible,
    folds: Annotated[
        int | None,
        typer.Option(metavar="N", help="Folds of the cross-validation.", show_default=str(Recipe.folds)),
    ] = None,
    repeats: Annotated[int, typer.Option(metavar="N", help="Repeats of the cross-validation.")] = Recipe.repeats,
    group: Annotated[
        str, typer.Option(metavar="COL", callback=named, help="Rows of one group stay in one fold.", show_default=False)
    ] = Recipe.group,
    fold_column: Annotated[
        str,
        typer.Option(
            metavar="COL", callback=named, help="A column that holds the folds (sites, months).", show_default=False
        ),
    ] = Recipe.fold_column,
    holdout: Annotated[
        str | None, typer.Option(metavar="FILE", help="A further table that takes no part and is scored at the end.")
    ] = None,
    weight: Weight = Recipe.weight,
    seed: Seed = Recipe.seed,
    bins: Bins = Recipe.bins,
    numeric: Numeric = None,
    categorical: Categorical = None,
    ignore: Ignore = None,
    keep: Keep = None,
    missing: Missing = Recipe.missing,
    max_levels: MaxLevels = Recipe.max_levels,
    smoothing: Annotated[
        str, typer.Option(metavar="RULE", help="Smoothing of the tables: auto, laplace:A, backoff:S or S,D.")
    ] = Recipe.smoothing,
    temperature: Annotated[
        bool, typer.Option("--temperature/--no-temperature", help="Calibrate temperature, class offsets and floor.")
    ] = Recipe.temperature,
    mix: Annotated[
        bool, typer.Option("--mix/--no-mix", help="Also try a weighted mix of the structures.")
    ] = Recipe.mix,
    require: Annotated[
        list[str] | None,
        typer.Option(metavar="PARENT:CHILD", help="An edge that every structure but naive must have."),
    ] = None,
    forbid: Annotated[
        list[str] | None, typer.Option(metavar="A:B", help="Two attributes that no edge may join.")
    ] = None,
    resamples: Annotated[
        int, typer.Option(metavar="N", help="Random halves for the stability of edges; 0 for none.")
    ] = Recipe.resamples,
    records: Annotated[
        int, typer.Option(metavar="N", help="Records told of, on which naive is farthest off the rest; 0 for none.")
    ] = Recipe.records,
    yardstick: Annotated[
        bool,
        typer.Option("--yardstick", help="Also fit logistic regression and gradient boosting, for comparison only."),
    ] = Recipe.yardstick,
    learning_curve: Annotated[
        bool, typer.Option("--learning-curve", help="Also learn from shares of the rows: would more rows help?")
    ] = Recipe.learning_curve,
    predictions: Annotated[bool, typer.Option("--predictions", help="Also write out-of-fold probabilities.")] = False,
    all_pairs: Annotated[bool, typer.Option("--all-pairs", help="Also write every pair to pairs.parquet.")] = False,
    jobs: Jobs = 0,
    spill: SpillFolder = None,
    overwrite: Overwrite = False,
    json_out: JsonOut = False,
    quiet: Quiet = False,
    timings: Timings = False,
) -> None:
    """Learn, test, cross-validate and compare structures on a table, recommend one, and draw all.

    Options that take COL,... or NAME,... can also be given several times; a name that holds a comma is then taken
    whole. A dependence is not a cause, and a probability is not a decision.
    """
    if fold_column and folds is not None:
        raise SettingError(f"--folds {folds} cannot be used with --fold-column, whose folds are given; drop one")
    number = threads(jobs)
    with new_folder(output, overwrite) as folder, compiling_ahead(number) as ahead, told(quiet) as news:
        clock = Clock(news)
        clock.tell("reading")
        source = open_source(data)
        recipe = recipe_of(ctx, source)
        held_out = None if holdout is None else open_source(holdout)
        comparison = compare(
            source, recipe, number, clock.tell, held_out, store_of(spill), lambda note: say(f"note: {note}", quiet)
        )
        document, notes = write_results(comparison, folder, number, predictions, all_pairs, clock.tell)
        if ahead:
            clock.tell("compiling ahead")
    clock.tell("writing")
    text = json.dumps(document, ensure_ascii=False, allow_nan=False) if json_out else summary(document, output)
    typer.echo(text)
    told_of = [*notes, *comparison.warnings]
    for note in told_of[:MOST_NOTES]:
        say(f"note: {note}", quiet)
    if len(told_of) > MOST_NOTES:
        say(f"note: {count_of(len(told_of) - MOST_NOTES, 'more note')} in comparison.json", quiet)
    if timings:
        typer.echo(clock, err=True)
