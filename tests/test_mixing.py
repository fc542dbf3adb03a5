"""Weights of a mix: against a grid, on the simplex, from nothing that is scored; the same everywhere it is used."""

import json
from dataclasses import replace
from functools import cache
from itertools import pairwise, product

import numpy as np
import pandas as pd
import pytest
from builders import compared, folds_of, predicted
from jsonschema import Draft202012Validator
from scipy.optimize import minimize
from test_schemas import DOCS

from bnx import mixing, rating
from bnx.choosing import choose
from bnx.comparison import Comparison
from bnx.documents import comparison_document, predictions_table, structure_document
from bnx.formats.mix_json import mixed_of
from bnx.losses import log_losses, scores
from bnx.mix_documents import mix_document
from bnx.mix_judging import judge_mix
from bnx.mixed_classifier import MixedClassifier, mix_words
from bnx.mixing import Mix, fit_mix, members_of, mixed
from bnx.picking import chances_of
from bnx.recipe import Recipe
from bnx.sharpening import sharpened
from bnx.simplex import least_on_simplex
from bnx.structure import Structure

STARTS = np.array([0, 60, 120, 200])


def experts(number: int, seed: int, rows: int = 200) -> tuple[list[np.ndarray], np.ndarray]:
    """Draw noisy views (rows, 3) of one posterior, and classes from it."""
    random = np.random.default_rng(seed)
    power = random.normal(0, 1.5, (rows, 3))
    truth = np.array([random.choice(3, p=row) for row in softmax(power)])
    return [softmax(power + random.normal(0, 0.8 + 0.4 * k, (rows, 3))) for k in range(number)], truth


def softmax(power: np.ndarray) -> np.ndarray:
    weight = np.exp(power - power.max(axis=1, keepdims=True))
    return np.asarray(weight / weight.sum(axis=1, keepdims=True))


def fitted(p: list[np.ndarray], truth: np.ndarray, weights: np.ndarray | None = None, single: int = 0) -> Mix:
    mass = np.ones(len(truth)) if weights is None else weights
    return fit_mix(p, range(len(p)), shapes(len(p)), single, truth, mass, STARTS, fold_losses(p[single], truth), None)


def shapes(number: int) -> list[Structure]:
    """Name a structure without edges, and others that have one."""
    return [Structure(f"s{k}", ((), (0,)) if k else ((), ())) for k in range(number)]


def drawn_to(p: list[np.ndarray], truth: np.ndarray, weights: np.ndarray) -> np.ndarray:
    """Weights that the fit is drawn to, from their definition."""
    nats = np.array(
        [(weights * log_losses(one, truth)).sum() * np.log(2) + (20 if k else 0) for k, one in enumerate(p)]
    )
    falling = np.exp(-(nats - nats.min()) / 10)
    return np.asarray(falling / falling.sum())


def fold_losses(p: np.ndarray, truth: np.ndarray) -> np.ndarray:
    return np.array([log_losses(p, truth)[a:b].mean() for a, b in pairwise(STARTS)])


def objective(p: list[np.ndarray], truth: np.ndarray, weights: np.ndarray, own: np.ndarray) -> float:
    """Total log loss in nats and its penalty, from the definition."""
    power = sum(w * np.log(one) for w, one in zip(own, p, strict=True))
    losses = np.log(np.exp(power).sum(axis=1)) - np.asarray(power)[np.arange(len(truth)), truth]
    return float((weights * losses).sum() + 20 * np.square(own - drawn_to(p, truth, weights)).sum())


def test_a_mix_is_the_weighed_geometric_mean() -> None:
    p = [np.array([[0.8, 0.2]]), np.array([[0.5, 0.5]])]
    assert mixed(p, (0.5, 0.5)) == pytest.approx(np.array([[2, 1]]) / 3)
    assert mixed(p, (1.0, 0.0)) == pytest.approx(p[0])
    assert (mixed([np.array([[1.0, 0.0]])] * 2, (0.5, 0.5)) > 0).all(), "a probability of 0 does not stay one"


@pytest.mark.parametrize("seed", range(4))
def test_weights_are_those_of_a_grid(seed: int) -> None:
    p, truth = experts(3, seed)
    weights = np.random.default_rng(seed).uniform(0.5, 3, len(truth))
    found = fitted(p, truth, weights).weights
    grid = [np.array([a, b, 100 - a - b]) / 100 for a, b in product(range(101), repeat=2) if a + b <= 100]
    best = min(grid, key=lambda own: objective(p, truth, weights, own))
    assert found == pytest.approx(best, abs=0.011)
    assert objective(p, truth, weights, found) <= objective(p, truth, weights, best) + 1e-3


@pytest.mark.parametrize("seed", range(4))
def test_weights_lie_on_the_simplex_and_are_those_of_a_general_optimiser(seed: int) -> None:
    p, truth = experts(6, 10 + seed)
    found = fitted(p, truth).weights
    assert (found >= 0).all()
    assert found.sum() == pytest.approx(1, abs=1e-12)
    assert not ((found > 0) & (found < 0.01)).any()
    one = np.ones(len(truth))
    other = minimize(
        lambda own: objective(p, truth, one, own),
        np.full(6, 1 / 6),
        method="SLSQP",
        bounds=[(0, 1)] * 6,
        constraints=[{"type": "eq", "fun": lambda own: own.sum() - 1}],
        options={"ftol": 1e-12, "maxiter": 500},
    ).x
    kept = np.where(other >= 0.01, other, 0)
    assert found == pytest.approx(kept / kept.sum(), abs=2e-4)


def test_identical_members_share_their_weight() -> None:
    p, truth = experts(2, 3)
    three = fitted([*p, p[1]], truth).weights
    assert three[1] == pytest.approx(three[2], abs=1e-6)
    alone = fitted([p[0]] * 3, truth)
    assert alone.weights == pytest.approx(drawn_to([p[0]] * 3, truth, np.ones(200)), abs=1e-6)
    same = fold_losses(p[0], truth)
    assert alone.losses == pytest.approx(same, abs=1e-9), "the same posterior, whatever the weights"


def test_structures_far_behind_leave_the_mix_and_edges_need_a_lead() -> None:
    p, truth = experts(2, 3)
    sure = np.eye(3)[truth] * 0.98 + 0.005
    assert fitted([p[0], sure], truth).weights == pytest.approx([0, 1], abs=0.02)
    start = drawn_to([p[0], p[0]], truth, np.ones(200))
    assert start == pytest.approx([1 / (1 + np.exp(-2)), 1 / (1 + np.exp(2))])


def test_losses_of_a_fold_come_from_weights_without_it() -> None:
    p, truth = experts(3, 5)
    found = fitted(p, truth)
    for k, (first, last) in enumerate(pairwise(STARTS)):
        outside = np.r_[0:first, last : len(truth)]
        own = minimize(
            lambda own, rows=outside: objective([one[rows] for one in p], truth[rows], np.ones(len(rows)), own),
            np.full(3, 1 / 3),
            method="SLSQP",
            bounds=[(0, 1)] * 3,
            constraints=[{"type": "eq", "fun": lambda own: own.sum() - 1}],
            options={"ftol": 1e-12},
        ).x
        part = slice(first, last)
        assert found.losses[k] == pytest.approx(
            log_losses(mixed([one[part] for one in p], own), truth[part]).mean(), abs=2e-3
        ), "one step of Newton's is within a few thousandths of a bit of the whole way"


def test_folds_without_rows_change_nothing() -> None:
    p, truth = experts(3, 6)
    usual, own = fitted(p, truth), fold_losses(p[0], truth)
    starts = np.array([0, 0, 60, 120, 200, 200])
    other = fit_mix(p, range(3), shapes(3), 0, truth, np.ones(200), starts, np.array([0, *own, 0]), None)
    assert other.weights.tolist() == usual.weights.tolist()
    assert other.losses.tolist() == [0, *usual.losses.tolist(), 0]


def test_many_rows_begin_with_a_guess_and_end_at_the_same_place(monkeypatch: pytest.MonkeyPatch) -> None:
    p, truth = experts(4, 7)
    usual = fitted(p, truth).weights
    monkeypatch.setattr(mixing, "_FEW", 20)
    assert fitted(p, truth).weights == pytest.approx(usual, abs=1e-4)


def test_the_best_point_of_a_quadratic_is_found_whatever_is_bound() -> None:
    random = np.random.default_rng(8)
    for _ in range(200):
        size = int(random.integers(1, 7))
        root = random.normal(size=(size, size))
        curve, pull = root @ root.T + 0.01 * np.eye(size), random.normal(0, 3, size)
        found = least_on_simplex(curve, pull, np.full(size, 1 / size))
        assert (found >= 0).all()
        assert found.sum() == pytest.approx(1)
        slope = curve @ found - pull
        assert slope[found > 0] == pytest.approx(slope.min(), abs=1e-7), "nothing can be shifted to gain"


def test_members_differ_in_more_than_their_name() -> None:
    a, b = ((), (0,)), ((), ())
    structures = [Structure("tan", a), Structure("naive", b), Structure("kdb1", a)]
    assert members_of(structures, 1) == [0, 1]
    assert members_of(structures, 2) == [1, 2], "the one taken alone stands for its like"


def test_weights_in_words() -> None:
    assert mix_words(("kdb2", "tan"), (0.62, 0.38)) == ".62 kdb2 + .38 tan"
    assert mix_words(("tan",), (1.0,)) == "1.00 tan"


@cache
def run(mix: bool = True, repeats: int = 1, structures: tuple[str, ...] = ("naive", "tan", "kdb2")) -> Comparison:
    return compared(table(), "kind", folds=5, repeats=repeats, structures=structures, mix=mix, resamples=0)


def table() -> pd.DataFrame:
    random = np.random.default_rng(4)
    target = random.choice(3, 500, p=[0.5, 0.3, 0.2])
    columns = [random.integers(0, 3, 500)]
    for noise in (0.5, 0.6, 0.8, 0.9):
        columns.append(np.where(random.random(500) < noise, random.integers(0, 3, 500), (columns[-1] + target) % 3))
    frame = pd.DataFrame({f"x{i}": [f"v{level}" for level in column] for i, column in enumerate(columns)})
    return frame.assign(kind=np.array(["p", "q", "r"])[target])


def test_a_run_scores_its_mix_as_rows_say() -> None:
    found = run()
    assert found.mix is not None
    one = found.evaluations[0]
    fold = folds_of(one)
    truth = np.empty(one.engine.rows, np.int64)
    truth[one.engine.order] = one.engine.target
    p = np.empty((500, 3))
    for k in range(5):
        mix = one.choices[(k,)].mix
        assert mix is not None
        together = mixed([predicted(found, s) for s in range(3)], mix.weights.tolist())
        own = sharpened(together, mix.sharpness, np.bincount(truth[fold != k]) / (fold != k).sum())
        p[fold == k] = own[fold == k]
    assert predicted(found, 3) == pytest.approx(p, abs=1e-14)
    expected = scores(p, truth, 3)
    assert found.mix.score.pooled.log_loss == pytest.approx(expected.log_loss, rel=1e-12)
    assert found.mix.score.pooled.auc == pytest.approx(expected.auc, abs=1e-15)
    allowed = np.stack([predicted(found, s) for s in range(4)])[np.array(found.mix.picks)[fold], np.arange(500)]
    assert found.mix.honest.log_loss == pytest.approx(log_losses(allowed, truth).mean(), rel=1e-12)
    single = np.array([found.results[s].by_fold[k].scores.log_loss for k, s in enumerate(found.recommendation.picks)])
    assert found.mix.apart is not None
    assert found.mix.apart.mean == pytest.approx((found.mix.score.fold_losses - single).mean(), rel=1e-12)
    assert found.mix.offered == (found.mix.apart.mean < 0 and len(found.mix.members) > 1)


def test_classes_of_a_held_out_fold_change_no_weight_there() -> None:
    one = run().evaluations[0]
    random, sample, moved = np.random.default_rng(1), one.sample, []
    for fold in range(5):
        target = sample.target.copy()
        rows = sample.rows(fold)
        target[rows] = random.permutation(target[rows])
        changed = replace(sample, target=target)
        trial = one.choices[(fold,)].trial
        smoothing = one.choices[(fold,)].smoothings[:1]
        before, after = (
            choose((fold,), 5, [trial], [], smoothing, each, True, True, True).mix for each in (sample, changed)
        )
        assert before is not None
        assert after is not None
        assert before.weights.tolist() == after.weights.tolist()
        elsewhere = choose(((fold + 1) % 5,), 5, [trial], [], smoothing, changed, True, True, True).mix
        assert elsewhere is not None
        moved.append(elsewhere.weights.tolist() != before.weights.tolist())
    assert any(moved)


def test_threads_change_no_byte() -> None:
    found = run()
    again = compared(table(), "kind", 2, folds=5, structures=("naive", "tan", "kdb2"), resamples=0)
    texts = [json.dumps(comparison_document(one)["mix"]) for one in (found, again)]
    assert texts[0] == texts[1]


def test_large_tables_are_mixed_a_few_rows_at_a_time(monkeypatch: pytest.MonkeyPatch) -> None:
    found = run(repeats=2)
    assert found.mix is not None
    monkeypatch.setattr(rating, "EXACT_ROWS", 100)
    monkeypatch.setattr(rating, "_BLOCK", 50)
    picks = list(found.recommendation.picks)
    results, honest = rating.score(found.evaluations, (picks, found.mix.picks))
    streamed = judge_mix(found.evaluations, results, picks, (found.mix.picks, honest[1]), 0, 5)
    assert streamed is not None
    assert streamed.score.pooled.log_loss == pytest.approx(found.mix.score.pooled.log_loss, rel=1e-12)
    assert streamed.honest.log_loss == pytest.approx(found.mix.honest.log_loss, rel=1e-12)
    assert streamed.score.pooled.confusion == found.mix.score.pooled.confusion
    assert streamed.offered == found.mix.offered


def test_nothing_is_mixed_without_the_setting_or_of_one_structure() -> None:
    for none in (run(mix=False), run(structures=("naive",))):
        assert none.mix is None
        assert comparison_document(none)["mix"] is None
    with_mix, without = run(), run(mix=False)
    assert with_mix.results == without.results, "structures are judged as they are without a mix"
    assert with_mix.against == without.against
    assert Recipe("kind").mix


def test_predictions_hold_the_mix_last() -> None:
    frame = predictions_table(run()).to_pandas()
    assert frame["structure"].unique().tolist() == ["naive", "tan", "kdb2", "mix"]
    p = frame.loc[frame["structure"] == "mix", ["p:p", "p:q", "p:r"]].to_numpy()
    assert p == pytest.approx(predicted(run(), 3), abs=1e-15)


def test_the_file_of_a_mix_classifies_as_the_run_does() -> None:
    found = run()
    assert found.mix is not None
    structures = [structure_document(found, s) for s in range(3)]
    document = json.loads(json.dumps(mix_document(found, structures), allow_nan=False))
    schema = json.loads((DOCS / "mix.schema.json").read_text(encoding="utf-8"))
    assert [error.message for error in Draft202012Validator(schema).iter_errors(document)] == []
    codes = np.random.default_rng(2).integers(-1, 3, (5, 100))
    chosen, weights = found.mix.members, tuple(found.mix.members.values())
    own = MixedClassifier(tuple(found.classifiers[s] for s in chosen), weights, found.mix.sharpness)
    assert mixed_of(document, "mix.json").probabilities(codes).tolist() == own.probabilities(codes).tolist()
    together = mixed([found.classifiers[s].probabilities(codes) for s in chosen], weights)
    by_hand = sharpened(together, own.sharpness, own.class_counts / own.class_counts.sum())
    assert own.probabilities(codes).tolist() == by_hand.tolist()
    blank, prior = np.full((5, 1), -1), np.array([0.2, 0.3, 0.5])
    sharp = replace(own, sharpness=0.8)
    assert sharp.probabilities(blank)[0] == pytest.approx(own.class_counts / own.class_counts.sum(), abs=1e-12)
    assert sharp.rebased(prior).probabilities(blank)[0] == pytest.approx(prior, abs=1e-12)


def test_naive_bayes_is_left_for_good_reason_only() -> None:
    """Where the single structure has no edges the mix must be ahead; where it has some it must not be behind."""
    p, truth = experts(2, 9)
    usual = fold_losses(p[0], truth)
    chance = chances_of(fitted(p, truth).losses, usual, 3, 0.0).better
    assert 0.1 < chance < 0.95
    plain, drawn = shapes(2)
    taken = [
        fit_mix(p, range(2), order, 0, truth, np.ones(200), STARTS, usual, None).taken
        for order in ([plain] * 2, [drawn] * 2)
    ]
    assert taken == [False, True]
