"""All pairs of very many binary attributes tested as one family, and the strongest and the drawn of them judged.

Every pair is tested on all rows, given the class and without it, by the chi-square tail or the moments of X2. What the
tests say of a pair is worked out for those that are looked at: the family is kept as sorted p-values.
"""

from collections.abc import Iterable, Sequence
from dataclasses import dataclass, replace

import numpy as np

from bnx.dependence import Pairs
from bnx.domains import Domain
from bnx.engines import LocalEngine
from bnx.independence import Statistics, p_values
from bnx.kernels.contingency import NATS, table_statistics
from bnx.kernels.exact import exact_tail
from bnx.kernels.wide_tests import class_tables, least_of_tables
from bnx.many_tests import ManyTests
from bnx.multiplicity import family_size
from bnx.pair_judging import JudgedPairs, judged_pairs
from bnx.recipe import Recipe
from bnx.refining import FAR_ABOVE, FAR_BELOW, Visit, pooled, with_chance
from bnx.text import count_of
from bnx.trainings import Training
from bnx.verdicts import Judgement, judged_by
from bnx.wide_tables import Margins, Planes, joint_tables, margins_of, pack

__all__ = ["MOST_JUDGED", "judge_wide"]

MOST_JUDGED = 20_000  # pairs, unless more are drawn

_PAIRS = 100_000  # tested at a time by a thread
_EXACT = 100_000  # p by moments that are made exact in a family: those nearest the threshold
_STAGE = "testing all pairs"


@dataclass(frozen=True)
class _Family:
    """P tests: ``p`` in the order of pairs, NaN where untestable; ``sparse`` (P,): by moments; and of those that could
    be too few to reach the threshold, ``doubtful`` (k,), the ``least`` p.
    """

    p: np.ndarray
    sparse: np.ndarray
    doubtful: np.ndarray
    least: np.ndarray


@dataclass(frozen=True)
class _Table:
    """All rows of a table of binary attributes."""

    engine: LocalEngine
    planes: Planes
    margins: Margins

    @property
    def attributes(self) -> int:
        """Number of attributes."""
        return len(self.planes.planes)

    @property
    def pairs(self) -> int:
        """Number of pairs."""
        return self.attributes * (self.attributes - 1) // 2

    def ends(self, places: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
        """Find the attributes of pairs by their places in the order (0, 1), (0, 2), ..., each (k,)."""
        firsts = _firsts(self.attributes)
        left = np.searchsorted(firsts, places, side="right") - 1
        return left, places - firsts[left] + left + 1

    def places(self, left: np.ndarray, right: np.ndarray) -> np.ndarray:
        """Find the places of pairs, left < right."""
        return np.asarray(_firsts(self.attributes)[left] + right - left - 1)

    def tables(self, places: np.ndarray) -> np.ndarray:
        """Count pairs by class, int32 (k, C, 4)."""
        left, right = self.ends(places)
        joint = self.planes.counts(left, right).reshape(len(left), -1, self.engine.classes).sum(axis=1)
        ones, records = self.margins.ones[0], self.margins.records[0].astype(np.int64)
        return joint_tables(joint, ones[:, left].T, ones[:, right].T, records)


def _firsts(attributes: int) -> np.ndarray:
    """Place of the first pair of every attribute, int64 (n,)."""
    i = np.arange(attributes, dtype=np.int64)
    return np.asarray(i * attributes - i * (i + 1) // 2)


def judge_wide(
    engine: LocalEngine, training: Training, drawn: Iterable[tuple[int, int]], most: int, recipe: Recipe
) -> tuple[Pairs, JudgedPairs]:
    """Test all pairs, and judge those drawn and the strongest, ``most`` in all unless more are drawn.

    Returns:
        The pairs judged, in the order of attributes, and what is said of them.
    """
    table = _Table(engine, pack(engine, by_block=False), margins_of(engine, [training]))
    given, without, strongest = _tested(table, most, recipe.alpha)
    ends = np.array(sorted({(min(pair), max(pair)) for pair in drawn}), np.int64).reshape(-1, 2)
    edges = table.places(ends[:, 0], ends[:, 1])
    rest = strongest[~np.isin(strongest, edges)][: max(0, most - len(edges))]
    chosen = np.sort(np.concatenate([edges, rest]))
    return _judged(table, training.view.domains, given, without, chosen, recipe)


def _tested(table: _Table, most: int, alpha: float) -> tuple[_Family, _Family, np.ndarray]:
    """Test all pairs given the class and without it; also place the strongest given it, strongest first."""
    attributes, classes = table.attributes, table.engine.classes
    families = [(np.empty(table.pairs), np.zeros(table.pairs, np.bool_)) for _ in range(2)]
    firsts = [*_firsts(attributes).tolist(), table.pairs]
    ones, records = table.margins.ones[0], table.margins.records[0].astype(np.int64)
    planes = (table.planes.planes, table.planes.words)

    def test(rows: tuple[int, int]) -> tuple[list[tuple[np.ndarray, np.ndarray]], np.ndarray, np.ndarray]:
        begin, end = firsts[rows[0]], firsts[rows[1]]
        tables = np.empty((classes, end - begin, 4), np.int32)
        class_tables(*planes, ones, records, *rows, tables)
        doubtful = []
        nats = np.zeros(0)
        for (p, sparse), strata in zip(families, (tables, tables.sum(axis=0, dtype=np.int32)[None]), strict=True):
            found = _statistics(strata)
            nats = nats if len(nats) else found[:, NATS].copy()
            tested = p_values(Statistics.of(found))
            p[begin:end], sparse[begin:end] = tested.p, tested.by_moments
            few = np.flatnonzero(tested.by_moments)
            least = least_of_tables(strata, few)
            unsure = least > alpha / table.pairs
            doubtful.append((few[unsure] + begin, least[unsure]))
        best = np.argpartition(-nats, most)[:most] if len(nats) > most else np.arange(len(nats))
        return doubtful, nats[best], best + begin

    results = table.engine.map(test, _shares(firsts), _STAGE)
    nats, places = (np.concatenate([one[k] for one in results]) for k in (1, 2))
    best = np.argpartition(-nats, most)[:most] if len(nats) > most else np.arange(len(nats))
    strongest = places[best][np.lexsort((places[best], -nats[best]))]
    found = [
        _Family(*families[k], *(np.concatenate([one[0][k][what] for one in results]) for what in (0, 1)))
        for k in range(2)
    ]
    return found[0], found[1], strongest


def _shares(firsts: Sequence[int]) -> list[tuple[int, int]]:
    """Cut the attributes into runs (start, stop) that begin about _PAIRS pairs each."""
    shares, start = [], 0
    for stop in range(1, len(firsts)):
        if firsts[stop] - firsts[start] >= _PAIRS or stop == len(firsts) - 1:
            if firsts[stop] > firsts[start]:
                shares.append((start, stop))
            start = stop
    return shares


def _statistics(strata: np.ndarray) -> np.ndarray:
    """Compute the statistics (P, COLUMNS) of 2 x 2 tables (S, P, 4)."""
    pairs = strata.shape[1]
    two = np.full(pairs, 2, np.int64)
    return np.asarray(table_statistics(strata.reshape(len(strata), -1), 4 * np.arange(pairs), two, two))


def _judged(
    table: _Table, domains: Sequence[Domain], given: _Family, without: _Family, chosen: np.ndarray, recipe: Recipe
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
        f"all {table.pairs:,} pairs are tested as one family, but only the {count_of(len(chosen), 'pair')} drawn or "
        "with most bits are judged further: pairs_verdicts and pairs_outcomes count those"
    )
    judged = replace(judged, family=table.pairs, rejected=rejected, notes=(note, *judged.notes))
    return Pairs(left, right, statistics, marginal), judged


def _judgement(
    table: _Table, family: _Family, chosen: np.ndarray, stats: Statistics, recipe: Recipe, whole: bool
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
