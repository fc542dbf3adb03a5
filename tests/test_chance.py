"""What chance alone shows: against scikit-learn, against all tables of the margins, in the limit, and on average."""

from math import log

import numpy as np
import pandas as pd
import pytest
from enumerated import Margin, chance_of, corner_table, partitions, tables_with
from probed import copied, probed, words
from simulated import drawn, measured
from sklearn.metrics.cluster import expected_mutual_information

from bnx.kernels.chance import expected_nats
from bnx.refining import visit_arrays, with_chance


def chance_nats(strata: np.ndarray) -> float:
    """Run the kernel on counts (S, r, c)."""
    count, height, width = strata.shape
    return float(expected_nats(strata.reshape(count, -1).astype(np.int32), height, width))


def known_nats(strata: np.ndarray) -> float:
    """Add up records x scikit-learn's expected mutual information (Vinh, Epps & Bailey 2010) over strata (S, r, c)."""
    found = 0.0
    for stratum in strata:
        used = stratum[stratum.any(axis=1)][:, stratum.any(axis=0)].astype(np.int64)
        found += used.sum() * expected_mutual_information(used, used.sum()) if min(used.shape) > 1 else 0.0
    return found


def random_tables(number: int, seed: int) -> list[np.ndarray]:
    """Draw tables (1, r, c) of 2 to 7 levels and 4 to 3,000 records, margins even to very uneven, cells often empty."""
    random = np.random.default_rng(seed)
    found = []
    for _ in range(number):
        shape = tuple(random.integers(2, 8, 2).tolist())
        cells = random.dirichlet(np.full(shape[0] * shape[1], 10.0 ** random.uniform(-1, 1)))
        found.append(random.multinomial(int(10 ** random.uniform(0.6, 3.5)), cells).reshape(1, *shape))
    return found


def test_the_mean_is_that_of_scikit_learn() -> None:
    sparse = 0
    for table in random_tables(400, 1):
        assert chance_nats(table) == pytest.approx(known_nats(table), rel=1e-7, abs=1e-8)
        sparse += not measured(table[None]).cochran[0]
    assert 100 < sparse < 395, "tables of both kinds"


def nats_of(table: np.ndarray) -> float:
    """Compute the sum of n ln(n / E) by its definition."""
    expected = np.outer(table.sum(axis=1), table.sum(axis=0)) / table.sum()
    filled = table > 0
    return float((table[filled] * np.log(table[filled] / expected[filled])).sum())


@pytest.mark.parametrize("records", [2, 3, 4, 5, 6, 7])
def test_the_mean_is_that_over_all_tables_with_the_margins(records: int) -> None:
    margins: list[Margin] = [one for one in partitions(records, records) if 2 <= len(one) <= 4]
    for down in margins:
        for across in margins:
            tables = list(tables_with(down, across))
            chances = [chance_of(table) for table in tables]
            assert sum(chances) == 1
            mean = sum(float(p) * nats_of(np.array(table)) for p, table in zip(chances, tables, strict=True))
            assert chance_nats(corner_table(down, across)[None]) == pytest.approx(mean, rel=1e-12, abs=1e-13)


def test_two_records_by_hand() -> None:
    """Two records in two rows and two columns lie on a diagonal, whichever: 2 ln 2."""
    assert chance_nats(np.array([[[1, 0], [0, 1]]])) == pytest.approx(2 * log(2), rel=1e-15)


def test_only_the_margins_count() -> None:
    random = np.random.default_rng(2)
    for table in random_tables(50, 3):
        down, across = (table[0].sum(axis=axis) for axis in (1, 0))
        twin = corner_table(down.tolist(), across.tolist())[None]
        assert chance_nats(twin) == chance_nats(table)
        moved = table[:, random.permutation(len(down))][:, :, random.permutation(len(across))]
        assert chance_nats(moved) == pytest.approx(chance_nats(table), rel=1e-9)
        assert chance_nats(table.transpose(0, 2, 1)) == pytest.approx(chance_nats(table), rel=1e-9)


def test_strata_add_up_and_those_without_a_choice_add_nothing() -> None:
    random = np.random.default_rng(4)
    strata = random.poisson(0.7, (30, 4, 5))
    strata[3], strata[7, 1:], strata[11, :, 1:] = 0, 0, 0
    apart = [chance_nats(one[None]) for one in strata]
    assert [apart[k] for k in (3, 7, 11)] == [0.0, 0.0, 0.0]
    assert chance_nats(strata) == pytest.approx(sum(apart), rel=1e-12)
    assert chance_nats(strata) == pytest.approx(known_nats(strata), rel=1e-7)
    wide = np.zeros((30, 6, 7), np.int64)
    wide[:, 1:5, 1:6] = strata
    assert chance_nats(wide) == pytest.approx(chance_nats(strata), rel=1e-12)


def test_with_many_records_it_is_half_the_degrees_of_freedom() -> None:
    """What is left over falls as one over the number of records."""
    shares = np.random.default_rng(5).integers(1, 20, (3, 4, 5))
    gaps = np.array([chance_nats(shares * 10**k) - 3 * 3 * 4 / 2 for k in (1, 2, 3, 4)])
    assert gaps[:-1] / gaps[1:] == pytest.approx(10.0, rel=0.2)
    assert abs(gaps[-1]) < 1e-3


def levels_of(height: int, width: int, strata: int) -> np.ndarray:
    """Make cell shares (S, height, width) of independent rows and columns with uneven margins."""
    random = np.random.default_rng(6)
    down, across = (random.dirichlet(np.full(size, 3.0), strata) for size in (height, width))
    return down[:, :, None] * across[:, None] / strata


SPARSE = {"6 x 6, 2 strata, 40 rows": ((6, 6, 2), 40), "3 x 12, 5 strata, 60 rows": ((3, 12, 5), 60)}


@pytest.mark.parametrize("case", SPARSE)
def test_corrected_bits_of_sparse_independent_tables_average_0(case: str) -> None:
    size, rows = SPARSE[case]
    tables = drawn(levels_of(*size), rows, 4000, 7)
    plain = measured(tables)
    flat = np.ascontiguousarray(tables.reshape(len(tables), size[2], -1), dtype=np.int32)
    better = with_chance(visit_arrays(flat, *size[:2]), plain)
    assert not plain.cochran.any()
    for stats, holds in ((better, True), (plain, False)):
        bits = stats.bits_corrected
        error = bits.std() / np.sqrt(len(bits))
        assert (abs(bits.mean()) <= 4 * error) == holds, (bits.mean(), error)


def test_what_the_sample_carries_keeps_half_the_degrees_of_freedom() -> None:
    tables = np.concatenate([drawn(levels_of(3, 4, 2), rows, 30, rows) for rows in (30, 3000)])
    plain = measured(tables)
    flat = np.ascontiguousarray(tables.reshape(60, 2, 12), dtype=np.int32)
    better = with_chance(visit_arrays(flat, 3, 4), plain)
    sparse = ~plain.cochran
    assert (sparse[:30].all(), sparse[30:].any()) == (True, False)
    assert (better.chance[~sparse] == plain.df[~sparse] / 2).all()
    assert better.chance[sparse] == pytest.approx([known_nats(table) for table in tables[sparse]], rel=1e-7)
    unchanged = {"nats", "x2", "df", "x2_mean", "x2_variance", "x2_third", "bits"}
    assert all((getattr(better, name) == getattr(plain, name)).all() for name in unchanged)


def test_a_pair_without_a_choice_is_not_visited() -> None:
    counts = np.array([[[3, 4, 0, 0]], [[0, 0, 0, 0]]], np.int32)
    stats = measured(counts.reshape(2, 1, 2, 2))

    def visit(*_: object) -> np.ndarray:
        raise AssertionError("nothing is to be fetched")

    assert with_chance(visit, stats).chance.tolist() == [0.0, 0.0]


def sparse_frame(rows: int = 150) -> pd.DataFrame:
    """Draw two effects of one cause, of many levels each, so that Cochran's rule fails with and without the class."""
    random = np.random.default_rng(8)
    cause = random.integers(0, 9, rows)
    columns = {name: words(copied(random, cause, 9, 0.7), name) for name in ("first", "second")}
    return pd.DataFrame(columns | {"cause": words(cause, "c"), "kind": words(random.integers(0, 2, rows), "k")})


def strata_of(frame: pd.DataFrame, by: list[str]) -> np.ndarray:
    """Count the pair by pandas in every stratum, (S, levels, levels)."""
    groups = frame.groupby(by) if by else [((), frame)]
    levels = [sorted(set(frame[name])) for name in ("first", "second")]
    tables = [pd.crosstab(rows["first"], rows["second"]) for _, rows in groups]
    return np.array([table.reindex(index=levels[0], columns=levels[1], fill_value=0) for table in tables])


def corrected(strata: np.ndarray) -> float:
    """Compute bits per record less scikit-learn's chance."""
    nats = sum(nats_of(used) for one in strata if (used := one[one.any(axis=1)][:, one.any(axis=0)]).size)
    return float((nats - known_nats(strata)) / (strata.sum() * log(2)))


def test_pairs_classes_and_explanations_are_corrected_alike() -> None:
    frame = sparse_frame()
    tests = probed(frame, "kind", ("first", "second"), explain=True)
    one = tests.results[0]
    assert one.min_expected < 1
    assert one.bits_corrected == pytest.approx(corrected(strata_of(frame, ["kind"])), rel=1e-7)
    assert one.marginal_bits_corrected == pytest.approx(corrected(strata_of(frame, [])), rel=1e-7)
    assert one.explained_bits == pytest.approx(one.marginal_bits_corrected - one.bits_corrected, rel=1e-12)
    for part in tests.details["first", "second"].classes:
        rows = frame[frame["kind"] == part.level]
        assert part.bits_corrected == pytest.approx(corrected(strata_of(rows, [])), rel=1e-7)
    (tried,) = tests.explained["first", "second"]
    assert tried.bits_corrected == pytest.approx(corrected(strata_of(frame, ["kind", "cause"])), rel=1e-7)
    first_order = (one.g - one.df) / (2 * tests.rows * log(2))
    assert first_order - one.bits_corrected > 0.05, "half the degrees of freedom are far too little here"


def test_statistics_hold_half_the_degrees_of_freedom_to_begin_with() -> None:
    for table in random_tables(20, 9):
        plain = measured(table[None])
        assert plain.chance.tolist() == (plain.df / 2).tolist()
