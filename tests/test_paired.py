import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from scipy import stats
from sklearn.datasets import make_moons
from sklearn.model_selection import RepeatedStratifiedKFold, cross_val_score
from sklearn.svm import SVC

from bnx.errors import DataError
from bnx.paired import bayesian_t, corrected_t, edge_verdict


@pytest.fixture(scope="module")
def areas() -> np.ndarray:
    """Differences in AUC of two kernels, the worked example of scikit-learn's documentation.

    Source: "Statistical comparison of models using grid search", scikit-learn's gallery: two half moons, 100 rows,
    10 times 10 folds, radial against linear kernel.
    """
    attributes, target = make_moons(noise=0.352, random_state=1, n_samples=100)
    folds = RepeatedStratifiedKFold(n_splits=10, n_repeats=10, random_state=0)
    radial, linear = (
        cross_val_score(SVC(kernel=kernel, random_state=0), attributes, target, scoring="roc_auc", cv=folds)
        for kernel in ("rbf", "linear")
    )
    return radial - linear


def test_corrected_t_of_the_worked_example(areas):
    found = corrected_t(areas, 10)
    reach = (found.high - found.low) / 2
    t = found.mean / reach * stats.t.ppf(0.975, 99)
    assert t == pytest.approx(0.750, abs=0.0005)  # printed
    assert found.p_value / 2 == pytest.approx(0.227, abs=0.0005)  # printed, one-sided
    # the uncorrected test, printed as 2.611 and .005 (one-sided), shows that the data are the same
    plain = stats.ttest_1samp(areas, 0, alternative="greater")
    assert (plain.statistic, plain.pvalue) == pytest.approx((2.611, 0.005), abs=0.0006)


def test_bayesian_t_of_the_worked_example(areas):
    # a higher AUC is better, so its loss is the negative; printed (from memory): .773 and .227 without a region;
    # .500, .432, .068 with a region of .01
    assert bayesian_t(-areas, 10, 0.0) == pytest.approx((0.773, 0.0, 0.227), abs=0.0005)
    assert bayesian_t(-areas, 10, 0.01) == pytest.approx((0.500, 0.432, 0.068), abs=0.0005)


differences = st.lists(st.floats(-2, 2).map(lambda x: round(x, 3)), min_size=4, max_size=40).map(np.array)


@settings(deadline=None)
@given(differences, st.integers(2, 20))
def test_corrected_t_by_definition(values, folds):
    found = corrected_t(values, folds)
    scale = np.sqrt(values.var(ddof=1) * (1 / len(values) + 1 / (folds - 1)))
    if np.ptp(values) == 0:
        assert (found.low, found.high) == (found.mean, found.mean)
        assert found.p_value == (1.0 if found.mean == 0 else 0.0)
        return
    known = stats.t(len(values) - 1, loc=found.mean, scale=scale)
    assert found.mean == pytest.approx(values.mean())
    assert (found.low, found.high) == pytest.approx(known.interval(0.95), rel=1e-9, abs=1e-12)
    assert found.p_value == pytest.approx(2 * stats.t.sf(abs(found.mean) / scale, len(values) - 1), rel=1e-9)


@settings(deadline=None)
@given(differences, st.integers(2, 20), st.floats(0, 0.5))
def test_bayesian_t_by_definition_and_by_symmetry(values, folds, region):
    found = bayesian_t(values, folds, region)
    assert sum(found) == pytest.approx(1, abs=1e-12)
    assert min(found) >= 0
    turned = bayesian_t(-values, folds, region)
    assert (turned.worse, turned.better) == pytest.approx((found.better, found.worse), abs=1e-12)
    if np.ptp(values) > 0:
        correlation = 1 / folds
        scale = np.sqrt(values.var(ddof=1) * (1 / len(values) + correlation / (1 - correlation)))
        known = stats.t(len(values) - 1, loc=values.mean(), scale=scale)
        assert found.better == pytest.approx(known.cdf(-region), abs=1e-9)
        assert found.worse == pytest.approx(known.sf(region), abs=1e-9)


@settings(deadline=None)
@given(differences, st.integers(2, 20))
def test_interval_and_p_agree(values, folds):
    found = corrected_t(values, folds)
    if found.p_value != pytest.approx(0.05, abs=1e-9):
        assert (found.p_value < 0.05) == (found.low > 0 or found.high < 0)


def test_no_variance_is_certain():
    assert corrected_t(np.zeros(10), 10) == (0, 0, 0, 1)
    assert corrected_t(np.full(10, 0.25), 10) == (0.25, 0.25, 0.25, 0)
    assert bayesian_t(np.zeros(10), 10, 0.0) == (0, 1, 0)
    assert bayesian_t(np.full(10, 0.01), 10, 0.02) == (0, 1, 0)
    assert bayesian_t(np.full(10, 0.03), 10, 0.02) == (0, 0, 1)
    assert bayesian_t(np.full(10, -0.03), 10, 0.02) == (1, 0, 0)


def test_no_variance_up_to_rounding():
    assert bayesian_t(np.array([0.1 + 0.2, 0.3] * 5), 10, 0.5) == (0, 1, 0)


@pytest.mark.parametrize(("values", "folds"), [([0.1], 10), ([0.1, 0.2], 1)])
def test_too_little_to_compare_is_refused(values, folds):
    with pytest.raises(
        DataError, match=f"^{len(values)} differences from {folds} folds cannot be compared; at least 2"
    ):
        corrected_t(np.array(values), folds)


@pytest.mark.parametrize(
    ("gains", "chosen_in", "verdict"),
    [
        ([0.05, 0.06, 0.04, 0.05, 0.05, 0.06, 0.04, 0.05, 0.05, 0.06], 10, "gains"),
        ([-0.05, -0.06, -0.04, -0.05, -0.05, -0.06, -0.04, -0.05, -0.05, -0.06], 10, "loses"),
        ([0.05, -0.06, 0.04, -0.05, 0.05, 0.06, -0.04, 0.05, 0.05, 0.06], 10, "undecided"),
        ([0.05] * 10, 5, "gains"),
        ([0.05] * 10, 4, "undecided"),  # chosen in fewer than half
        ([0.0] * 10, 10, "undecided"),
    ],
)
def test_edge_verdict(gains, chosen_in, verdict):
    assert edge_verdict(np.array(gains), chosen_in, 10) == verdict


def test_overlapping_training_sets_are_allowed_for():
    # the plain interval of these ten leaves 0 out, the corrected one does not
    gains = np.array([0.09, -0.02, 0.05, 0.06, -0.03, 0.08, 0.01, 0.06, 0.07, 0.00])
    assert stats.ttest_1samp(gains, 0).pvalue < 0.05
    assert edge_verdict(gains, 10, 10) == "undecided"
