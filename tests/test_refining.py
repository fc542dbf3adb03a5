"""Which pair gets which p: by moments, exact, from random tables, or none; and that these p depend on nothing else."""

from collections.abc import Sequence
from math import sqrt

import numpy as np
import pytest
from builders import coded, domain, recipe_of, started, whole
from enumerated import distribution, tables_with, tail, x2_of
from simulated import measured

from bnx.dependence import measure
from bnx.families import PairRequests
from bnx.independence import METHODS, Statistics, p_values
from bnx.independence import Tested as PairTests  # pytest would take it for tests by its name
from bnx.kernels.attainable import least_p
from bnx.kernels.contingency import table_statistics
from bnx.kernels.exact import exact_tail
from bnx.kernels.montecarlo import ENOUGH
from bnx.multiplicity import threshold
from bnx.pair_judging import judge_pairs
from bnx.refining import (
    MOST_DRAWN,
    Report,
    Rigour,
    Use,
    Visit,
    gated,
    pooled,
    reported,
    visit_arrays,
    visit_families,
)

# A pair each; the p by moments, judged at .05.
CASES = {
    "Cochran's rule holds": ([[[30, 20, 25], [20, 30, 25]]], "chi2-tail"),
    "sparse, above the threshold": ([[[4, 3, 2], [3, 4, 2], [1, 1, 1]]], "monte-carlo"),  # .95
    "sparse, far below it": ([[[9, 0, 0], [0, 9, 0], [0, 0, 9]]], "moments"),  # 1e-9
    "sparse and near it": ([[[6, 2, 1], [1, 5, 2], [1, 2, 4]]], "monte-carlo"),  # .03
    "2 x 2, sparse, above it": ([[[4, 3], [3, 4]]], "exact"),  # .6
    "2 x 2, sparse and near": ([[[6, 1], [1, 5]], [[2, 1], [1, 2]]], "exact"),
    "2 x 2, sparse, far below": ([[[9, 0], [0, 9]]], "exact"),
    "2 x 2 within more levels": ([[[6, 0, 1], [0, 0, 0], [1, 0, 5]]], "exact"),
    "cannot reach it": ([[[1, 0], [6, 9]]], "none"),  # the single record: 7/16 at best
    "cannot vary": ([[[1, 0], [0, 1]]], "none"),
}


def padded(table: Sequence[Sequence[Sequence[int]]]) -> np.ndarray:
    """Give every table 2 strata of 3 x 3."""
    found = np.zeros((2, 3, 3), np.int64)
    for s, stratum in enumerate(table):
        found[s, : len(stratum), : len(stratum[0])] = stratum
    return found


def counts_of(tables: np.ndarray) -> np.ndarray:
    """Lay tables (P, S, h, w) out as a visit of arrays has them."""
    return np.ascontiguousarray(tables.reshape(*tables.shape[:2], -1), dtype=np.int32)


def report(tables: np.ndarray, test: str = "auto", adjust: str = "none", alpha: float = 0.05, seed: int = 1) -> Report:
    """Report tests of tables (P, S, h, w)."""
    visit = visit_arrays(counts_of(tables), *tables.shape[2:])
    return reported(visit, measured(tables), test, adjust, alpha, seed)


def methods(tested: PairTests) -> list[str]:
    return [METHODS[code] for code in tested.method]


def equal(one: PairTests, other: PairTests) -> bool:
    return all(np.array_equal(a, b, equal_nan=True) for a, b in zip(one, other, strict=True))


def near_tables(number: int, seed: int) -> np.ndarray:
    """Draw sparse 3 x 3 tables whose p by moments lies near .05, no two alike."""
    shares = np.outer([0.45, 0.3, 0.25], [0.5, 0.3, 0.2]).ravel()
    draws = np.unique(np.random.default_rng(seed).multinomial(22, shares, 40_000), axis=0).reshape(-1, 1, 3, 3)
    p = p_values(measured(draws))[1]
    found: np.ndarray = np.random.default_rng(seed).permutation(
        draws[(p > 0.015) & (p < 0.2) & (measured(draws).levels == 3)]
    )[:number]
    assert len(found) == number
    return found


TABLES = np.stack([padded(table) for table, _ in CASES.values()])


def test_every_kind_of_pair_gets_its_method() -> None:
    tested, undrawn = report(TABLES)
    assert dict(zip(CASES, methods(tested), strict=True)) == {name: method for name, (_, method) in CASES.items()}
    assert undrawn == 0
    assert (np.isnan(tested.p) == (tested.method == METHODS.index("none"))).all()
    assert tested.carried.tolist() == [method in ("chi2-tail", "exact", "monte-carlo") for _, method in CASES.values()]
    plain = p_values(measured(TABLES))
    kept = np.isin(tested.method, [METHODS.index("chi2-tail"), METHODS.index("moments")])
    np.testing.assert_array_equal(tested.p[kept], plain.p[kept])
    np.testing.assert_array_equal(tested.statistic, plain.statistic)
    assert kept.sum() == 2
    (above,) = methods(report(TABLES[1:2], alpha=0.001).tested)
    assert above == "moments"  # .95 is over 100 times the threshold


def test_exact_and_drawn_p_equal_enumeration() -> None:
    tables = np.concatenate([TABLES[:, :1], near_tables(40, seed=2)])
    tested = report(tables).tested
    ratios = []
    for table, p, method in zip(tables[:, 0], tested.p, methods(tested), strict=True):
        used = table[table.sum(1) > 0][:, table.sum(0) > 0].tolist()
        chances = distribution(tuple(map(sum, used)), tuple(map(sum, zip(*used, strict=True))))
        truth = tail(chances, x2_of(used))
        if method == "exact":
            assert p == pytest.approx(truth, rel=1e-9)
        if method == "monte-carlo":
            assert p == pytest.approx(truth, abs=4 * truth / sqrt(ENOUGH))
            ratios.append(p / truth)
    assert len(ratios) > 40
    assert np.mean(ratios) == pytest.approx(1 + 1 / ENOUGH, abs=4 / sqrt(ENOUGH * len(ratios)))


def test_chi2_and_g_stay_as_they_are() -> None:
    for test in ("chi2", "g"):
        tested, undrawn = report(TABLES, test)
        assert equal(tested, p_values(measured(TABLES), test))
        assert undrawn == 0


def test_monte_carlo_draws_for_every_pair() -> None:
    found = dict(zip(CASES, methods(report(TABLES, "monte-carlo").tested), strict=True))
    assert {name: method for name, method in found.items() if method != "monte-carlo"} == {
        "2 x 2, sparse, above it": "exact",
        "2 x 2, sparse and near": "exact",
        "2 x 2, sparse, far below": "exact",
        "2 x 2 within more levels": "exact",
        "cannot reach it": "none",
        "cannot vary": "none",
    }
    dense = report(TABLES[:1], "monte-carlo").tested.p[0]
    assert dense == pytest.approx(p_values(measured(TABLES[:1]))[1][0], abs=4 * dense / sqrt(ENOUGH) + 0.005)


def test_p_depends_on_its_table_the_seed_and_the_threshold_alone() -> None:
    tables = near_tables(30, seed=3)
    first = report(tables).tested
    assert set(methods(first)) == {"monte-carlo"}
    assert equal(first, report(tables).tested)
    order = np.random.default_rng(4).permutation(30)
    np.testing.assert_array_equal(report(tables[order]).tested.p, first.p[order])
    for k in (0, 7, 29):
        assert report(tables[k : k + 1]).tested.p[0] == first.p[k]
    twice = report(np.concatenate([tables, tables])).tested.p
    np.testing.assert_array_equal(twice, np.tile(first.p, 2))
    assert np.mean(report(tables, seed=2).tested.p != first.p) > 0.9


@pytest.mark.parametrize(("alpha", "most"), [(0.05, 4000), (0.002, 100_000), (1e-5, 2_000_000)])
def test_p_is_drawn_as_finely_as_the_threshold_needs(alpha: float, most: int) -> None:
    perfect = padded([[[9, 0, 0], [0, 9, 0], [0, 0, 9]]])  # reached by 6 in 2e11 random tables
    tested = report(perfect[None], "monte-carlo", alpha=alpha).tested
    assert tested.p[0] == pytest.approx(1 / (most + 1), rel=1e-12)


@pytest.mark.parametrize("adjust", ["bh", "by", "holm", "none"])
def test_a_pair_out_of_reach_leaves_the_family(adjust: str) -> None:
    beyond = np.stack([padded([[[1, 0], [6, 9]]])] * 30)
    tables = np.concatenate([TABLES[:7], beyond])
    tested = report(tables, adjust=adjust).tested
    assert set(methods(tested)[7:]) == {"none"}
    alone = report(TABLES[:7], adjust=adjust).tested
    assert equal(PairTests(*(part[:7] for part in tested)), alone)
    assert np.count_nonzero(~np.isnan(tested.p)) == 7


def test_reach_shrinks_with_the_family() -> None:
    table = padded([[[4, 0], [0, 4]]])  # the least p is 1 / 70
    for number, method in ((1, "exact"), (3, "exact"), (4, "none")):
        assert set(methods(report(np.stack([table] * number), adjust="holm").tested)) == {method}
    # Two families in one: three hopeless pairs more do not count, so that three may still be tested at .05 / 3.
    hopeless = padded([[[2, 0], [0, 2]]])
    mixed = report(np.stack([table] * 3 + [hopeless] * 3), adjust="holm").tested
    assert methods(mixed) == ["exact"] * 3 + ["none"] * 3


def test_the_nearest_pairs_are_drawn_and_the_rest_is_told() -> None:
    tables = near_tables(MOST_DRAWN + 40, seed=6)
    visit, stats = visit_arrays(counts_of(tables), 3, 3), measured(tables)
    by_moments = p_values(stats).p
    tested, undrawn = reported(visit, stats, "auto", "none", 0.05, 1)
    drawn = np.array(methods(tested)) == "monte-carlo"
    assert undrawn == 40 == np.count_nonzero(tested.by_moments)
    distance = np.abs(np.log(by_moments / 0.05))
    assert distance[drawn].max() <= distance[~drawn].min()
    np.testing.assert_array_equal(tested.p[~drawn], by_moments[~drawn])
    everything = reported(visit, stats, "monte-carlo", "none", 0.05, 1)
    assert set(methods(everything.tested)) == {"monte-carlo"}
    assert everything.undrawn == 0
    pairs = [(domain("a", 3), domain("b", 3))] * len(tables)
    for settings, notes in (
        ({}, "80 tests near the threshold keep p by moments: random tables are drawn for the nearest, "),
        ({"test": "monte-carlo"}, ""),
    ):
        judged = judge_pairs(visit, stats, stats, pairs, recipe_of("class", adjust="none", **settings))
        assert "".join(judged.notes).startswith(notes)
        assert bool(judged.notes) == bool(notes)


def test_threads_and_sources_of_counts_do_not_matter() -> None:
    random = np.random.default_rng(8)
    cause = random.integers(0, 3, 70)
    target = random.integers(0, 2, 70)
    codes = np.array([np.where(random.random(70) < 0.35, cause, random.integers(0, 3, 70)) for _ in range(8)])
    table = coded(codes, target)
    found = []
    for jobs in (1, 2):
        engine = started(table, jobs=jobs)
        training = whole(engine, table)
        (_, pairs), *_ = measure(engine, [training])
        visit = visit_families(engine, [training], PairRequests(0, pairs.left, pairs.right))
        found.append(reported(visit, Statistics.of(pairs.statistics), "auto", "none", 0.05, 1).tested)
    assert equal(*found)
    assert methods(found[0]).count("monte-carlo") > 3
    tables = np.zeros((len(pairs.left), 2, 3, 3), np.int64)
    for p, (a, b) in enumerate(zip(pairs.left, pairs.right, strict=True)):
        np.add.at(tables[p], (target, codes[a], codes[b]), 1)
    assert equal(found[0], report(tables).tested)


def test_pooled_counts_are_added_over_the_strata() -> None:
    tables = np.random.default_rng(9).poisson(2, (12, 4, 3, 3))
    visit, shut = visit_arrays(counts_of(tables), 3, 3), tables.sum(1)[:, None]
    found = reported(pooled(visit), measured(shut), "monte-carlo", "bh", 0.05, 1)
    assert equal(found.tested, report(shut, "monte-carlo", "bh").tested)
    np.testing.assert_array_equal(pooled(visit)([3, 5], exact_or_sum), [shut[3].sum(), shut[5].sum()])


def exact_or_sum(counts: np.ndarray, height: int, width: int) -> float:
    """Add up all records, which must lie in one stratum."""
    assert counts.shape == (1, height * width)
    return float(counts.sum())


def test_a_gate_refines_what_lies_between_its_bounds() -> None:
    visit, stats = visit_arrays(counts_of(TABLES), 3, 3), measured(TABLES)
    plain = p_values(stats)
    names = list(CASES)
    exact = [names.index(f"2 x 2{more}") for more in (", sparse and near", " within more levels")]
    exact.append(names.index("cannot reach it"))  # also 2 x 2; a gate has no family that it could leave
    tested = gated(visit, stats, Rigour("auto", 1e-3, 0.25, 1))
    assert np.flatnonzero(tested.is_exact).tolist() == exact
    for k in exact:
        assert tested.p[k] == exact_tail(counts_of(TABLES)[k], 3, 3)
    others = ~tested.is_exact
    np.testing.assert_array_equal(tested.p[others], plain.p[others])
    drawn = gated(visit, stats, Rigour("monte-carlo", 1e-3, 0.25, 1))
    between = (plain.p >= 1e-3) & (plain.p <= 0.25)
    expected = [
        "exact" if k in exact else "monte-carlo" if between[k] else METHODS[plain.method[k]] for k in range(len(names))
    ]
    assert methods(drawn) == expected
    assert expected.count("monte-carlo") >= 1
    assert equal(gated(visit, stats, Rigour("g", 1e-3, 0.25, 1)), p_values(stats, "g"))
    assert equal(gated(visit, stats, Rigour("auto", 1.0, 0.0, 1)), plain)


def test_counts_are_fetched_for_pairs_in_doubt_alone() -> None:
    visit = visit_arrays(counts_of(TABLES), 3, 3)
    asked: dict[object, list[int]] = {}

    def watched(chosen: Sequence[int], use: Use) -> np.ndarray:
        asked[use if use in (least_p, exact_tail) else "drawn"] = list(chosen)
        return visit(chosen, use)

    watching: Visit = watched
    reported(watching, measured(TABLES), "auto", "none", 0.05, 1)
    names = list(CASES)
    sparse = [k for k, name in enumerate(names) if name not in ("Cochran's rule holds", "cannot vary")]
    assert asked[least_p] == sparse
    assert asked[exact_tail] == [k for k, (_, method) in enumerate(CASES.values()) if method == "exact"]
    assert asked["drawn"] == [k for k, (_, method) in enumerate(CASES.values()) if method == "monte-carlo"]


def test_nothing_to_test() -> None:
    for test in ("auto", "monte-carlo"):
        tested, undrawn = report(np.stack([padded([[[1, 0], [0, 1]]])] * 3), test, "bh")
        assert set(methods(tested)) == {"none"}
        assert np.isnan(threshold(tested.p, "bh", 0.05))
        assert undrawn == 0
    empty = table_statistics(np.zeros((1, 0), np.int32), *(np.zeros(0, np.int64) for _ in range(3)))
    assert len(reported(visit_arrays(np.zeros((0, 1, 4)), 2, 2), Statistics.of(empty), "auto", "bh", 0.05, 1)[0].p) == 0


def test_the_level_holds_where_p_by_moments_is_far_too_small() -> None:
    # One of thousands of random margins: p by moments rejects 2.3 times too often, being 4 to 23 times too small there.
    down, across, alpha = (14, 14, 2), (15, 13, 2), 0.001
    one_of = {x2_of(table): table for table in tables_with(down, across)}
    chances = distribution(down, across)
    values = list(one_of)
    tables = np.array([one_of[x2] for x2 in values])[:, None]
    mass = np.array([float(chances[x2]) for x2 in values])
    assert mass[p_values(measured(tables)).p <= alpha].sum() > 2 * alpha
    tested = report(tables, alpha=alpha).tested
    assert methods(tested).count("monte-carlo") > 10
    assert mass[tested.p <= alpha].sum() <= 1.25 * alpha
