"""Models that are no structures: scikit-learn called by hand on the exported folds gives the same figures."""

import json
import sys
from functools import cache
from pathlib import Path
from tempfile import mkdtemp
from typing import Any

import numpy as np
import pandas as pd
import pytest
from builders import compared, folds_of
from commandline import FAST, call, refusal
from jsonschema import Draft202012Validator
from sklearn.ensemble import HistGradientBoostingClassifier
from sklearn.linear_model import LogisticRegression
from sklearn.preprocessing import OneHotEncoder, OrdinalEncoder

from bnx import rating
from bnx.paired import Difference
from bnx.report import report_html
from bnx.yardstick import Yardstick
from bnx.yardstick_documents import yardstick_entries, yardstick_sentence
from bnx.yardstick_models import BOOSTING, LOGISTIC, Seen, seen_by

ATTRIBUTES = ["dock", "alarm", "lane", "rare"]
STRUCTURES = ("--structures", "naive,tan", "--keep", "all", "--yardstick", "--predictions")
SCHEMA = json.loads((Path(__file__).parent.parent / "docs/comparison.schema.json").read_text(encoding="utf-8"))


def table(rows: int = 320, seed: int = 8) -> pd.DataFrame:
    """Draw records; some cells are blank, one level of rare is of a single record."""
    random = np.random.default_rng(seed)
    grade = random.integers(0, 3, rows)
    dock = np.where(random.random(rows) < 0.5, grade, random.integers(0, 3, rows))
    alarm = np.where(random.random(rows) < 0.6, (grade + dock) % 3, random.integers(0, 3, rows))
    frame = pd.DataFrame({"dock": dock, "alarm": alarm, "lane": random.integers(0, 4, rows)}).astype(str)
    frame["lane"] = frame["lane"].where(random.random(rows) > 0.1, "")
    frame["rare"] = np.where(np.arange(rows) == 7, "once", np.where(random.random(rows) < 0.5, "a", "b"))
    frame["site"] = [f"s{number}" for number in random.integers(0, 12, rows)]
    frame["grade"] = np.array(["x", "y", "z"])[grade]
    return frame


@cache
def run(*more: str) -> tuple[pd.DataFrame, dict[str, Any], pd.DataFrame]:
    """Run the command: the table, comparison.json, and the folds that it wrote."""
    folder = Path(mkdtemp(prefix="bnx-yardstick-"))
    frame = table()
    frame.to_csv(folder / "table.csv", index=False)
    given = [str(folder / "table.csv"), "--class", "grade", *FAST, *STRUCTURES, "-o", str(folder / "out")]
    took = call("learn", *given, *more)
    assert took.code == 0, took
    document = json.loads((folder / "out/comparison.json").read_text(encoding="utf-8"))
    document["printed"] = took.out
    predictions = pd.read_parquet(folder / "out/predictions.parquet")
    return frame, document, predictions[predictions["structure"] == "naive"]


def logistic(train: pd.DataFrame, test: pd.DataFrame, truth: pd.Series, seed: int) -> tuple[np.ndarray, Any]:
    encoder = OneHotEncoder(handle_unknown="ignore").fit(train)
    model = LogisticRegression(C=1, max_iter=5_000).fit(encoder.transform(train), truth)
    return model.predict_proba(encoder.transform(test)), model.classes_


def boosting(train: pd.DataFrame, test: pd.DataFrame, truth: pd.Series, seed: int) -> tuple[np.ndarray, Any]:
    encoder = OrdinalEncoder(handle_unknown="use_encoded_value", unknown_value=np.nan).fit(train)
    model = HistGradientBoostingClassifier(
        l2_regularization=1, early_stopping=False, categorical_features=[True] * train.shape[1], random_state=seed
    ).fit(encoder.transform(train), truth)
    return model.predict_proba(encoder.transform(test)), model.classes_


def by_hand(frame: pd.DataFrame, folds: pd.DataFrame, columns: list[str], fit: Any) -> list[float]:
    """Fit without each fold, keep probabilities from 0 by half a record, take mean log losses in bits."""
    losses = []
    for _, own in folds.sort_values("row").groupby("repeat"):
        fold = own["fold"].to_numpy()
        for number in np.unique(fold):
            train, test = frame[fold != number], frame[fold == number]
            p, classes = fit(train[columns], test[columns], train["grade"], 1)
            counts = train["grade"].value_counts().reindex(classes).to_numpy()
            floor = 0.5 / len(train)
            mixed = (1 - floor) * p + floor * (counts + 1 / len(classes)) / (len(train) + 1)
            right = mixed[np.arange(len(test)), np.searchsorted(classes, test["grade"])]
            losses.append(float(-np.log2(right).mean()))
    return losses


@pytest.mark.parametrize(
    ("more", "columns"),
    [
        ((), [*ATTRIBUTES, "site"]),
        (("--repeats", "2"), [*ATTRIBUTES, "site"]),
        (("--group", "site"), ATTRIBUTES),
        (("--max-levels", "300", "--seed", "9"), [*ATTRIBUTES, "site"]),
    ],
)
def test_scikit_learn_by_hand_on_the_exported_folds(more: tuple[str, ...], columns: list[str]) -> None:
    frame, document, folds = run(*more)
    for name, fit in ((LOGISTIC, logistic), (BOOSTING, boosting)):
        found = next(one for one in document["yardsticks"] if one["name"] == name)
        losses = [one["log_loss"] for one in found["by_fold"]]
        assert losses == pytest.approx(by_hand(frame, folds, columns, fit), abs=2e-4)
        rows = [one["rows"] for one in found["by_fold"]]
        assert found["log_loss"] == pytest.approx(np.average(losses, weights=rows), abs=1e-12)
        assert rows == [one["rows"] for one in document["structures"][0]["by_fold"]]


def test_folds_that_are_given_and_a_class_that_training_lacks(tmp_path: Path) -> None:
    frame = table(240)
    frame["month"] = np.repeat(["m1", "m2", "m3"], 80)
    frame.loc[frame["month"] != "m3", "grade"] = "x"
    frame["grade"] = frame["grade"].replace("z", "y")
    frame.to_csv(tmp_path / "t.csv", index=False)
    took = call(
        "learn", str(tmp_path / "t.csv"), "--class", "grade", "--fold-column", "month", "--structures", "naive,tan",
        "--resamples", "0", "--yardstick", "--json", "-o", str(tmp_path / "out"),
    )  # fmt: skip
    assert took.code == 0, took
    document = json.loads(took.out)
    y = int((frame["grade"] == "y").sum())
    floor, share = 0.5 / 160, 0.5 / 161
    right = (1 - floor) + floor * (160.5 / 161)
    expected = -((80 - y) * np.log2(right) + y * np.log2(floor * share)) / 80
    for one in document["yardsticks"]:
        assert one["by_fold"][2]["log_loss"] == pytest.approx(expected, rel=1e-9)


def test_what_is_said_of_them() -> None:
    _, document, _ = run()
    assert [error.message for error in Draft202012Validator(SCHEMA).iter_errors(without_print(document))] == []
    picked = [next(one for one in document["structures"] if one["name"] == name) for name in picks(document)]
    honest = np.array([one["by_fold"][k]["log_loss"] for k, one in enumerate(picked)])
    for one in document["yardsticks"]:
        own = np.array([fold["log_loss"] for fold in one["by_fold"]])
        against, base = one["against_recommended"], document["structures"][0]["by_fold"]
        assert against["difference"] == pytest.approx((own - honest).mean(), abs=1e-12)
        assert against["interval"][0] < against["difference"] < against["interval"][1]
        assert one["against_baseline"]["difference"] == pytest.approx(
            (own - np.array([fold["log_loss"] for fold in base])).mean(), abs=1e-12
        )
        assert one["sentence"] in " ".join(document["printed"].split())
        line = next(line for line in document["printed"].splitlines() if line.startswith(f"  {one['name']} "))
        assert line.split()[2:6] == ["not", "a", "structure", f"{one['log_loss']:.3f}"]
    page = report_html(document, {})
    assert page.count("data-yardstick=") == 2
    assert all(one["sentence"].replace("'", "&#39;") in page for one in document["yardsticks"])
    names = [one["name"] for one in document["yardsticks"]]
    assert document["recommended"]["name"] not in names
    assert not {one["name"] for one in (document["mix"] or {"members": []})["members"]} & set(names)


def picks(document: dict[str, Any]) -> list[str]:
    return list(document["recommended"]["picks"])


def without_print(document: dict[str, Any]) -> dict[str, Any]:
    return {key: value for key, value in document.items() if key != "printed"}


@pytest.mark.parametrize(
    ("name", "apart", "words"),
    [
        (BOOSTING, (-0.02, -0.03, -0.01), "is better than the recommended structure by 0.020 bits per record [+0.010, "
         "+0.030]: that is what a model one can read costs here."),
        (BOOSTING, (-0.02, -0.05, 0.01), "[-0.010, +0.050], which can be chance: no cost of a model one can read is"),
        (BOOSTING, (0.02, 0.01, 0.03), "is worse than the recommended structure by 0.020 bits per record [+0.010, "
         "+0.030]: a model one can read costs nothing here."),
        (LOGISTIC, (-0.02, -0.03, -0.01), "is better than the recommended structure by 0.020 bits per record [+0.010, "
         "+0.030]."),
        (LOGISTIC, None, "cannot be compared with the recommended structure, as a log loss is infinite."),
    ],
)  # fmt: skip
def test_the_sentence(name: str, apart: tuple[float, float, float] | None, words: str) -> None:
    score = compared(table(), "grade", structures=("naive",), folds=3).results[0]
    one = Yardstick(name, score, None, Difference(*apart, 0.1) if apart else None, None, 0, ())
    assert yardstick_sentence(one).startswith(f"{name.capitalize()} ")
    assert words in yardstick_sentence(one)


@pytest.mark.parametrize("key", SCHEMA["$defs"]["yardstick"]["required"])
def test_a_yardstick_without_a_figure_is_refused_by_the_schema(key: str) -> None:
    document = json.loads(json.dumps(without_print(run()[1])))
    del document["yardsticks"][1][key]
    assert not Draft202012Validator(SCHEMA).is_valid(document)


def test_the_number_of_threads_changes_nothing() -> None:
    one, two = (compared(table(), "grade", jobs, structures=("naive",), folds=3, yardstick=True) for jobs in (1, 2))
    assert yardstick_entries(one) == yardstick_entries(two)
    assert compared(table(), "grade", structures=("naive",), folds=3).yardsticks == ()


def test_rows_too_many_to_be_kept_score_alike(monkeypatch: pytest.MonkeyPatch) -> None:
    kept = compared(table(), "grade", structures=("naive",), folds=3, yardstick=True).yardsticks
    monkeypatch.setattr(rating, "EXACT_ROWS", 100)
    for one, other in zip(
        kept, compared(table(), "grade", structures=("naive",), folds=3, yardstick=True).yardsticks, strict=True
    ):
        assert other.score.pooled.log_loss == pytest.approx(one.score.pooled.log_loss, rel=1e-12)
        assert other.score.pooled.confusion == one.score.pooled.confusion
        assert other.score.pooled.auc_within > one.score.pooled.auc_within == 0


def test_numbers_blanks_and_cells_not_observed() -> None:
    frame = table()
    random = np.random.default_rng(2)
    level = frame["grade"].map({"x": 0.0, "y": 1.0, "z": 2.0}) + random.normal(0, 0.3, len(frame))
    frame["load"] = level.round(2).where(random.random(len(frame)) > 0.1)
    for missing in ("level", "sum-out"):
        found = compared(frame, "grade", structures=("naive",), folds=3, missing=missing, yardstick=True)
        evaluation = found.evaluations[0]
        training, codes = evaluation.learned((0,)).training, evaluation.engine.codes
        seen, view = seen_by(training), training.view
        rows = [slice(0, 50), slice(60, 90)]
        own = np.concatenate([codes[:, run] for run in rows], axis=1)
        wide, numbers = seen.one_hot(codes, rows).toarray(), seen.numbers(codes, rows)
        starts = np.cumsum(view.sizes) - view.sizes
        for i, domain in enumerate(view.domains):
            level = view.recode[i][own[i]]
            unknown = np.zeros(80, bool) if view.unknown is None else view.unknown[i][own[i]]
            block = wide[:, starts[i] : starts[i] + view.sizes[i]]
            assert (block.sum(axis=1) == ~unknown).all()
            assert (block.argmax(axis=1)[~unknown] == level[~unknown]).all()
            blank = level == len(domain) - 1 if domain.numeric and domain.blank else np.zeros(80, bool)
            assert (np.isnan(numbers[:, i]) == (unknown | blank)).all()
            assert (numbers[:, i] == level)[~(unknown | blank)].all()
        assert seen.ordered.tolist() == [domain.numeric for domain in view.domains]
        assert all(one.score.pooled.log_loss < 1.0 for one in found.yardsticks), "load tells most of it"


def test_levels_beyond_what_boosting_takes_are_pooled_and_named() -> None:
    levels = np.arange(8)[None, :]
    codes = np.array([[0, 1, 1, 2, 3, 3, 3, 4, 6, 7, 7]])
    seen = Seen(np.where(levels == 6, -1, levels), np.array([8]), np.array([False]), np.array([-1]))
    narrow = seen.narrowed(codes, [slice(0, 11)], 4)
    assert narrow.levels.tolist() == [[3, 0, 3, 1, 3, 3, -1, 2]], "1, 3 and 7 are the most frequent"
    assert narrow.sizes.tolist() == [4]
    frame = table(900)
    frame["many"] = [f"v{number % 300}" for number in range(len(frame))]
    found = compared(frame, "grade", structures=("naive",), folds=3, max_levels=400, yardstick=True)
    assert found.yardsticks[1].pooled == ("many",)
    note = "gradient boosting takes at most 255 levels of an attribute; rarer ones are pooled for it: many"
    assert note in found.warnings
    assert found.yardsticks[0].pooled == ()


def test_without_scikit_learn_one_sentence_and_no_work(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    for name in ("sklearn", "sklearn.ensemble", "sklearn.linear_model"):
        monkeypatch.setitem(sys.modules, name, None)
    table().to_csv(tmp_path / "t.csv", index=False)
    given = [str(tmp_path / "t.csv"), "--class", "grade", *FAST, "--structures", "naive", "-o", str(tmp_path / "out")]
    assert refusal("learn", *given, "--yardstick") == (
        "--yardstick fits models of scikit-learn, which is not installed here; install bnx[yardstick], or leave the "
        "option out"
    )
    assert not (tmp_path / "out").exists()
    assert call("learn", *given).code == 0


def test_rows_count_as_they_weigh() -> None:
    """Scikit-learn with sample_weight on the same folds; weights are scaled to the mean 1 by the program."""
    frame = table(240).drop(columns="site")
    heavy = np.random.default_rng(2).choice([0.5, 1.25, 3.0], 240)
    found = compared(frame.assign(w=heavy), "grade", structures=("naive",), weight="w", yardstick=True, keep=("all",))
    fold, columns = folds_of(found.evaluations[0]), ATTRIBUTES
    weights = heavy / heavy.mean()
    total = 0.0
    for number in np.unique(fold):
        train, test = fold != number, fold == number
        encoder = OneHotEncoder(handle_unknown="ignore").fit(frame.loc[train, columns])
        model = LogisticRegression(C=1, max_iter=5_000)
        model.fit(encoder.transform(frame.loc[train, columns]), frame.loc[train, "grade"], sample_weight=weights[train])
        p = model.predict_proba(encoder.transform(frame.loc[test, columns]))
        mass = np.array([weights[train & (frame["grade"] == name)].sum() for name in model.classes_])
        floor = 0.5 / mass.sum()
        p = (1 - floor) * p + floor * (mass + 1 / 3) / (mass.sum() + 1)
        own = p[np.arange(len(p)), frame.loc[test, "grade"].map({"x": 0, "y": 1, "z": 2})]
        total -= (weights[test] * np.log2(own)).sum()
    assert found.yardsticks[0].score.pooled.log_loss == pytest.approx(total / weights.sum(), abs=2e-4)
