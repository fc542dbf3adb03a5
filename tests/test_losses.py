import json
from fractions import Fraction

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from sklearn.metrics import (
    accuracy_score,
    balanced_accuracy_score,
    brier_score_loss,
    confusion_matrix,
    log_loss,
    recall_score,
    roc_auc_score,
)

from bnx.errors import DataError
from bnx.losses import log_losses, scores


def predictions(rows: int, classes: int, seed: int, digits: int | None = None) -> tuple[np.ndarray, np.ndarray]:
    """Draw probabilities and truths; with ``digits`` few distinct probabilities, so that many rows tie."""
    draw = np.random.default_rng(seed)
    truth = draw.integers(0, classes, rows).astype(np.uint8)
    power = draw.normal(size=(rows, classes))
    power[np.arange(rows), truth] += 1
    if digits is not None:
        power = np.round(power, digits)
    p = np.exp(power)
    return p / p.sum(axis=1, keepdims=True), truth


@pytest.mark.parametrize("digits", [None, 0])
@pytest.mark.parametrize(("rows", "classes"), [(40, 2), (700, 2), (700, 3), (2000, 7)])
def test_scores_equal_scikit_learn(rows, classes, digits):
    p, truth = predictions(rows, classes, seed=rows + classes, digits=digits)
    found = scores(p, truth, classes)
    label = p.argmax(axis=1)
    ranked = p[:, 1] if classes == 2 else p
    assert found.log_loss == pytest.approx(log_loss(truth, p) / np.log(2), rel=1e-12)
    assert found.auc == pytest.approx(roc_auc_score(truth, ranked, multi_class="ovr"), abs=1e-12)
    assert found.accuracy == pytest.approx(accuracy_score(truth, label), abs=1e-15)
    assert found.balanced_accuracy == pytest.approx(balanced_accuracy_score(truth, label), abs=1e-15)
    assert found.recall == pytest.approx(recall_score(truth, label, average=None), abs=1e-15)
    assert np.array_equal(found.confusion, confusion_matrix(truth, label))
    if classes == 2:
        # scikit-learn's two-class Brier score is of one class, ours is summed over both
        assert found.brier == pytest.approx(2 * brier_score_loss(truth, p[:, 1]), rel=1e-12)


def test_brier_by_hand():
    p = np.array([[0.7, 0.2, 0.1], [0.1, 0.1, 0.8]])
    # (.09 + .04 + .01) and (.01 + .81 + .64), halved
    assert scores(p, np.array([0, 1]), 3).brier == pytest.approx((0.14 + 1.46) / 2, rel=1e-14)


def test_log_loss_in_bits_by_hand():
    p = np.array([[0.5, 0.5], [0.25, 0.75]])
    assert log_losses(p, np.array([1, 0])).tolist() == [1.0, 2.0]
    assert scores(p, np.array([1, 0]), 2).log_loss == 1.5


def test_probability_zero_at_the_truth_is_infinite_and_null_in_json():
    found = scores(np.array([[1.0, 0.0], [1.0, 0.0]]), np.array([0, 1]), 2)
    assert found.log_loss == np.inf
    assert found.to_dict()["log_loss"] is None
    assert found.brier == 1.0


def test_probability_one_by_rounding_costs_nothing():
    loss = log_losses(np.array([[1.0 + 2e-16, 0.0]]), np.array([0]))
    assert loss[0] == 0
    assert not np.signbit(loss[0])


def test_one_row():
    found = scores(np.array([[0.25, 0.75]]), np.array([1], dtype=np.uint8), 2)
    assert found.auc is None
    assert found.recall == (None, 1.0)
    assert found.balanced_accuracy == 1.0
    assert found.calibration_error == 0.25
    assert found.classwise_calibration_error == 0.25


def test_no_rows_is_refused():
    with pytest.raises(DataError, match=r"^there are 0 rows to score; at least 1 is needed$"):
        scores(np.empty((0, 2)), np.empty(0, dtype=np.int64), 2)


def test_absent_class_is_left_out_of_means():
    p, truth = predictions(300, 3, seed=5)
    truth[truth == 2] = 0
    found = scores(p, truth, 3)
    areas = [roc_auc_score(truth == k, p[:, k]) for k in (0, 1)]
    assert found.recall[2] is None
    assert found.balanced_accuracy == pytest.approx(np.mean(found.recall[:2]))
    assert found.auc == pytest.approx(np.mean(areas), abs=1e-12)


def test_equal_largest_probabilities_take_the_first_class():
    found = scores(np.array([[0.4, 0.4, 0.2], [0.2, 0.4, 0.4]]), np.array([1, 1]), 3)
    assert found.confusion == ((0, 0, 0), (1, 1, 0), (0, 0, 0))


def equal_count_error(score: np.ndarray, right: np.ndarray) -> float:
    """Calibration error by definition, for distinct scores and rows that 15 bins divide evenly."""
    order = np.argsort(score).reshape(15, -1)
    return float(np.mean([abs(score[part].mean() - right[part].mean()) for part in order]))


def test_calibration_errors_by_definition():
    p, truth = predictions(1500, 4, seed=2)
    found = scores(p, truth, 4)
    top = equal_count_error(p.max(axis=1), p.argmax(axis=1) == truth)
    by_class = [equal_count_error(p[:, k], truth == k) for k in range(4)]
    assert found.calibration_error == pytest.approx(top, rel=1e-12)
    assert found.classwise_calibration_error == pytest.approx(np.mean(by_class), rel=1e-12)


def test_few_rows_get_few_bins():
    p, truth = predictions(39, 2, seed=3)
    top = abs(p.max(axis=1).mean() - (p.argmax(axis=1) == truth).mean())
    assert scores(p, truth, 2).calibration_error == pytest.approx(top, rel=1e-12)


def test_rows_of_equal_score_share_a_bin():
    # 60 rows, 3 bins of 20: scores .6 (50 rows, 30 right) and .9 (10 rows, 9 right) are both perfectly calibrated;
    # any split of the 50 by their order would show an error
    p = np.array([[0.4, 0.6]] * 50 + [[0.1, 0.9]] * 10)
    truth = np.array([1] * 30 + [0] * 20 + [1] * 9 + [0])
    assert scores(p, truth, 2).calibration_error == pytest.approx(0, abs=1e-15)


@settings(deadline=None, max_examples=60)
@given(
    rows=st.integers(1, 200), classes=st.integers(2, 5), seed=st.integers(0, 10**6), digits=st.sampled_from([None, 0])
)
def test_order_of_rows_does_not_matter(rows, classes, seed, digits):
    p, truth = predictions(rows, classes, seed, digits)
    order = np.random.default_rng(seed).permutation(rows)
    first, second = scores(p, truth, classes), scores(p[order], truth[order], classes)
    assert first.log_loss == pytest.approx(second.log_loss, rel=1e-12)
    assert first.brier == pytest.approx(second.brier, rel=1e-12)
    for name in ("auc", "accuracy", "recall", "confusion", "calibration_error", "classwise_calibration_error"):
        assert getattr(first, name) == getattr(second, name)


@settings(deadline=None, max_examples=60)
@given(
    st.lists(st.tuples(st.integers(0, 8), st.integers(0, 1)), min_size=1, max_size=30),
)
def test_auc_is_the_share_of_pairs_in_order(pairs):
    second = np.array([numerator / 8 for numerator, _ in pairs])
    truth = np.array([code for _, code in pairs])
    hits, misses = second[truth == 1], second[truth == 0]
    found = scores(np.column_stack([1 - second, second]), truth, 2).auc
    if len(hits) == 0 or len(misses) == 0:
        assert found is None
    else:
        won = sum(Fraction(int(2 * (hit > miss) + (hit == miss)), 2) for hit in hits for miss in misses)
        assert found == float(won / (len(hits) * len(misses)))


@settings(deadline=None, max_examples=60)
@given(rows=st.integers(1, 100), classes=st.integers(2, 5), seed=st.integers(0, 10**6))
def test_figures_stay_in_their_ranges(rows, classes, seed):
    found = scores(*predictions(rows, classes, seed), classes)
    assert found.log_loss >= 0
    assert 0 <= found.brier <= 2
    assert 0 <= found.accuracy <= 1
    assert 0 <= found.balanced_accuracy <= 1
    assert 0 <= found.calibration_error <= 1
    assert 0 <= found.classwise_calibration_error <= 1
    assert sum(map(sum, found.confusion)) == rows


def test_dict_is_plain_json_with_level_names():
    p, truth = predictions(50, 2, seed=9)
    values = json.loads(json.dumps(scores(p, truth, 2).to_dict(["fresh", "spoilt"])))
    assert list(values) == [
        "log_loss",
        "brier",
        "accuracy",
        "balanced_accuracy",
        "auc",
        "recall",
        "confusion",
        "calibration_error",
        "classwise_calibration_error",
    ]
    assert list(values["recall"]) == ["fresh", "spoilt"]
    assert list(scores(p, truth, 2).to_dict()["recall"]) == ["0", "1"]
