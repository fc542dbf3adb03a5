"""What is chosen inside a training fold, by a second route: smoothing, calibration, cut points, pooled levels."""

import numpy as np
import pandas as pd
import pytest
from builders import compared, folds_of, predicted, rows_and_levels
from scipy.optimize import minimize

from bnx import sampling
from bnx.choosing import choose
from bnx.comparison import Comparison
from bnx.parameters import Smoothing


def tilted(
    rows: int = 300, noise: tuple[float, float, float] = (0.6, 0.25, 0.15), agree: float = 0.85, copies: int = 5
) -> pd.DataFrame:
    """Draw a small table in which naive Bayes counts one clue several times."""
    random = np.random.default_rng(23)
    target = random.choice(3, rows, p=[0.5, 0.3, 0.2])
    clue = (target + random.choice(3, rows, p=noise)) % 3
    columns = {
        f"copy{i}": np.where(random.random(rows) < agree, clue, random.integers(0, 3, rows)) for i in range(copies)
    }
    columns["other"] = (target + random.integers(0, 4, rows)) % 4
    return pd.DataFrame({name: [f"v{level}" for level in column] for name, column in columns.items()}).assign(
        kind=np.array(["p", "q", "r"])[target]
    )


def naive_terms(codes: np.ndarray, truth: np.ndarray, levels: list[int], rows: np.ndarray, s: float) -> np.ndarray:
    """Sum the log terms of naive Bayes: laplace 1 for s = 0, else back-off of s records; (rows, 3)."""
    total = np.zeros((len(rows), 3))
    for i, size in enumerate(levels):
        counts = np.array([np.bincount(codes[truth == c, i], minlength=size) for c in range(3)])
        marginal = (counts.sum(0) + 1) / (counts.sum() + size)
        own = counts.sum(1, keepdims=True)
        table = (counts + s * marginal) / (own + s) if s else (counts + 1) / (own + size)
        total += np.log(table)[:, rows[:, i]].T
    return total


def softmax(logs: np.ndarray) -> np.ndarray:
    weights = np.exp(logs - logs.max(axis=1, keepdims=True))
    return np.asarray(weights / weights.sum(axis=1, keepdims=True))


def nats(logs: np.ndarray, right: np.ndarray) -> float:
    return float(-np.log(softmax(logs)[np.arange(len(right)), right]).sum())


def inner_evidence(frame: pd.DataFrame, fold: np.ndarray, outer: int, s: float) -> list[tuple[np.ndarray, ...]]:
    """List (terms, log prior, truth) of every fold but the outer one, learnt without both."""
    codes, truth, levels = rows_and_levels(frame, "kind")
    parts = []
    for inner in sorted(set(range(5)) - {outer}):
        train, rows = (fold != outer) & (fold != inner), fold == inner
        prior = np.log(np.bincount(truth[train]) / train.sum())
        parts.append((naive_terms(codes[train], truth[train], levels, codes[rows], s), prior, truth[rows]))
    return parts


@pytest.mark.parametrize(
    ("shape", "kinds"),
    [
        ((300, (0.6, 0.25, 0.15), 0.85, 5), {"backoff:16,64"}),
        ((300, (0.9, 0.06, 0.04), 0.97, 1), {"laplace:1"}),
        ((300, (1.0, 0.0, 0.0), 0.9, 3), {"laplace:1"}),
    ],
    ids=str,
)
def test_smoothing_is_the_one_with_the_least_inner_loss(
    shape: tuple[int, tuple[float, float, float], float, int], kinds: set[str]
) -> None:
    """Every candidate is judged at its best of three temperatures, on folds inside the training fold only.

    Back-off must be ahead by 2 nats. Without edges, the strength given parents decides nothing.
    """
    frame = tilted(*shape)
    found = compared(frame, "kind", folds=5, structures=("naive", "tan"))
    one = found.evaluations[0]
    fold = folds_of(one)
    strengths = {"laplace:1": 0.0} | {"backoff:0.5": 0.5, "backoff:2": 2, "backoff:8": 8, "backoff:16,64": 16}
    chosen = []
    for outer in range(5):
        losses = {}
        for name, s in strengths.items():
            parts = inner_evidence(frame, fold, outer, s)
            losses[name] = min(
                sum(nats(prior + t * terms, right) for terms, prior, right in parts) for t in (1, 0.75, 0.5)
            ) + (2 if s else 0)
        chosen.append(str(one.choices[(outer,)].smoothings[0]))
        assert chosen[-1] == min(losses, key=lambda name: losses[name])
    assert set(chosen) == kinds


def test_calibration_is_fitted_on_inner_folds_and_applied_to_the_outer_one() -> None:
    """All of naive Bayes again: numpy for the evidence, scipy's minimiser for temperature and offsets."""
    frame = tilted()
    found = compared(frame, "kind", folds=5, smoothing="laplace:1")
    one = found.evaluations[0]
    fold, p = folds_of(one), predicted(found, 0)
    codes, truth, levels = rows_and_levels(frame, "kind")
    for outer in range(5):
        parts = inner_evidence(frame, fold, outer, 0.0)
        power = np.concatenate([terms for terms, _, _ in parts])
        prior = np.concatenate([np.tile(prior, (len(right), 1)) for _, prior, right in parts])
        right = np.concatenate([right for _, _, right in parts])

        def objective(point: np.ndarray, power: np.ndarray, prior: np.ndarray, right: np.ndarray) -> float:
            q = softmax(prior + np.exp(point[0]) * power + point[1:])
            penalty = 4 * point[0] ** 2 + 2 * (point[1:] ** 2).sum()
            return float((-np.log(q[np.arange(len(right)), right]).sum() + penalty) / len(right))

        best = minimize(objective, np.zeros(4), (power, prior, right), method="BFGS", options={"gtol": 1e-9}).x
        calibration = one.choices[(outer,)].calibrations[0]
        assert calibration.temperature == pytest.approx(np.exp(best[0]), rel=1e-4)
        assert calibration.temperature < 0.8
        assert calibration.offsets == pytest.approx(best[1:], abs=1e-4)
        shares = np.bincount(right, minlength=3) / len(right)
        assert calibration.shares == pytest.approx(shares, abs=1 / len(right))
        train, rows = fold != outer, fold == outer
        terms = naive_terms(codes[train], truth[train], levels, codes[rows], 0.0)
        q = softmax(np.log(np.bincount(truth[train]) / train.sum()) + np.exp(best[0]) * terms + best[1:])
        floor = calibration.floor
        assert floor * len(right) == pytest.approx(0.5) or floor * len(right) in (pytest.approx(1), pytest.approx(3))
        assert p[rows] == pytest.approx((1 - floor) * q + floor * calibration.shares, abs=1e-4)


def numbers_and_many_levels(rows: int = 400) -> pd.DataFrame:
    """Draw two numeric attributes, one with 40 levels and one plain one."""
    random = np.random.default_rng(31)
    target = random.integers(0, 2, rows)
    return pd.DataFrame(
        {
            "low": np.clip(random.integers(0, 40, rows) + 12 * target, 0, 49),
            "high": np.clip(random.integers(0, 45, rows) - 9 * target, 0, 44),
            "town": [f"t{number:02d}" for number in np.minimum(random.geometric(0.06, rows), 40)],
            "plain": np.where(random.random(rows) < 0.4 + 0.2 * target, "u", "v"),
            "kind": np.where(target == 1, "yes", "no"),
        }
    )


def model_without(comparison: Comparison, fold: int) -> tuple[object, ...]:
    """Everything that was learnt without a fold, as plain values."""
    choice = comparison.evaluations[0].choices[(fold,)]
    learned = choice.trial.learned[(fold,)]
    counts = [
        [choice.trial.counts[(fold,)].table(s, child).tolist() for child in range(len(structure.parents))]
        for s, structure in enumerate(learned.structures)
    ]
    fits = [(one.temperature, one.offsets.tolist(), one.floor, one.shares.tolist()) for one in choice.calibrations]
    return (
        choice.trial.bins,
        [(domain.levels, domain.cuts) for domain in learned.training.view.domains],
        [structure.parents for structure in learned.structures],
        counts,
        [str(smoothing) for smoothing in choice.smoothings],
        fits,
        choice.losses.tolist(),
    )


def test_a_fold_model_does_not_see_the_rows_it_is_judged_on() -> None:
    """Cut points, pooled levels, structures, tables, smoothing, calibration: none looks at the held-out rows."""
    frame = numbers_and_many_levels()
    settings = {"folds": 4, "structures": ("naive", "tan", "kdb1-tested"), "max_levels": 8, "categorical": ("town",)}
    before = compared(frame, "kind", **settings)
    held = folds_of(before.evaluations[0]) == 2
    changed = frame.copy()
    random = np.random.default_rng(1)
    for name in ("low", "high", "town", "plain"):
        pool = np.unique(frame[name])
        changed.loc[held, name] = random.choice(pool, held.sum())
        assert set(changed[name]) == set(frame[name])  # the same levels and fine bins, in other rows
    after = compared(changed, "kind", **settings)
    assert np.array_equal(folds_of(after.evaluations[0]), folds_of(before.evaluations[0]))
    assert model_without(after, 2) == model_without(before, 2)
    assert any(len(domain.cuts) for domain in before.evaluations[0].learned((2,)).training.view.domains)
    assert all(model_without(after, fold) != model_without(before, fold) for fold in (0, 1, 3))


def test_every_level_and_interval_comes_from_training_rows() -> None:
    """Pooled levels are those outside the most frequent of the training fold."""
    frame = numbers_and_many_levels()
    found = compared(frame, "kind", folds=4, max_levels=8, categorical=("town",), smoothing="laplace:1")
    fold = folds_of(found.evaluations[0])
    for held in range(4):
        town = found.evaluations[0].learned((held,)).training.view.domains[2]
        counts = frame["town"][fold != held].value_counts()
        kept = sorted(counts.index, key=lambda name: (-counts[name], name))[:8]
        assert town.levels == (*sorted(kept), "(other)")


def test_a_sample_stands_for_all_rows_of_every_fold_and_class(monkeypatch: pytest.MonkeyPatch) -> None:
    """At least so many rows of each fold and class, no row twice, and weights that add up to the rows stood for."""
    monkeypatch.setattr(sampling, "_ROWS_PER_CLASS_FOR_CHOICES", 20)
    monkeypatch.setattr(sampling, "_ROWS_PER_CLASS_FOR_GAINS", 30)
    monkeypatch.setattr(sampling, "_ROWS", 150)
    frame = tilted(1500)
    found = compared(frame, "kind", folds=5, structures=("naive", "tan"))
    one = found.evaluations[0]
    sample, engine = one.sample, one.engine
    assert any("a seeded sample by fold and class" in warning for warning in found.warnings)
    for least, drawn in ((20, sample), (30, sampling.sample_for_gains(engine, 5))):
        for fold, (rows,) in enumerate(one.fold_rows):
            for c in range(3):
                of_class = drawn.target[drawn.rows(fold)] == c
                there = int((engine.target[rows] == c).sum())
                assert of_class.sum() == max(least, -(-150 * there // 1500))
                assert drawn.weights[drawn.rows(fold)][of_class].sum() == pytest.approx(there)
    cells = {tuple(record) for record in np.vstack([engine.codes, engine.target]).T.tolist()}
    assert {tuple(record) for record in np.vstack([sample.codes, sample.target]).T.tolist()} <= cells
    whole = compared(frame, "kind", folds=5, structures=("naive", "tan"), smoothing="laplace:1", temperature=False)
    again = compared(frame, "kind", folds=5, structures=("naive", "tan"), smoothing="laplace:1", temperature=False)
    monkeypatch.undo()
    full = compared(frame, "kind", folds=5, structures=("naive", "tan"), smoothing="laplace:1", temperature=False)
    assert whole.results[1].pooled == again.results[1].pooled == full.results[1].pooled
    gains = np.array([[edge.gain for edge in run.edges[1]] for run in (whole, full)])
    assert 0 < np.abs(gains[0] - gains[1]).max() < 0.1


def test_a_smoothing_is_judged_at_its_best_temperature() -> None:
    one = compared(tilted(200, (0.6, 0.25, 0.15), 0.85, 5), "kind", folds=4).evaluations[0]
    options = (Smoothing("laplace", 1.0), Smoothing("backoff", 4.0))
    sums = np.array([[[10.0, 5.0, 9.0], [8.0, 7.0, 8.0]]])  # the second is better at temperature 1 only
    losses = {((fold,), fold): sums for fold in range(4)}
    chosen = choose((), 4, [one.choices[()].trial], [losses], options, one.sample, True, True, True)
    assert chosen.smoothings == (options[0],)
