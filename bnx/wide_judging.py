"""All pairs of very many binary attributes tested as one family, and the strongest and the drawn of them judged.

Every pair is tested on all rows, given the class and without it, by the chi-square tail or the moments of X2. What the
tests say of a pair is worked out for those that are looked at: the family is kept as sorted p-values.
"""

from collections.abc import Iterable, Sequence
from dataclasses import replace

import numpy as np

from bnx.dependence import Pairs
from bnx.domains import Domain
from bnx.engines import LocalEngine
from bnx.independence import Statistics, p_values
from bnx.kernels.contingency import table_statistics
from bnx.kernels.exact import exact_tail
from bnx.many_tests import ManyTests
from bnx.multiplicity import family_size
from bnx.pair_judging import JudgedPairs, judged_pairs
from bnx.recipe import Recipe
from bnx.refining import FAR_ABOVE, FAR_BELOW, Visit, pooled, with_chance
from bnx.text import count_of
from bnx.trainings import Training
from bnx.verdicts import Judgement, judged_by
from bnx.wide_tables import margins_of, pack
from bnx.wide_testing import Family, WideTable, test_all

__all__ = ["MOST_JUDGED", "judge_wide"]

MOST_JUDGED = 20_000  # pairs, unless more are drawn

_EXACT = 100_000  # p by moments that are made exact in a family: those nearest the threshold


def judge_wide(
    engine: LocalEngine, training: Training, drawn: Iterable[tuple[int, int]], most: int, recipe: Recipe
) -> tuple[Pairs, JudgedPairs]:
    """Test all pairs, and judge those drawn and the strongest, ``most`` in all unless more are drawn.

    Returns:
        The pairs judged, in the order of attributes, and what is said of them.
    """
    table = WideTable(engine, pack(engine, by_block=False), margins_of(engine, [training]))
    given, without, strongest = test_all(table, most, recipe.alpha)
    ends = np.array(sorted({(min(pair), max(pair)) for pair in drawn}), np.int64).reshape(-1, 2)
    edges = table.places(ends[:, 0], ends[:, 1])
    rest = strongest[~np.isin(strongest, edges)][: max(0, most - len(edges))]
    chosen = np.sort(np.concatenate([edges, rest]))
    return _judged(table, training.view.domains, given, without, chosen, recipe)


def _statistics(strata: np.ndarray) -> np.ndarray:
    """Compute the statistics (P, COLUMNS) of 2 x 2 tables (S, P, 4)."""
    pairs = strata.shape[1]
    two = np.full(pairs, 2, np.int64)
    return np.asarray(table_statistics(strata.reshape(len(strata), -1), 4 * np.arange(pairs), two, two))


def _judged(
    table: WideTable, domains: Sequence[Domain], given: Family, without: Family, chosen: np.ndarray, recipe: Recipe
) -> tuple[Pairs, JudgedPairs]:
    """Judge the chosen pairs as members of both families."""
    left, right = table.ends(chosen)
    tables = table.tables(chosen)
    visit = _visit(table.engine, tables)
    strata = np.ascontiguousarray(tables.transpose(1, 0, 2))
    statistics = _statistics(strata)
    marginal = _statistics(strata.sum(axis=0, dtype=np.int32)[None])
    stats = with_chance(visit, Statistics.of(statistics))
    whole = with_chance(pooled(visit), Statistics.of(marginal))
    one, rejected, left_over = _judgement(table, given, chosen, stats, recipe, False)
    other, _, left_over_whole = _judgement(table, without, chosen, whole, recipe, True)
    ends = [(domains[i], domains[j]) for i, j in zip(left.tolist(), right.tolist(), strict=True)]
    judged = judged_pairs(visit, stats, one, whole, other, ends, recipe.test, left_over + left_over_whole)
    note = (
        f"all {table.pairs:,} pairs are tested as one family, less those whose margins allow no small p; only the "
        f"{count_of(len(chosen), 'pair')} drawn or with most bits are judged further, listed in pairs.csv and counted"
    )
    judged = replace(judged, family=table.pairs, rejected=rejected, notes=(note, *judged.notes))
    return Pairs(left, right, statistics, marginal), judged


def _judgement(
    table: WideTable, family: Family, chosen: np.ndarray, stats: Statistics, recipe: Recipe, whole: bool
) -> tuple[Judgement, int, int]:
    """Judge the chosen pairs; also give how many of the family are rejected, and how many near the threshold keep p by
    moments.
    """
    p = family.p
    small = int(np.count_nonzero(~np.isnan(p))) - len(family.doubtful)
    size = 1 if recipe.adjust == "none" else family_size(family.least, small, recipe.alpha)
    p[family.doubtful[family.least > recipe.alpha / size]] = np.nan
    at = ManyTests.of(p, recipe.adjust).threshold(recipe.alpha)
    sparse = np.flatnonzero(family.sparse & ~np.isnan(p))
    near, left_over = _nearest(p, sparse, at)
    wanted = np.union1d(near, chosen[family.sparse[chosen] & ~np.isnan(p[chosen])])
    visit = _visit(table.engine, table.tables(wanted))
    visit = pooled(visit) if whole else visit
    p[wanted] = visit(range(len(wanted)), exact_tail)
    tests = ManyTests.of(p, recipe.adjust)
    first = p_values(stats, recipe.test)
    tested = first.replaced(np.flatnonzero(first.by_moments), p[chosen][first.by_moments], "exact")
    tested = tested.without(np.isnan(p[chosen]))
    return (
        judged_by(
            stats, tested, tests.adjusted(p[chosen]), tests.threshold(recipe.alpha), recipe.alpha, recipe.negligible
        ),
        tests.rejected(recipe.alpha),
        left_over,
    )


def _nearest(p: np.ndarray, sparse: np.ndarray, at: float) -> tuple[np.ndarray, int]:
    """Choose the p by moments to be made exact: all if they are few, else those nearest the threshold.

    Also give how many near it are not chosen.
    """
    if len(sparse) <= _EXACT:
        return sparse, 0
    near = sparse[(p[sparse] <= FAR_ABOVE * at) & (p[sparse] * FAR_BELOW >= at)]
    if len(near) <= _EXACT:
        return near, 0
    distance = np.abs(np.log(np.maximum(p[near], 1e-300) / at))
    return np.sort(near[np.argsort(distance, kind="stable")[:_EXACT]]), len(near) - _EXACT


def _visit(engine: LocalEngine, tables: np.ndarray) -> Visit:
    """Fetch counts from 2 x 2 tables (k, C, 4), on the engine's threads."""
    return lambda places, use: np.array(engine.map(lambda k: use(tables[k], 2, 2), places))
