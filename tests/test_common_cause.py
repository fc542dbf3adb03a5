"""Two effects of one cause, a second cause to be found, and bits explained where there is nothing to explain."""

import numpy as np
import pytest
from simulated import exact_bits
from simulations.common_cause import (
    CLASS_SHARES,
    NAMES,
    Explained,
    SecondCause,
    effects_p,
    explain,
    explained_by_class,
    second_cause,
)

from bnx.intervals import detectable_bits

ROWS, DRAWS = 2000, 200


@pytest.fixture(scope="module")
def model() -> SecondCause:
    return second_cause(ROWS, 3.0)


@pytest.fixture(scope="module")
def found(model: SecondCause) -> list[Explained]:
    return [explain(model, ROWS, seed) for seed in range(DRAWS)]


def test_effects_depend_until_their_cause_is_given() -> None:
    """Common practice, no source: two effects of one cause are dependent, and independent once it is given."""
    p = effects_p(ROWS, DRAWS, seed=1)
    assert (p.marginal <= 0.05).all()
    assert (p.given <= 0.05).sum() <= DRAWS * (0.05 + 2 * np.sqrt(0.05 * 0.95 / DRAWS))
    assert (p.given <= 0.05).any()  # nothing would be as wrong as too much


def test_the_second_cause_leaves_three_times_what_is_detectable(model: SecondCause) -> None:
    joint = np.einsum("c,cz,cza,czb->cab", CLASS_SHARES, model.cause, model.first, model.second)
    assert model.bits == pytest.approx(exact_bits(joint), rel=1e-12)
    assert model.bits == pytest.approx(3 * detectable_bits(0.05, np.array([12.0]), np.array([2000.0]))[0], rel=1e-9)
    codes, target = model.draw(200_000, seed=5)
    cells = np.zeros((3, 3, 3))
    np.add.at(cells, (target, codes[0], codes[1]), 1 / 200_000)
    assert exact_bits(cells) == pytest.approx(model.bits, rel=0.05)


def test_the_second_cause_is_ranked_first(found: list[Explained]) -> None:
    assert np.mean([one.p <= 0.05 for one in found]) > 0.99
    assert np.mean([one.ranked[0].attribute == NAMES[2] for one in found]) >= 0.92
    assert all({each.attribute for each in one.ranked} == set(NAMES[2:]) for one in found)


def test_given_the_second_cause_nothing_is_left_and_given_the_others_it_remains(found: list[Explained]) -> None:
    """All attributes are tried together at .05, so the cause may leave a dependence in 5 % + 2 standard errors."""
    leaves = {
        name: np.mean(
            [each.words == "leaves a dependence" for one in found for each in one.ranked if each.attribute == name]
        )
        for name in NAMES[2:]
    }
    assert leaves.pop(NAMES[2]) <= 0.05 + 2 * np.sqrt(0.05 * 0.95 / DRAWS)
    assert min(leaves.values()) > 0.7


def test_the_class_explains_nothing_where_all_is_independent() -> None:
    """Also with four records expected in every cell, where df / 2 alone would fall .01 bit short."""
    for even in (False, True):
        assert abs(explained_by_class(300, 2000, even, seed=1).mean()) <= 0.004
