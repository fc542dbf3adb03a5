"""How sure probabilities are made: against a general optimiser and the formula."""

import numpy as np
import pytest
from scipy.optimize import minimize_scalar
from scipy.special import softmax

from bnx.sharpening import fit_sharpness, sharpened


@pytest.mark.parametrize(("power", "rows"), [(0.6, 2_000), (1.0, 150), (1.7, 2_000)])
def test_sharpness_is_that_of_a_general_optimiser(power: float, rows: int) -> None:
    random = np.random.default_rng(4)
    told = softmax(random.normal(0, 1.5, (rows, 3)), axis=1)
    truth = np.array([random.choice(3, p=row) for row in softmax(power * np.log(told), axis=1)])
    weights = random.uniform(0.5, 2, rows)
    every, prior = np.arange(rows), np.array([0.5, 0.3, 0.2])

    def loss(sharpness: float) -> float:
        p = told * ((1 - prior) / (1 - told)) ** sharpness
        return float(-(weights * np.log(p[every, truth] / p.sum(axis=1))).sum() + 20 * sharpness**2)

    best = minimize_scalar(loss, bounds=(-1, 1), method="bounded", options={"xatol": 1e-10}).x
    found = fit_sharpness(told, np.tile(prior, (rows, 1)), truth, weights)
    assert found == pytest.approx(best if power != 1 else 0.0, abs=1e-6), "none where a nat is not saved"
    assert (loss(0.0) - loss(best) > 1) == (power != 1)
    p = told * ((1 - prior) / (1 - told)) ** best
    assert sharpened(told, best, prior) == pytest.approx(p / p.sum(axis=1, keepdims=True), abs=1e-14)
    assert sharpened(told, 0.0, prior) is told


def test_sharpening_keeps_certainty_from_1_and_the_prior_as_it_is() -> None:
    prior = np.array([0.7, 0.3])
    p = sharpened(np.array([[1.0, 0.0], [0.7, 0.3], [0.9, 0.1], [1 - 5e-10, 5e-10]]), 1.0, prior)
    assert ((p > 0) & (p < 1)).all()
    assert p.sum(axis=1) == pytest.approx(1)
    assert p[1] == pytest.approx(prior, abs=1e-15)
    odds = np.log([0.9 / 0.1, 0.7 / 0.3])
    assert np.log(p[2, 0] / p[2, 1]) == pytest.approx(odds[0] + odds[0] - odds[1]), (
        "of two classes: evidence counts twice"
    )
