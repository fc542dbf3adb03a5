"""Tests of chosen pairs, given the class and further attributes, on all rows of a table."""

from collections.abc import Mapping, Sequence
from dataclasses import asdict, dataclass, replace
from itertools import combinations
from typing import Any

import numpy as np

from bnx.class_tables import measure_double_counting
from bnx.engines.local import Progress
from bnx.explaining import Explanation, explanations
from bnx.families import family_statistics, for_each_family
from bnx.independence import Statistics
from bnx.kernels.contingency import one_table
from bnx.pair_details import Pair, PairDetail, compare_classes, look_closely
from bnx.pair_judging import JudgedPairs, judge_pairs
from bnx.pair_table import CLOSE, Asked, PairTable, bins_of
from bnx.reading import Source
from bnx.recipe import Recipe
from bnx.refining import visit_families, with_chance
from bnx.storing import MEMORY, Store
from bnx.tables import LeftOut
from bnx.text import count_of, quoted
from bnx.verdicts import TestResult

__all__ = ["PairTests", "run_pair_tests"]

_SETTINGS = (
    *("test", "adjust", "alpha", "negligible", "seed", "bins", "numeric", "categorical", "ignore", "keep", "missing"),
    *("max_levels", "weight"),
)


@dataclass(frozen=True)
class PairTests:
    """Tested pairs, most bits first, all given the class and ``asked.given``.

    ``details``: of pairs looked at closely, by (a, b): those named, or with --all the first of those rejected;
    ``explained``: of those among them that are rejected, if asked for; ``given_class``: bits less chance given the
    class alone, if more is given.
    """

    target: str
    asked: Asked
    results: tuple[TestResult, ...]
    details: Mapping[tuple[str, str], PairDetail]
    explained: Mapping[tuple[str, str], tuple[Explanation, ...]]
    given_class: Mapping[tuple[str, str], float]
    rows: int
    recipe: Recipe
    left_out: tuple[LeftOut, ...]
    warnings: tuple[str, ...]

    def to_dict(self, with_strata: bool = False) -> dict[str, Any]:
        """Give the tests as plain values; NaN where there is nothing to say."""
        return {
            "class": self.target,
            "given": list(self.asked.given),
            "rows": self.rows,
            "ordered": {name: list(levels) for name, levels in self.asked.ordered.items()},
            "settings": {name: value for name, value in self.recipe.to_dict().items() if name in _SETTINGS},
            "tests": [self._entry(result, with_strata) for result in self.results],
            "left_out": [asdict(one) for one in self.left_out],
            "notes": list(self.warnings),
        }

    def _entry(self, result: TestResult, with_strata: bool) -> dict[str, Any]:
        ends = (result.a, result.b)
        entry: dict[str, Any] = dict(result.to_dict())
        if ends in self.details:
            entry |= self.details[ends].to_dict(with_strata)
        if ends in self.given_class:
            entry["bits_given_class_corrected"] = self.given_class[ends]
        if ends in self.explained:
            entry["explained_by"] = [one.to_dict() for one in self.explained[ends]]
        return entry


def run_pair_tests(
    source: Source,
    recipe: Recipe,
    asked: Asked,
    jobs: int,
    progress: Progress = lambda *_: None,
    store: Store = MEMORY,
) -> PairTests:
    """Test pairs as one family, and look closely at those named, or with ``everything`` at those rejected.

    Numeric columns are cut as ``recipe.bins`` says; ``auto`` means frequency:5 here, as nothing is chosen out of fold.
    progress: called with (stage, done, of how many) while it runs; store: keeps what has a value per row.

    Raises:
        DataError, SettingError: the table or a setting cannot be used.
    """
    progress("reading", 0, 0)
    source.check([*asked.attributes, *asked.given, *asked.ordered])
    coded = recipe.code(source, jobs, store, only_counts=True)
    progress("sorting rows", 0, 0)
    table = PairTable.of(coded, recipe, asked, jobs, progress, store)
    progress("judging pairs", 0, 0)
    pairs = list(combinations(table.chosen, 2))
    requests = [(0, (*table.given, a, b)) for a, b in pairs]
    visit = visit_families(table.engine, [table.training], requests)
    domains = table.training.view.domains
    ends = [(domains[a], domains[b]) for a, b in pairs]
    judged = judge_pairs(visit, *_statistics(table, requests), ends, recipe)
    names = [(table.names[a], table.names[b]) for a, b in pairs]
    order = np.argsort(-judged.statistics.bits_corrected, kind="stable")
    twice = measure_double_counting(table.engine, table.training, *np.array(pairs, np.int64)[order].T)
    rejected = order[judged.judgement.rejected[order]]
    close = rejected[: CLOSE if asked.close is None else asked.close] if asked.everything else order
    return PairTests(
        recipe.target,
        asked,
        tuple(judged.results([names[k] for k in order], order, twice)),
        _details(table, [pairs[k] for k in close], recipe),
        _explained(table, [pairs[k] for k in close if judged.judgement.rejected[k]], recipe) if asked.explain else {},
        dict(zip(names, _given_class(table, pairs), strict=True)) if asked.given else {},
        len(coded.table.target),
        replace(recipe, bins=bins_of(recipe)),
        coded.left_out,
        (*coded.warnings, *judged.notes, *_notes(table, judged, len(close), len(rejected))),
    )


def _statistics(table: PairTable, requests: Sequence[tuple[int, tuple[int, ...]]]) -> tuple[Statistics, Statistics]:
    """Compute the statistics of each pair given the class and more, and given nothing at all."""

    def use(counts: np.ndarray, sizes: tuple[int, ...]) -> np.ndarray:
        strata = counts.reshape(-1, sizes[-2] * sizes[-1])
        whole = strata.sum(axis=0, dtype=np.int32)[None]
        return np.array([one_table(table, sizes[-2], sizes[-1]) for table in (strata, whole)])

    found = for_each_family(table.engine, [table.training], requests, use)
    both = np.array([found[request] for request in requests])
    return Statistics.of(both[:, 0]), Statistics.of(both[:, 1])


def _given_class(table: PairTable, pairs: Sequence[tuple[int, int]]) -> list[float]:
    """Measure pairs given the class alone: bits less what chance alone would show."""
    requests = [(0, pair) for pair in pairs]
    rows = family_statistics(table.engine, [table.training], requests)
    stats = Statistics.of(np.array([rows[request] for request in requests]))
    found: list[float] = with_chance(
        visit_families(table.engine, [table.training], requests), stats
    ).bits_corrected.tolist()
    return found


def _details(table: PairTable, pairs: Sequence[tuple[int, int]], recipe: Recipe) -> dict[tuple[str, str], PairDetail]:
    """Look closely at some pairs."""
    domains = table.training.view.domains
    given = (table.coded.table.schema.target, *(domains[number] for number in table.given))

    def look(ends: tuple[int, int]) -> PairDetail:
        a, b = ends
        counts = table.engine.training_counts((*table.given, a, b), table.training.view, table.training.mask)
        counts = counts.reshape(-1, len(domains[a]), len(domains[b]))
        used = np.flatnonzero(counts.any(axis=(1, 2)))
        pair, placed = Pair(domains[a], domains[b], given, table.scores[a], table.scores[b]).in_order(counts[used])
        return look_closely(pair, placed, used, recipe.test, recipe.alpha, recipe.seed)

    details = compare_classes(table.engine.map(look, pairs, "looking closely"), recipe.adjust, recipe.alpha)
    return {(table.names[a], table.names[b]): detail for (a, b), detail in zip(pairs, details, strict=True)}


def _explained(
    table: PairTable, pairs: Sequence[tuple[int, int]], recipe: Recipe
) -> dict[tuple[str, str], tuple[Explanation, ...]]:
    """Try every other attribute as given too."""
    found = {}
    for a, b in pairs:
        others = [number for number in range(len(table.names)) if number not in (a, b, *table.given)]
        if not others:
            continue
        requests = [(0, (*table.given, other, a, b)) for other in others]
        rows = family_statistics(table.engine, [table.training], requests)
        found[table.names[a], table.names[b]] = explanations(
            [table.names[other] for other in others],
            Statistics.of(np.array([rows[request] for request in requests])),
            visit_families(table.engine, [table.training], requests),
            recipe.test,
            recipe.alpha,
            recipe.negligible,
            recipe.seed,
        )
    return found


def _notes(table: PairTable, judged: JudgedPairs, close: int, rejected: int) -> list[str]:
    """Say what a reader of the tests must know."""
    notes = []
    untested = int(np.isnan(judged.judgement.p).sum())
    if untested:
        notes.append(
            f"{count_of(untested, 'pair')} left out in advance (method none): margins like theirs allow no p below "
            "alpha over the number of pairs that could be rejected; alone or in a smaller family they might be"
        )
    flat = [table.names[number] for number in table.chosen if table.without_cuts(number)]
    if flat:
        notes.append(f"no cut point was found in {quoted(flat)}, so there is nothing to test; give other --bins")
    asked = table.asked
    if asked.everything and close < rejected:
        notes.append(
            f"{close:,} of {count_of(rejected, 'rejected pair')} looked at closely, those with most bits; name others, "
            "or raise --close"
        )
    if asked.ordered:
        notes.append("trends over ordered levels stand beside the verdicts, take no part in them, and are not adjusted")
    if asked.explain and not rejected:
        notes.append("--explain: no pair is rejected, so there is nothing to explain")
    return notes
