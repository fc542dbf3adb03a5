"""Reliability before and after calibration: bins by definition, intervals, and figures made again by hand."""

from functools import cache

import numpy as np
import pandas as pd
import pytest
from builders import compared, folds_of, predicted
from hypothesis import given, settings
from hypothesis import strategies as st
from statsmodels.stats.proportion import proportion_confint

from bnx import rating
from bnx.before_after import Reliability, reliability_of
from bnx.comparison import Comparison
from bnx.kernels import pack_scores
from bnx.losses import Histograms, scores
from bnx.reliability import BinSums, Curve, curve_of, sums_of_histogram, sums_of_packed, sums_of_weighed, wilson
from bnx.weighed_losses import weighed_scores

ROWS = 900


@cache
def table() -> pd.DataFrame:
    """Draw attributes of which each copies the one before it, so that naive counts evidence over and over."""
    random = np.random.default_rng(4)
    target = random.choice(3, ROWS, p=[0.5, 0.3, 0.2])
    columns = [np.where(random.random(ROWS) < 0.5, target, random.integers(0, 3, ROWS))]
    for _ in range(4):
        columns.append(np.where(random.random(ROWS) < 0.15, random.integers(0, 3, ROWS), columns[-1]))
    frame = pd.DataFrame({f"x{i}": [f"v{level}" for level in column] for i, column in enumerate(columns)})
    frame["heavy"] = random.choice([0.5, 1.25, 3.5], ROWS)
    frame["kind"] = np.array(["p", "q", "r"])[target]
    return frame


@cache
def run(repeats: int = 1, temperature: bool = True, weight: str = "") -> Comparison:
    frame = table() if weight else table().drop(columns="heavy")
    names = ("naive", "tan")
    settings_ = {"repeats": repeats, "temperature": temperature, "weight": weight, "smoothing": "laplace:1"}
    return compared(frame, "kind", folds=5, structures=names, **settings_)


def truth_of(found: Comparison) -> np.ndarray:
    engine = found.evaluations[0].engine
    truth = np.empty(engine.rows, np.int64)
    truth[engine.order] = engine.target
    return truth


def by_definition(score: np.ndarray, hit: np.ndarray, mass: np.ndarray) -> list[tuple[float, float, float, float]]:
    """Bin rows by the middle of their group of equal scores: (mean score, share of hits, mass, effective rows)."""
    bins = min(15, max(1, len(score) // 20))
    places: dict[int, list[int]] = {}
    for value in np.unique(score):
        group = np.flatnonzero(score == value)
        middle = mass[score < value].sum() + mass[group].sum() / 2
        places.setdefault(min(int(middle * bins / mass.sum()), bins - 1), []).extend(group.tolist())
    found = []
    for place in sorted(places):
        own = places[place]
        whole = mass[own].sum()
        means = (mass[own] * score[own]).sum() / whole, (mass[own] * hit[own]).sum() / whole
        found.append((*means, whole, whole**2 / (mass[own] ** 2).sum()))
    return found


def check(curve: Curve, p: np.ndarray, truth: np.ndarray, mass: np.ndarray | None = None, repeats: int = 1) -> None:
    weights = np.ones(len(truth)) if mass is None else mass
    expected = by_definition(p.max(axis=1), p.argmax(axis=1) == truth, weights)
    found = [(one.mean, one.right, one.rows, one.effective_rows * repeats) for one in curve.bins]
    assert np.array(found) == pytest.approx(np.array(expected), rel=1e-9)
    for one in curve.bins:
        low, high = proportion_confint(one.right * one.effective_rows, one.effective_rows, method="wilson")
        assert one.interval == pytest.approx((low, high), abs=1e-12)
    own = np.minimum(p[np.arange(len(truth)), truth], 1)
    assert curve.log_loss == pytest.approx((weights * -np.log2(own)).sum() / weights.sum(), rel=1e-9)


def by_hand(found: Comparison, s: int) -> np.ndarray:
    """Give the plain posterior of every row by tables counted without its fold: Laplace 1, no calibration."""
    frame = table()
    evaluation = found.evaluations[0]
    codes = np.array([np.unique(frame[name], return_inverse=True)[1] for name in frame if name.startswith("x")])
    truth, fold = truth_of(found), folds_of(evaluation)
    p = np.empty((ROWS, 3))
    for k in range(5):
        own = fold != k
        classes = np.bincount(truth[own], minlength=3)
        log = np.tile(np.log(classes / classes.sum()), (ROWS, 1))
        for child, parents in enumerate(evaluation.learned((k,)).structures[s].parents):
            place = truth * 0
            for parent in parents:
                place = place * 3 + codes[parent]
            for c in range(3):
                counts = np.zeros((3 ** len(parents), 3))
                rows = own & (truth == c)
                np.add.at(counts, (place[rows], codes[child, rows]), 1)
                share = (counts + 1) / (counts.sum(axis=1, keepdims=True) + 3)
                log[:, c] += np.log(share[place, codes[child]])
        weights = np.exp(log - log.max(axis=1, keepdims=True))
        p[fold == k] = (weights / weights.sum(axis=1, keepdims=True))[fold == k]
    return p


def of(found: Comparison, s: int) -> Reliability:
    return reliability_of(found.evaluations, s, found.results[s].pooled, found.recipe.temperature)


@given(st.integers(0, 400), st.integers(1, 400))
def test_wilson_interval_is_that_of_statsmodels(hits: int, more: int) -> None:
    assert wilson(hits, hits + more) == pytest.approx(proportion_confint(hits, hits + more, method="wilson"), abs=1e-12)
    assert wilson(more, more)[1] == pytest.approx(1.0, abs=1e-15)
    assert wilson(0, more)[0] == pytest.approx(0.0, abs=1e-15)


def test_wilson_by_hand() -> None:
    # Wilson 1927 with z = 1.96: 8 of 10 give (.8 + .19208 +- 1.96 root(.016 + .0096040)) / 1.38416
    assert wilson(8, 10) == pytest.approx((0.4902, 0.9433), abs=5e-4)


@settings(deadline=None, max_examples=40)
@given(st.integers(1, 400), st.integers(2, 4), st.sampled_from([2, 8]), st.integers(0, 10**6))
def test_sums_by_bin_are_those_by_definition(rows: int, classes: int, digits: int, seed: int) -> None:
    random = np.random.default_rng(seed)
    p = np.round(random.dirichlet(np.ones(classes), rows), digits)
    truth, mass = random.integers(0, classes, rows).astype(np.uint8), random.choice([0.25, 1.0, 4.0], rows)
    packed = np.empty(rows, np.int64)
    pack_scores(p, 0, rows, truth, classes, packed)
    score, hit = p.max(axis=1), p.argmax(axis=1) == truth

    def same(sums: BinSums, weights: np.ndarray, error: float) -> None:
        curve = curve_of(sums, 1, 0.0)
        found = [(one.mean, one.right, one.rows, one.effective_rows) for one in curve.bins]
        assert np.array(found) == pytest.approx(np.array(by_definition(score, hit, weights)), rel=1e-9)
        assert curve.calibration_error == pytest.approx(error, abs=1e-12)

    same(sums_of_weighed(packed, mass), mass, weighed_scores(p, truth, mass).calibration_error)
    same(sums_of_packed(packed.copy()), np.ones(rows), scores(p, truth, classes).calibration_error)
    histograms = Histograms.empty(classes)
    histograms.add(p, truth)
    binned = curve_of(sums_of_histogram(histograms.counts[-1], histograms.sums[-1]), 1, 0.0)
    assert binned.calibration_error == pytest.approx(histograms.rankings()[-1].error, abs=1e-12)
    assert sum(one.rows for one in binned.bins) == rows


@pytest.mark.parametrize("s", [0, 1])
def test_before_is_the_plain_posterior_and_after_what_is_predicted(s: int) -> None:
    found = run()
    both = of(found, s)
    assert both.before is not None
    check(both.before, by_hand(found, s), truth_of(found))
    check(both.after, predicted(found, s), truth_of(found))
    assert both.after.calibration_error == found.results[s].pooled.calibration_error
    assert both.after.log_loss == found.results[s].pooled.log_loss


def test_calibration_of_a_naive_that_counts_twice_helps() -> None:
    both = of(run(), 0)
    assert both.before is not None
    assert both.before.calibration_error > 3 * both.after.calibration_error
    assert both.before.log_loss > both.after.log_loss + 0.1


def test_repeats_are_more_predictions_but_no_further_records() -> None:
    found = run(repeats=3)
    for curve in (of(found, 0).before, of(found, 0).after):
        assert curve is not None
        assert sum(one.rows for one in curve.bins) == 3 * ROWS
        assert sum(one.effective_rows for one in curve.bins) == pytest.approx(ROWS)
    assert of(found, 0).after.calibration_error == found.results[0].pooled.calibration_error


def test_rows_count_by_their_weights() -> None:
    found = run(weight="heavy")
    both, engine = of(found, 0), found.evaluations[0].engine
    assert engine.weighed is not None
    mass = np.empty(ROWS)
    mass[engine.order] = engine.weighed.of_rows
    check(both.after, predicted(found, 0), truth_of(found), mass)
    assert both.after.calibration_error == pytest.approx(found.results[0].pooled.calibration_error, abs=1e-15)
    assert both.before is not None
    assert sum(one.rows for one in both.before.bins) == pytest.approx(ROWS)
    assert sum(one.effective_rows for one in both.before.bins) < 0.9 * ROWS


def test_without_temperature_there_is_nothing_before() -> None:
    both = of(run(temperature=False), 0)
    assert both.before == both.after
    check(both.after, by_hand(run(temperature=False), 0), truth_of(run()))


def test_many_rows_come_from_histograms(monkeypatch: pytest.MonkeyPatch) -> None:
    exact = of(run(), 1)
    monkeypatch.setattr(rating, "EXACT_ROWS", 100)
    binned = of(run(), 1)
    results, _ = rating.score(run().evaluations, [[0] * 5])
    assert binned.after.calibration_error == results[1].pooled.calibration_error
    for one, other in ((exact.before, binned.before), (exact.after, binned.after)):
        assert one is not None
        assert other is not None
        assert other.log_loss == pytest.approx(one.log_loss, rel=1e-13)
        assert [bin_.mean for bin_ in other.bins] == pytest.approx([bin_.mean for bin_ in one.bins], abs=0.02)
        assert sum(bin_.rows for bin_ in other.bins) == ROWS


def test_a_probability_too_small_to_be_a_number_has_a_finite_loss() -> None:
    """Of 400 copies of one attribute the evidence against the true class is far beyond what a number can hold."""
    random = np.random.default_rng(1)
    target = random.integers(0, 2, 300)
    copied = np.where(random.random(300) < 0.02, 1 - target, target)
    frame = pd.DataFrame({f"x{i}": np.array(["a", "b"])[copied] for i in range(400)})
    frame["kind"] = np.array(["p", "q"])[target]
    found = compared(frame, "kind", folds=3, structures=("naive",), smoothing="laplace:1")
    both = of(found, 0)
    assert both.before is not None
    errors = (copied != target).mean()
    assert np.isfinite(both.before.log_loss)
    assert both.before.log_loss > 1000 * errors
    assert both.before.bins[-1].interval[1] < 1.0 or errors == 0


def test_those_who_are_shown() -> None:
    found = run()
    expected = {"naive", found.recipe.structures[found.recommendation.recommended]}
    if found.mix is not None and found.mix.offered:
        expected.add("mix")
        assert found.reliability["mix"].before is None
        assert found.reliability["mix"].after.calibration_error == found.mix.score.pooled.calibration_error
    assert set(found.reliability) == expected
    assert found.reliability["naive"] == of(found, 0)
