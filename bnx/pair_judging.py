"""Pairs judged twice, as one family each: given the class, and given nothing, so as to see what it explains."""

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

from bnx.domains import Domain
from bnx.independence import Statistics
from bnx.kernels.contingency import one_table
from bnx.recipe import Recipe
from bnx.refining import Visit, pooled, reported, visit_arrays, with_chance
from bnx.text import count_of, quoted
from bnx.verdicts import Judgement, TestResult, judge, outcomes, results

__all__ = ["JudgedPairs", "judge_pairs", "judged_pairs"]


@dataclass(frozen=True)
class JudgedPairs:
    """P judged pairs: statistics and what the tests say, given the class and without it, and ``outcome`` (P,), which
    indexes OUTCOMES; ``without_blanks`` (P,): bits of the records in which neither cell is blank, less what chance
    alone would show, of rejected pairs that have blank cells, else NaN. ``family``: how many pairs were tested as one
    family given the class, and ``rejected``: how many of them; more than are judged in very wide tables. ``notes``:
    what a reader must know.
    """

    statistics: Statistics
    judgement: Judgement
    marginal: Statistics
    without: Judgement
    outcome: np.ndarray
    without_blanks: np.ndarray
    family: int
    rejected: int
    notes: tuple[str, ...]

    def by_blanks(self, left: np.ndarray, right: np.ndarray) -> set[frozenset[int]]:
        """List rejected pairs of which less than half the bits is left where no cell is blank; left, right (P,)."""
        chosen = self.without_blanks < self.statistics.bits_corrected / 2
        return set(map(frozenset, zip(left[chosen].tolist(), right[chosen].tolist(), strict=True)))

    def results(
        self, names: Sequence[tuple[str, str]], order: np.ndarray, double_counted: np.ndarray
    ) -> list[TestResult]:
        """Write the pairs in this order; names, double_counted: of every pair written."""
        return results(
            names,
            self.statistics.take(order),
            self.judgement.take(order),
            self.marginal.take(order),
            self.without.take(order),
            self.outcome[order],
            self.without_blanks[order],
            double_counted,
        )


def judge_pairs(
    visit: Visit, statistics: Statistics, marginal: Statistics, pairs: Sequence[tuple[Domain, Domain]], recipe: Recipe
) -> JudgedPairs:
    """Test and judge P pairs as the recipe says."""
    statistics, marginal = with_chance(visit, statistics), with_chance(pooled(visit), marginal)

    def judged(fetch: Visit, stats: Statistics) -> tuple[Judgement, int]:
        report = reported(fetch, stats, recipe.test, recipe.adjust, recipe.alpha, recipe.seed)
        options = {"alpha": recipe.alpha, "negligible": recipe.negligible}
        return judge(stats, report.tested, adjust=recipe.adjust, **options), report.undrawn

    given, undrawn = judged(visit, statistics)
    without, undrawn_without = judged(pooled(visit), marginal)
    return judged_pairs(visit, statistics, given, marginal, without, pairs, recipe.test, undrawn + undrawn_without)


def judged_pairs(
    visit: Visit,
    statistics: Statistics,
    given: Judgement,
    marginal: Statistics,
    without: Judgement,
    pairs: Sequence[tuple[Domain, Domain]],
    test: str,
    undrawn: int,
) -> JudgedPairs:
    """Put together what both families say of P pairs; undrawn: tests near a threshold that keep p by moments."""
    seen = _without_blanks(visit, pairs, given.rejected)
    carried = np.flatnonzero(seen < statistics.bits_corrected / 2)
    notes = (
        *_forced(given, test),
        *_undrawn(undrawn),
        *_carried([(pairs[k][0].name, pairs[k][1].name) for k in carried.tolist()]),
    )
    outcome = outcomes(statistics, given, marginal, without)
    rejected = int(given.rejected.sum())
    return JudgedPairs(statistics, given, marginal, without, outcome, seen, len(pairs), rejected, notes)


def _without_blanks(visit: Visit, pairs: Sequence[tuple[Domain, Domain]], rejected: np.ndarray) -> np.ndarray:
    """Measure rejected pairs that have blank cells without them; blank is the last level of its attribute."""
    result = np.full(len(pairs), np.nan)
    for first, second in ((True, False), (False, True), (True, True)):
        chosen = [
            k for k in np.flatnonzero(rejected).tolist() if (pairs[k][0].blank, pairs[k][1].blank) == (first, second)
        ]

        def use(counts: np.ndarray, height: int, width: int, cut: tuple[bool, bool] = (first, second)) -> float:
            left = counts.reshape(-1, height, width)[:, : height - cut[0], : width - cut[1]]
            flat = np.ascontiguousarray(left).reshape(len(left), -1)
            stats = Statistics.of(one_table(flat, *left.shape[1:])[None])
            return float(with_chance(visit_arrays([flat], *left.shape[1:]), stats).bits_corrected[0])

        result[chosen] = visit(chosen, use) if chosen else []
    return result


def _carried(names: Sequence[tuple[str, str]]) -> tuple[str, ...]:
    if not names:
        return ()
    listed = quoted([f"{a} ~ {b}" for a, b in names])
    return (
        f"less than half the bits of {count_of(len(names), 'dependent pair')} are left where no cell is blank "
        f"({listed}): which cells are blank together carries the rest; --missing drop tests without those records",
    )


def _forced(given: Judgement, test: str) -> tuple[str, ...]:
    """Warn of tails that were asked for though the sample does not support them."""
    weak = int((~given.carried & ~np.isnan(given.p)).sum())
    if test not in ("chi2", "g") or not weak:
        return ()
    return (
        f"--test {test}: the sample does not carry this tail for {count_of(weak, 'pair')}, whose p may be far too "
        "small; --test auto chooses a test that the sample carries",
    )


def _undrawn(undrawn: int) -> tuple[str, ...]:
    if not undrawn:
        return ()
    return (
        f"{count_of(undrawn, 'test')} near the threshold keep p by moments: random tables are drawn for the "
        "nearest, as far as a fixed amount of work goes; --test monte-carlo draws for all",
    )
