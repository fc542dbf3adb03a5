"""bnx test: conditional independence of chosen pairs."""

import json
from collections.abc import Sequence
from pathlib import Path
from typing import Annotated

import typer

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
    Theme,
    Timings,
    Weight,
    check_spared,
    colours,
    listed,
    recipe_of,
    say,
    store_of,
    threads,
)
from bnx.cli.timings import Clock
from bnx.errors import SettingError
from bnx.files import check_free, write_bytes
from bnx.level_order import parse_ordered
from bnx.pair_table import CLOSE, Asked
from bnx.pair_tests import PairTests, run_pair_tests
from bnx.plain import finite
from bnx.reading import Source, open_source
from bnx.recipe import Recipe
from bnx.tested_text import written
from bnx.verdicts import pairs_csv

__all__ = ["run"]


def run(
    ctx: typer.Context,
    data: Data,
    target: ClassColumn,
    attributes: Annotated[list[str] | None, typer.Argument(metavar="A B", help="Test all pairs of these.")] = None,
    given: Annotated[
        list[str] | None, typer.Option(metavar="Z,...", help="Attributes to take as given, besides the class.")
    ] = None,
    every: Annotated[
        bool, typer.Option("--all", help="Test every pair of attributes; look closely at those rejected.")
    ] = False,
    explain: Annotated[
        bool, typer.Option("--explain", help="Try every other attribute as given too: which makes the rest vanish?")
    ] = False,
    ordered: Annotated[
        list[str] | None,
        typer.Option(
            metavar="COL",
            help="Levels have an order: COL if they are numbers, else 'COL=low<middle<high'; repeat for more.",
        ),
    ] = None,
    strata: Annotated[
        bool, typer.Option("--strata", help="Show every stratum: observed, expected, adjusted residual.")
    ] = False,
    close: Annotated[
        int | None,
        typer.Option(
            metavar="N", help="How many of the rejected pairs --all looks at closely.", show_default=str(CLOSE)
        ),
    ] = None,
    plot: Annotated[
        str | None, typer.Option("--plot", metavar="FILE", help="Picture of the residuals: .svg, .png or .pdf.")
    ] = None,
    output: Annotated[
        str | None,
        typer.Option("-o", "--output", metavar="FILE.csv", help="Write the table of pairs as a CSV file too."),
    ] = None,
    theme: Theme = None,
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
    weight: Weight = Recipe.weight,
    seed: Seed = Recipe.seed,
    jobs: Jobs = 0,
    spill: SpillFolder = None,
    overwrite: Overwrite = False,
    json_out: JsonOut = False,
    quiet: Quiet = False,
    timings: Timings = False,
) -> None:
    """Test pairs of attributes for independence given the class.

    "Not enough data" is not "independent": see the column of what this sample could have detected.
    """
    number = threads(jobs)
    source = open_source(data)
    _check_outputs(source, output, plot, theme, overwrite)
    if plot and close == 0:
        raise SettingError("--plot draws what is looked at closely, and --close 0 leaves none; drop one of them")
    names = source.columns
    orders = parse_ordered([one for value in ordered or () for one in _orders(value, names)], names)
    asked = Asked(tuple(attributes or ()), listed("given", given, names), every, orders, explain, close)
    with told(quiet) as news:
        clock = Clock(news)
        found = run_pair_tests(source, recipe_of(ctx, source), asked, number, clock.tell, store_of(spill))
    clock.tell("writing")
    if json_out:
        typer.echo(json.dumps(finite(found.to_dict(strata)), ensure_ascii=False, allow_nan=False, indent=1))
    else:
        typer.echo(written(found, strata))
    done = []
    if output:
        write_bytes(output, _csv(found).encode(), overwrite)
        done.append(f"{output} written")
    if plot and found.details:
        from bnx.tested_picture import draw_tests  # noqa: PLC0415  loads matplotlib, which takes longer than most tests

        draw_tests(found, plot, colours(theme, Path(plot).suffix.lower()), overwrite)
        done.append(f"{plot} written")
    elif plot:
        done.append(f"no pair was rejected, so {plot} is not drawn; name two attributes to draw them")
    for note in found.warnings:
        say(f"note: {note}", quiet)
    for line in done:
        say(line, quiet)
    if timings:
        typer.echo(clock, err=True)


def _check_outputs(source: Source, output: str | None, plot: str | None, theme: str | None, overwrite: bool) -> None:
    """Refuse files that cannot be written, before anything is computed.

    Raises:
        SettingError, DataError: a file is taken, or its ending or folder is of no use.
    """
    if output is not None:
        check_free(output, overwrite)
        check_spared(output, source)
        if Path(output).suffix.lower() != ".csv":
            raise SettingError(f"-o {output}: the tests are written as CSV; give a name that ends in .csv")
    if theme and plot is None:
        raise SettingError(f"--theme {theme} says how to draw, but no picture is asked for; give --plot, or drop it")
    if plot is not None:
        from bnx.tested_picture import check_picture  # noqa: PLC0415  as above

        colours(theme, Path(plot).suffix.lower())
        check_picture(Path(plot), overwrite)


def _orders(value: str, names: Sequence[str]) -> Sequence[str]:
    """Take an order of levels whole, since levels may hold commas; split what only names columns."""
    return (value,) if "<" in value else listed("ordered", [value], names)


def _csv(tests: PairTests) -> str:
    given = ", ".join((tests.target, *tests.asked.given))
    return pairs_csv(({**result.to_dict(), "given": given} for result in tests.results), "given")
