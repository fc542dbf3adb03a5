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
    every = np.arange(rows)

    def loss(sharpness: float) -> float:
        p = told / (1 - told) ** sharpness
        return float(-(weights * np.log(p[every, truth] / p.sum(axis=1))).sum() + 20 * sharpness**2)

    best = minimize_scalar(loss, bounds=(-1, 1), method="bounded", options={"xatol": 1e-10}).x
    found = fit_sharpness(told, truth, weights)
    assert found == pytest.approx(best if power != 1 else 0.0, abs=1e-6), "none where a nat is not saved"
    assert (loss(0.0) - loss(best) > 1) == (power != 1)
    p = told / (1 - told) ** best
    assert sharpened(told, best) == pytest.approx(p / p.sum(axis=1, keepdims=True), abs=1e-14)
    assert sharpened(told, 0.0) is told


def test_sharpening_keeps_certainty_finite_and_two_classes_alike() -> None:
    p = sharpened(np.array([[1.0, 0.0], [0.5, 0.5], [0.9, 0.1]]), 0.5)
    assert np.isfinite(p).all()
    assert p.sum(axis=1) == pytest.approx(1)
    assert p[1] == pytest.approx([0.5, 0.5])
    assert np.log(p[2, 0] / p[2, 1]) == pytest.approx(1.5 * np.log(9)), "of two classes it is a power"
