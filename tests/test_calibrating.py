import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from scipy.optimize import minimize, minimize_scalar
from scipy.special import log_softmax
from statsmodels.api import Logit

from bnx.calibrating import apply, fit, identity, slope
from bnx.errors import DataError


def problem(rows: int, classes: int, seed: int, scale: float = 3.0, lift: float = 2.0):
    """Draw evidence that favours the true class by ``lift``, a prior per row, and truths."""
    draw = np.random.default_rng(seed)
    truth = draw.integers(0, classes, rows).astype(np.uint8)
    evidence = draw.normal(size=(rows, classes)) * scale
    evidence[np.arange(rows), truth] += lift
    log_prior = np.log(draw.dirichlet(np.full(classes, 5.0), size=rows))
    return evidence, log_prior, truth, np.full(classes, 1 / classes)


def penalised(point, evidence, log_prior, truth):
    """The objective as it is defined, without any of the code under test."""
    power = log_prior + np.exp(point[0]) * evidence + point[1:]
    own = log_softmax(power, axis=1)[np.arange(len(truth)), truth]
    return -own.mean() + (4 * point[0] ** 2 + 2 * np.square(point[1:]).sum()) / len(truth)


def point_of(calibration):
    return np.concatenate(([np.log(calibration.temperature)], calibration.offsets))


@pytest.mark.parametrize(("rows", "classes"), [(1, 2), (12, 3), (300, 2), (300, 5), (20000, 3)])
def test_fit_equals_a_general_minimiser(rows, classes):
    evidence, log_prior, truth, shares = problem(rows, classes, seed=rows)
    found = fit(evidence, log_prior, truth, shares)
    best = minimize(penalised, np.zeros(classes + 1), args=(evidence, log_prior, truth), options={"gtol": 1e-8})
    assert point_of(found) == pytest.approx(best.x, abs=1e-6 if rows <= 300 else 1e-5)
    assert penalised(point_of(found), evidence, log_prior, truth) <= best.fun + 1e-12


@settings(deadline=None, max_examples=60)
@given(
    rows=st.integers(1, 60),
    classes=st.integers(2, 5),
    seed=st.integers(0, 10**6),
    scale=st.sampled_from([1e-9, 1e-3, 1.0, 30.0, 1e4]),
    lift=st.sampled_from([-30.0, 0.0, 30.0]),
)
def test_any_data_gives_a_flat_finite_minimum(rows, classes, seed, scale, lift):
    evidence, log_prior, truth, shares = problem(rows, classes, seed, scale, lift * scale)
    found = fit(evidence, log_prior, truth, shares)
    point = point_of(found)
    value = penalised(point, evidence, log_prior, truth)
    assert np.isfinite(point).all()
    assert value <= penalised(np.zeros(classes + 1), evidence, log_prior, truth) + 1e-12
    for step in 1e-4 * np.vstack([np.eye(classes + 1), -np.eye(classes + 1)]):
        assert penalised(point + step, evidence, log_prior, truth) >= value - 1e-11 * (1 + value)
    p = apply(found, log_prior, evidence)
    assert p.sum(axis=1) == pytest.approx(1, abs=1e-12)
    assert (p > 0).all()


def test_separable_rows_stay_finite():
    evidence, log_prior, truth, shares = problem(50, 3, seed=1, scale=0.1, lift=20.0)
    found = fit(evidence, log_prior, truth, shares)
    assert found.temperature == pytest.approx(1.0, abs=0.05)
    assert np.abs(found.offsets).max() < 0.01


def test_no_evidence_leaves_the_temperature_alone():
    evidence, log_prior, truth, shares = problem(40, 3, seed=2)
    assert fit(np.zeros_like(evidence), log_prior, truth, shares).temperature == 1.0


def test_double_counted_evidence_is_halved():
    # independent fair evidence counted twice: the right temperature is one half
    draw = np.random.default_rng(3)
    truth = draw.integers(0, 2, 40000)
    odds = draw.normal(size=40000) + (truth - 0.5)
    evidence = 2 * np.column_stack([np.zeros(40000), odds])
    found = fit(evidence, np.log([0.5, 0.5]), truth, np.array([0.5, 0.5]))
    assert found.temperature == pytest.approx(0.5, abs=0.02)


def test_one_prior_for_all_rows_is_the_same_as_it_repeated():
    evidence, _, truth, shares = problem(30, 3, seed=4)
    log_prior = np.log([0.2, 0.3, 0.5])
    one = fit(evidence, log_prior, truth, shares)
    many = fit(evidence, np.tile(log_prior, (30, 1)), truth, shares)
    assert point_of(one).tolist() == point_of(many).tolist()


def test_class_absent_from_training_gets_the_share_of_the_floor_only():
    evidence, log_prior, truth, _ = problem(60, 3, seed=5)
    shares = np.array([0.5, 0.3, 0.2])
    log_prior[:20, 2] = -np.inf
    evidence[:20, 2] = np.nan  # no table, no evidence
    found = fit(evidence, log_prior, truth, shares)
    p = apply(found, log_prior, evidence)
    assert p[:20, 2] == pytest.approx(found.floor * 0.2, rel=1e-12)
    assert p.sum(axis=1) == pytest.approx(1, abs=1e-12)
    # such rows have no finite loss of their own: the fit is the one of the other rows, with their number in the penalty
    possible = np.isfinite(log_prior[np.arange(60), truth])
    alone = fit(evidence[possible], log_prior[possible], truth[possible], shares)
    assert point_of(found).tolist() == point_of(alone).tolist()
    # and only the highest floor makes the best of them
    assert found.floor == 3 / 60


def test_floor_has_the_least_loss_of_the_three():
    evidence, log_prior, truth, shares = problem(200, 3, seed=6, scale=4.0, lift=6.0)
    evidence[0, truth[0]] -= 60  # one row that costs tens of nats
    found = fit(evidence, log_prior, truth, shares)
    bare = log_softmax(log_prior + found.temperature * evidence + found.offsets, axis=1)
    own = np.exp(bare)[np.arange(200), truth]
    losses = {e: -np.log((1 - e) * own + e / 3).sum() for e in (0.5 / 200, 1 / 200, 3 / 200)}
    assert found.floor == min(losses, key=losses.__getitem__)
    mixed = (1 - found.floor) * np.exp(bare) + found.floor / 3
    assert apply(found, log_prior, evidence) == pytest.approx(mixed, rel=1e-12)


def test_one_row_cannot_have_a_floor_above_one():
    evidence, log_prior, truth, shares = problem(1, 2, seed=7, lift=-20.0)
    found = fit(evidence, log_prior, truth, shares)
    assert found.floor in (0.5, 1.0)


def test_identity_is_bayes_theorem():
    evidence, log_prior, _, _ = problem(20, 4, seed=8)
    joint = np.exp(log_prior + evidence)
    expected = joint / joint.sum(axis=1, keepdims=True)
    assert apply(identity(4), log_prior, evidence) == pytest.approx(expected, rel=1e-12)


def test_blocks_of_rows_do_not_show():
    # more rows than one pass takes; every row must come out as it does alone
    evidence, log_prior, truth, shares = problem(20000, 2, seed=9)
    found = fit(evidence, log_prior, truth, shares)
    p = apply(found, log_prior, evidence)
    for row in (0, 8191, 8192, 19999):
        alone = apply(found, log_prior[row : row + 1], evidence[row : row + 1])
        assert p[row] == pytest.approx(alone[0], rel=1e-14)


def test_no_rows_is_refused():
    with pytest.raises(DataError, match=r"^there are 0 rows to calibrate on; at least 1 is needed$"):
        fit(np.empty((0, 2)), np.log([0.5, 0.5]), np.empty(0, dtype=np.int64), np.array([0.5, 0.5]))


@pytest.mark.parametrize(("classes", "power"), [(2, 0.5), (2, 1.7), (4, 0.6), (4, 2.5)])
def test_slope_equals_a_bounded_search(classes, power):
    evidence, log_prior, truth, _ = problem(3000, classes, seed=10, scale=1.0, lift=1.0)
    p = apply(identity(classes), log_prior, power * evidence)
    logs = np.log(p)

    def loss(t):
        return -log_softmax(t * logs, axis=1)[np.arange(len(truth)), truth].mean()

    best = minimize_scalar(loss, bounds=(0, 100), method="bounded", options={"xatol": 1e-10})
    assert slope(p, truth) == pytest.approx(best.x, rel=1e-6)


def test_slope_of_two_classes_is_a_logistic_regression_on_the_log_odds():
    evidence, log_prior, truth, _ = problem(3000, 2, seed=11, scale=1.0, lift=1.0)
    p = apply(identity(2), log_prior, evidence)
    odds = np.log(p[:, 1] / p[:, 0])
    fitted = Logit(truth.astype(np.int64), odds[:, None]).fit(disp=0, tol=1e-12)
    assert slope(p, truth) == pytest.approx(fitted.params[0], rel=1e-8)


def test_slope_needs_ten_errors():
    truth = np.array([0] * 100 + [1] * 9)
    p = np.tile([0.9, 0.1], (109, 1))
    assert slope(p, truth) is None
    # the tenth error: 90.9 % right said with .9, so the slope is ln(10) / ln(9)
    assert slope(np.vstack([p, [[0.9, 0.1]]]), np.append(truth, 1)) == pytest.approx(np.log(10) / np.log(9), rel=1e-9)


def test_slope_is_bounded_where_certainty_is_wrong_or_evidence_points_the_wrong_way():
    truth = np.array([0] * 20)
    assert slope(np.tile([0.2, 0.8], (20, 1)), truth) == pytest.approx(0, abs=1e-9)
    certain = slope(np.tile([0.0, 1.0], (20, 1)), truth)
    assert certain == pytest.approx(0, abs=1e-9)
    timid = np.array([[0.5 + 1e-5, 0.5 - 1e-5]] * 1000 + [[0.5 - 1e-5, 0.5 + 1e-5]] * 10)
    assert slope(timid, np.zeros(1010, dtype=np.int64)) == pytest.approx(100, abs=1e-6)


def test_weights_count_rows_more_than_once() -> None:
    rng = np.random.default_rng(11)
    evidence, truth = rng.normal(0, 2, (300, 3)), rng.integers(0, 3, 300)
    weights = rng.integers(1, 4, 300)
    prior, shares = np.log(np.array([0.5, 0.3, 0.2])), np.array([0.5, 0.3, 0.2])
    weighed = fit(evidence, prior, truth, shares, weights.astype(float))
    repeated = fit(np.repeat(evidence, weights, axis=0), prior, np.repeat(truth, weights), shares)
    assert weighed.temperature == pytest.approx(repeated.temperature, rel=1e-9)
    assert weighed.offsets == pytest.approx(repeated.offsets, abs=1e-9)
    assert weighed.floor == repeated.floor
