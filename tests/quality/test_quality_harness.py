"""The code behind docs/probabilities.md, on tables made by rule: figures, rivals, honesty, requirements, page."""

import dataclasses
import json
from functools import cache, partial
from pathlib import Path
from tempfile import TemporaryDirectory
from typing import Any

import numpy as np
import pandas as pd
import pytest
from opentables import TABLES, load
from quality import report
from quality.measuring import DisagreementError, measure_bnx, measure_rivals, read_rows, recipe_for, run
from quality.quality_page import page
from quality.requirements import Requirement, ratio, requirements
from quality.rival_models import BOOSTING, LOGISTIC, NAIVE, RIVALS, Coded, code, out_of_fold
from quality.scoring_rows import calibration_if_perfect, judged, nats, paired
from scipy import stats
from sklearn.metrics import accuracy_score, log_loss
from sklearn.model_selection import StratifiedKFold

from bnx.comparison import Comparison

STRUCTURES = ("naive", "tan", "kdb2-tested")


def made(seed: int = 1) -> pd.DataFrame:
    """Make a table: `second` follows `first`, `third` shows the class now and then, and numbers rise with it."""
    random = np.random.default_rng(seed)
    rows = 240
    kind = random.integers(0, 3, rows)
    first = np.where(random.random(rows) < 0.6, kind, random.integers(0, 3, rows))
    second = np.where(random.random(rows) < 0.8, first, random.integers(0, 3, rows))
    third = np.where(random.random(rows) < 0.5, kind, random.integers(0, 3, rows))
    frame = pd.DataFrame({"first": first, "second": second, "third": third, "kind": kind}).astype(str)
    frame.loc[random.random(rows) < 0.1, "third"] = None
    return frame.assign(size=np.round(kind + random.normal(0, 1, rows), 1), part=(np.arange(rows) % 5).astype(str))


@cache
def compared(seed: int = 1) -> Comparison:
    with TemporaryDirectory() as folder:
        frame = made(seed).drop(columns="part")
        return run(frame, recipe_for(frame, "kind", structures=STRUCTURES), Path(folder))


def test_figures_are_those_of_other_libraries() -> None:
    random = np.random.default_rng(3)
    p, truth = random.dirichlet([1, 1, 1], 500), random.integers(0, 3, 500)
    found = judged(p, truth)
    assert found["log_loss"] == pytest.approx(log_loss(truth, p))
    assert found["accuracy"] == pytest.approx(accuracy_score(truth, p.argmax(axis=1)))
    assert found["errors"] == round(500 * (1 - found["accuracy"]))
    own, other = nats(p, truth), nats(np.full((500, 3), 1 / 3), truth)
    mean, error = paired(own, other)
    assert mean / error == pytest.approx(stats.ttest_rel(own, other).statistic)


def test_what_chance_shows_under_perfect_calibration() -> None:
    """Equal probabilities share one bin, so the error is a binomial share's mean distance from its expectation."""
    share = stats.binom(400, 0.7)
    counts = np.arange(401)
    expected = float((np.abs(counts / 400 - 0.7) * share.pmf(counts)).sum())
    found = calibration_if_perfect(np.tile([0.3, 0.7], (400, 1)), draws=2000)
    assert found == pytest.approx(expected, rel=0.06)


# Computed once by other code from the same tables, on exactly these folds: log loss in nats.
REFERENCE = {
    "monk2": {NAIVE: 0.6426, LOGISTIC: 0.6428, BOOSTING: 0.3707},
    "iris": {NAIVE: 0.2042, LOGISTIC: 0.1998},
}


@pytest.mark.parametrize("table", REFERENCE)
def test_rivals_are_set_up_as_they_should_be(table: str) -> None:
    frame, target = load(table), TABLES[table].target
    truth = pd.factorize(frame[target], sort=True)[0]
    coded = code(frame.drop(columns=target))
    folds = np.zeros(len(frame), int)
    for fold, (_, test) in enumerate(StratifiedKFold(10, shuffle=True, random_state=0).split(coded.values, truth)):
        folds[test] = fold
    for name, loss in REFERENCE[table].items():
        found = float(nats(out_of_fold(coded, truth, folds, RIVALS[name]), truth).mean())
        assert found == pytest.approx(loss, abs=1e-3 if name == BOOSTING else 1e-4), name


def test_blanks_are_a_level_and_numbers_stay() -> None:
    coded = code(pd.DataFrame({"word": ["b", None, "a", "b"], "number": [1.5, np.nan, 3.0, 1.0]}))
    assert coded.values[:, 0].tolist() == [2, 0, 1, 2]
    assert coded.levels.tolist() == [3, 0]
    assert np.isnan(coded.values[1, 1])
    p = out_of_fold(coded, np.array([0, 1, 1, 0]), np.array([0, 0, 1, 1]), RIVALS[NAIVE])
    assert p.sum(axis=1) == pytest.approx(np.ones(4))


def test_nothing_has_seen_the_row_that_is_scored(tmp_path: Path) -> None:
    """Shuffle the classes within one given fold: whatever scores that fold's rows must not notice."""
    frame = made()
    part = frame["part"] == "2"
    shuffled = frame.copy()
    shuffled.loc[part, "kind"] = np.random.default_rng(1).permutation(frame.loc[part, "kind"])
    assert (shuffled["kind"] != frame["kind"]).sum() > 20
    recipe = recipe_for(frame.drop(columns="part"), "kind", structures=STRUCTURES, fold_column="part")
    before, after = (read_rows(run(one, recipe, tmp_path)) for one in (frame, shuffled))
    own = before.folds == 2
    assert (own == part).all()
    assert (before.honest[own] == after.honest[own]).all()
    assert (before.single[own] == after.single[own]).all()
    for name in (*STRUCTURES, "mix"):
        assert (before.p[name][own] == after.p[name][own]).all()
        assert (before.p[name][~own] != after.p[name][~own]).any()


def test_rows_are_in_the_order_of_the_table() -> None:
    frame, rows = made(), read_rows(compared())
    assert rows.lines.tolist() == list(range(len(frame)))
    assert rows.truth.tolist() == frame["kind"].astype(int).tolist()
    assert sorted(set(rows.folds)) == list(range(10))


def test_a_score_that_predictions_do_not_give_is_refused() -> None:
    honest = compared().recommendation.honest
    wrong = dataclasses.replace(honest, log_loss=honest.log_loss + 1e-6)
    advice = dataclasses.replace(compared().recommendation, honest=wrong)
    with pytest.raises(DisagreementError, match="honest log loss is reported as"):
        read_rows(dataclasses.replace(compared(), recommendation=advice))
    mix = compared().mix
    assert mix is not None
    wrong = dataclasses.replace(mix.honest, log_loss=mix.honest.log_loss + 1e-6)
    with pytest.raises(DisagreementError, match="honest log loss is reported as"):
        read_rows(dataclasses.replace(compared(), mix=dataclasses.replace(mix, honest=wrong)))


def test_rivals_are_measured_again_only_on_other_rows_or_folds(monkeypatch: pytest.MonkeyPatch) -> None:
    frame, rows = made().drop(columns="part"), read_rows(compared())
    calls: list[str] = []

    def counted(name: str, coded: Coded, truth: np.ndarray, train: np.ndarray, test: np.ndarray) -> np.ndarray:
        calls.append(name)
        return np.full((int(test.sum()), 3), 1 / 3)

    for name in RIVALS:
        monkeypatch.setitem(RIVALS, name, partial(counted, name))
    found = measure_rivals(frame, "kind", rows, {})
    assert found["models"][LOGISTIC]["log_loss"] == pytest.approx(np.log(3))
    assert len(calls) == 3 * 10
    assert measure_rivals(frame, "kind", rows, found) is found
    assert len(calls) == 3 * 10
    other = dataclasses.replace(rows, folds=(rows.folds + 1) % 10)
    assert measure_rivals(frame, "kind", other, found)["mark"] != found["mark"]


def score(loss: float, error: float = 0.01, slope: float = 1.0, wrong: int = 60) -> dict[str, Any]:
    figures = {"log_loss": loss, "accuracy": 0.9, "errors": wrong, "calibration_error": error}
    return figures | {"calibration_slope": slope, "least": 1e-4, "most": 0.999}


def figures_of(honest: float, naive: float, rival: float, **more: float) -> dict[str, Any]:
    bnx = {
        "rows": 1000,
        "attributes": 5,
        "classes": 2,
        "left_out": ["veil"],
        "recommended": "tan",
        "picks": {"naive": 4, "tan": 6},
        "honest": score(honest, **more) | {"calibration_if_perfect": 0.008},
        "single": score(honest * 1.1),
        "mix": score(honest) | {"offered": True, "weights": {"tan": 0.75, "naive": 0.25}},
        "against_naive": {"difference": honest - naive, "error": 0.01},
        "structures": {
            name: score(loss) | {"edges": 1, "smoothing": "backoff:2", "temperature": 0.6}
            for name, loss in (("naive", naive), ("tan", honest))
        },
        "seconds": 3.0,
    }
    return {"bnx": bnx, "rivals": {"models": {name: score(rival) for name in RIVALS}}}


def judged_by_text(figures: dict[str, Any]) -> dict[str, Requirement]:
    return {one.text: one for one in requirements(figures)}


def test_requirements_by_hand() -> None:
    figures = {"monk2": figures_of(0.19, 0.4, 0.39), "iris": figures_of(0.99, 0.9, 0.99, slope=0.8, error=0.02)}
    found = judged_by_text(figures)
    against = found["log loss to CategoricalNB, geometric mean"]
    assert against.measured == "0.707, median 0.750"  # ratios .5 and 1
    assert [against.met, found["log loss to gradient boosting, geometric mean"].met] == [False, True]
    mixed = [one for text, one in found.items() if text.startswith("log loss with the mix")]
    assert [one.measured for one in mixed] == ["0.912", "0.913"]
    assert all(one.met for one in mixed)
    assert found["log loss on monk2"].met
    assert "log loss on tic_tac_toe" not in found
    naive = [one for text, one in found.items() if text.startswith("tables worse than naive")]
    assert [one.failing for one in naive] == [("iris",), ("iris",), ("iris",)]
    assert [one.met for one in naive] == [False, True, False]
    calibration = next(one for text, one in found.items() if text.startswith("calibration error"))
    assert (calibration.measured, calibration.failing) == ("50%", ("iris",))
    slopes = found["calibration slope on tables with at least 50 errors"]
    assert (slopes.measured, slopes.failing) == ("0.80 to 1.00", ("iris",))
    sure = {"iris": figures_of(0.5, 0.5, 0.5)}
    sure["iris"]["bnx"]["structures"]["tan"]["most"] = 1.0
    assert [one.met for one in requirements(sure)][-1] is False


def test_ratios_add_a_hundredth() -> None:
    assert ratio(0.04, 0.09) == pytest.approx(0.5)


def test_the_page_shows_every_table() -> None:
    text = page({"monk2": figures_of(0.19, 0.4, 0.39), "iris": figures_of(0.99, 0.9, 0.99)})
    assert "## What is required (2 tables)" in text
    assert "| monk2 | 0.500 | 0.500 | 0.500 |" in text
    assert "| **geometric mean** | **0.707** | **0.707** | **0.707** |" in text
    assert "| iris | **0.9000** | 0.9900 | 0.9900 | 1.0890 | 0.9900 | tan | naive 4, tan 6 |" in text
    assert "| .75 tan + .25 naive | veil |" in text
    assert all(len(line) <= 120 or line.startswith("|") for line in text.splitlines())


def test_figures_are_stored_and_resumed(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    done: list[str] = []

    def measured(name: str, folder: Path, seed: int) -> None:
        done.append(name)
        assert seed == 1
        (folder / f"{name}.json").write_text(json.dumps(figures_of(0.2, 0.3, 0.4)), encoding="utf-8")

    monkeypatch.setattr(report, "measure", measured)
    for more in (["--tables", "iris"], ["--tables", "monk1,iris", "--resume"], ["--tables", "none"]):
        monkeypatch.setattr("sys.argv", ["report.py", *more, "--folder", str(tmp_path)])
        report.main()
    assert done == ["iris", "monk1"]
    monkeypatch.setattr("sys.argv", ["report.py", "--tables", "iris", "--seed", "2"])
    with pytest.raises(SystemExit):
        report.main()
    assert "| monk1 |" in (tmp_path / "probabilities.md").read_text(encoding="utf-8")


def test_one_table_is_measured_from_end_to_end(tmp_path: Path) -> None:
    frame = made().drop(columns="part")
    recipe = recipe_for(frame, "kind", structures=STRUCTURES, folds=5)
    own, rows = measure_bnx(frame, recipe, tmp_path)
    assert json.loads(json.dumps(own)) == own
    assert own["settings"]["folds"] == 5
    assert own["settings"]["numeric"] == ("size",) or own["settings"]["numeric"] == ["size"]
    assert sum(own["picks"].values()) == 5
    assert own["honest"]["log_loss"] < np.log(3)
    assert own["honest"]["log_loss"] == pytest.approx(log_loss(rows.truth, rows.honest))
    assert own["against_naive"]["difference"] == pytest.approx(
        own["honest"]["log_loss"] - own["structures"]["naive"]["log_loss"]
    )
    assert 0 < own["honest"]["calibration_if_perfect"] < 0.2
