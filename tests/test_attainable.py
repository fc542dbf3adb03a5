"""The bound on p that margins allow, against every table with these margins."""

from random import Random

import numpy as np
import pytest
from enumerated import Margin, chance_of, corner_table, distribution, partitions, tables_with
from hypothesis import given, settings
from hypothesis import strategies as st
from hypothesis.extra.numpy import arrays

from bnx.kernels.attainable import least_p
from bnx.kernels.exact import exact_tail

ROUNDING = 1 + 1e-12


def bound(table: np.ndarray) -> float:
    """Run the kernel on one table (S, h, w)."""
    strata, height, width = table.shape
    return float(least_p(np.ascontiguousarray(table, dtype=np.int32).reshape(strata, -1), height, width))


def bound_given(down: Margin, across: Margin) -> float:
    return bound(corner_table(down, across)[None])


def least_chance(down: Margin, across: Margin) -> float:
    """Find the smallest probability of any table with these margins."""
    return float(min(map(chance_of, tables_with(down, across))))


def test_no_table_of_up_to_eight_records_is_less_probable() -> None:
    shares = []
    for total in range(2, 9):
        used = list(partitions(total, total))
        for down, across in ((down, across) for down in used for across in used):
            if len(down) * len(across) <= 24:
                found, truth = bound_given(down, across), least_chance(down, across)
                assert found <= truth * ROUNDING
                shares.append(found / truth)
                if min(len(down), len(across)) == 1:
                    assert found == pytest.approx(1.0, rel=1e-12)
    assert np.mean(np.array(shares) > 1 - 1e-9) > 0.5  # most often it is that table's probability itself
    assert np.quantile(shares, 0.1) > 0.1


def test_no_value_of_x2_has_a_smaller_p() -> None:
    # p of the largest X2 is its probability; the bound must not exceed it, also where larger tables make it loose.
    random = Random(2)
    for _ in range(60):
        total = random.randint(10, 24)
        down, across = (split(random, total, random.randint(2, 4)) for _ in range(2))
        chances = distribution(down, across)
        assert bound_given(down, across) <= float(chances[max(chances)]) * ROUNDING


def split(random: Random, total: int, parts: int) -> Margin:
    """Spread records over parts, none of them empty."""
    cuts = sorted(random.sample(range(1, total), parts - 1))
    return tuple(high - low for low, high in zip([0, *cuts], [*cuts, total], strict=True))


@given(st.lists(st.tuples(st.integers(2, 40), st.integers(1, 40)), min_size=1, max_size=4))
@settings(deadline=None)
def test_is_attained_where_a_row_of_every_stratum_holds_one_record(sizes: list[tuple[int, int]]) -> None:
    # The single record falls in the rarer column: probability of that column's share, and the largest X2 of all.
    strata, truth = [], 1.0
    for first, second in sizes:
        rare, often = sorted((first, second))
        strata.append([[1, 0], [rare - 1, often]])
        truth *= rare / (rare + often)
    found = bound(np.array(strata))
    assert found == pytest.approx(truth, rel=1e-10)
    assert found <= exact_tail(np.array(strata, dtype=np.int32).reshape(-1, 4), 2, 2) * ROUNDING


@given(arrays(np.int32, (3, 3, 4), elements=st.integers(0, 6)), st.integers(0, 2**32))
@settings(deadline=None)
def test_strata_multiply_and_names_do_not_matter(table: np.ndarray, seed: int) -> None:
    found = bound(table)
    assert found == pytest.approx(np.prod([bound(stratum[None]) for stratum in table]), rel=1e-10)
    shuffled = np.random.default_rng(seed)
    renamed = table[shuffled.permutation(3)][:, shuffled.permutation(3)][:, :, shuffled.permutation(4)]
    for other in (renamed, table.transpose(0, 2, 1), np.pad(table, 1)):
        assert bound(other) == pytest.approx(found, rel=1e-10)


@pytest.mark.parametrize(
    "table",
    [
        np.zeros((2, 2, 3)),
        np.array([[[4, 3, 2], [0, 0, 0]], [[0, 0, 1], [0, 0, 5]]]),  # one used row or column per stratum
        np.array([[[100_000, 0], [7, 0]]]),
    ],
)
def test_is_one_where_only_one_table_has_these_margins(table: np.ndarray) -> None:
    assert bound(table) == pytest.approx(1.0, rel=1e-9)


def test_becomes_small_with_records_enough() -> None:
    assert bound(np.array([[[5, 0], [0, 5]]])) == pytest.approx(1 / 252, rel=1e-12)  # 10 choose 5
    assert bound(np.array([[[5, 0], [0, 5]]] * 4)) == pytest.approx(252.0**-4, rel=1e-12)
    assert bound(np.full((1, 2, 2), 10_000)) == 0.0  # far below the smallest double
