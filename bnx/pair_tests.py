"""Tests of chosen pairs, given the class and further attributes, on all rows of a table."""

import textwrap
from collections.abc import Sequence
from dataclasses import dataclass
from itertools import combinations
from typing import Any

import numpy as np

from bnx.coding import Coded
from bnx.contingency import table_statistics
from bnx.engines import LocalEngine, start_local
from bnx.errors import DataError, SettingError
from bnx.families import for_each_family
from bnx.independence import Statistics
from bnx.reading import Source
from bnx.recipe import Recipe
from bnx.refining import REPORTED, refined
from bnx.tables import LeftOut
from bnx.text import aligned, count_of, fixed
from bnx.trainings import Training, make_trainings
from bnx.verdicts import TestResult, judge, results

__all__ = ["PairTests", "run_pair_tests"]

_ORDER = ("dependent", "detected, but negligible", "negligible", "not enough data")


@dataclass(frozen=True)
class PairTests:
    """Tested pairs, most bits first, all given the class and ``given``.

    ``strata``, ``informative``, ``rows``: per test, how many strata hold a record, how many carry something, records.
    """

    target: str
    given: tuple[str, ...]
    results: tuple[TestResult, ...]
    strata: tuple[int, ...]
    informative: tuple[int, ...]
    rows: int
    recipe: Recipe
    left_out: tuple[LeftOut, ...]
    warnings: tuple[str, ...]

    def to_dict(self) -> dict[str, Any]:
        """Give the tests as plain values."""
        return {
            "class": self.target,
            "tests": [
                {
                    "a": result.a,
                    "b": result.b,
                    "given": list(self.given),
                    "strata": strata,
                    "strata_informative": informative,
                    "rows": self.rows,
                    **result.to_dict(),
                }
                for result, strata, informative in zip(self.results, self.strata, self.informative, strict=True)
            ],
        }

    def __str__(self) -> str:
        """Lay the tests out by verdict, as a table that fits 100 columns if the names are not very long."""
        statistic = "G" if self.recipe.test == "g" else "X2"
        header = ("", "bits", statistic, "df", "p", "adjusted", "detectable", "method")
        rows: list[tuple[str, ...]] = []
        for verdict in _ORDER:
            rows += _rows(verdict, [result for result in self.results if result.verdict == verdict], len(header))
        conditions = ", ".join((self.target, *self.given))
        head = f"{count_of(self.rows, 'row')}; bits, {statistic} and p given {conditions}"
        at = next((one.detectable_at for one in self.results if not np.isnan(one.detectable_at)), None)
        level = "" if at is None else f"; detectable: with power .80 at p <= {at:.2g}, or more where method is no tail"
        notes = f"bits are as counted, verdicts judge them less what chance alone would show{level}"
        return "\n".join([head, "", aligned(header, rows), "", textwrap.fill(notes, 100), self._strata()])

    def _strata(self) -> str:
        low, high = min(self.informative), max(self.informative)
        span = f"{low:,}" if low == high else f"{low:,} to {high:,}"
        return f"{span} of {count_of(max(self.strata), 'stratum', 'strata')} can show a dependence"


def _rows(verdict: str, results: Sequence[TestResult], columns: int) -> list[tuple[str, ...]]:
    """Lay out the pairs of one verdict under it."""
    if not results:
        return []
    return [
        (verdict, *[""] * (columns - 1)),
        *(
            (
                f"  {result.a} ~ {result.b}",
                fixed(result.bits, 4),
                fixed(_number(result.statistic), 2),
                str(result.df),
                _p(result.p_value),
                _p(result.adjusted_p),
                fixed(_number(result.detectable_bits), 4),
                result.method,
            )
            for result in results
        ),
    ]


def _number(value: float) -> float | None:
    return None if np.isnan(value) else value


def _p(value: float) -> str:
    return "" if np.isnan(value) else f"{value:.2g}"


def run_pair_tests(
    source: Source, recipe: Recipe, attributes: Sequence[str], given: Sequence[str], everything: bool, jobs: int
) -> PairTests:
    """Test all pairs of the named attributes (of all attributes with ``everything``) as one family.

    Numeric columns are cut as ``recipe.bins`` says; ``auto`` means frequency:5 here, as nothing is chosen out of fold.

    Raises:
        DataError, SettingError: the table or a setting cannot be used.
    """
    _check_names(attributes, given, everything)
    source.check([*attributes, *given])
    coded = recipe.code(source)
    schema = coded.table.schema
    others = [_index(coded, name) for name in given]
    chosen = [_index(coded, name) for name in (attributes or [n for n in schema.names if n not in given])]
    if len(chosen) < 2:
        raise DataError(
            f"{source.name} has only {count_of(len(chosen), 'attribute')} to test beside the class and --given, "
            "but a pair needs two; give a table with more, or fewer --given"
        )
    engine = start_local(coded.table, np.zeros(len(coded.table.target), np.int64), 1, jobs, lambda *_: None)
    bins = "frequency:5" if recipe.bins == "auto" else recipe.bins
    training = make_trainings(engine, schema, {(): np.ones(1, bool)}, bins, recipe.max_levels)[0]
    pairs = list(combinations(chosen, 2))
    table, marginal = _statistics(engine, training, pairs, others)
    requests = [(0, (*others, a, b)) for a, b in pairs]
    tested = refined(engine, [training], requests, table, recipe.test, REPORTED)
    judged = judge(table, tested, adjust=recipe.adjust, alpha=recipe.alpha, negligible=recipe.negligible)
    found = results([(schema.names[a], schema.names[b]) for a, b in pairs], table, marginal, judged)
    order = np.argsort(-table.bits, kind="stable").tolist()
    return PairTests(
        recipe.target,
        tuple(given),
        tuple(found[k] for k in order),
        tuple(int(table.strata[k]) for k in order),
        tuple(int(table.informative[k]) for k in order),
        len(coded.table.target),
        recipe,
        coded.left_out,
        coded.warnings,
    )


def _check_names(attributes: Sequence[str], given: Sequence[str], everything: bool) -> None:
    if everything and attributes:
        raise SettingError(f"--all tests every pair, but {attributes[0]} is named too; give the names or --all")
    if not everything and len(attributes) < 2:
        named = "no attribute is" if not attributes else f"only {attributes[0]} is"
        raise SettingError(f"{named} named, but a pair needs two; name at least two, or give --all")
    for names in (attributes, given):
        twice = [name for place, name in enumerate(names) if name in names[:place]]
        if twice:
            raise SettingError(f"{twice[0]!r} is named twice; name each attribute once")
    both = [name for name in given if name in attributes]
    if both:
        raise SettingError(f"{both[0]!r} is to be tested and also --given; it can be only one of them")


def _index(coded: Coded, name: str) -> int:
    """Find an attribute that takes part.

    Raises:
        DataError: it is the class, or was left out; saying why.
    """
    schema = coded.table.schema
    if name == schema.target.name:
        raise DataError(f"{name!r} is the class, which is taken as given in every test; leave it out")
    reasons = [one.reason for one in coded.left_out if one.name == name]
    if reasons:
        raise DataError(f"{name!r} is left out of the table: {reasons[0]}")
    return schema.index(name)


def _statistics(
    engine: LocalEngine, training: Training, pairs: Sequence[tuple[int, int]], given: Sequence[int]
) -> tuple[Statistics, Statistics]:
    """Compute the statistics of each pair given the class and ``given``, and given nothing at all."""

    def use(counts: np.ndarray, sizes: tuple[int, ...]) -> np.ndarray:
        strata = counts.reshape(-1, sizes[-2] * sizes[-1])
        shape = (np.zeros(1, np.int64), np.array([sizes[-2]]), np.array([sizes[-1]]))
        whole = strata.sum(axis=0, dtype=np.int32)[None]
        return np.concatenate([table_statistics(strata, *shape), table_statistics(whole, *shape)])

    requests = [(0, (*given, a, b)) for a, b in pairs]
    found = for_each_family(engine, [training], requests, use)
    both = np.array([found[request] for request in requests])
    return Statistics.of(both[:, 0]), Statistics.of(both[:, 1])
