"""What single attributes say of a record out of fold: by counts made by hand, and against a classifier of the fold."""

import json
from functools import cache
from pathlib import Path
from typing import Any

import numpy as np
import pandas as pd
import pytest
from builders import compared, folds_of, predicted
from commandline import call
from hypothesis import given
from hypothesis import strategies as st
from test_disagreement import run, table
from test_kdb_chosen import planted

from bnx.classifier import Classifier
from bnx.comparison import Comparison
from bnx.plain import finite
from bnx.record_entries import records_entry
from bnx.weight_of_evidence import Told, split

BITS = st.floats(-30, 30)


@given(BITS, BITS)
def test_what_the_parents_change_is_split_into_two(naive: float, structure: float) -> None:
    twice, adds = split(naive, structure)
    assert structure == pytest.approx(naive - twice + adds, abs=1e-12)
    assert abs(twice) <= abs(naive) + 1e-12
    assert twice * naive >= 0
    same = np.sign(naive) == np.sign(structure)
    if same and abs(structure) <= abs(naive):
        assert adds == 0.0
    if same and abs(structure) >= abs(naive):
        assert twice == 0.0
    if naive * structure < 0:
        assert (twice, adds) == (0.0, structure - naive)


@pytest.mark.parametrize(
    ("naive", "structure", "twice", "adds"),
    [
        (2.0, 0.5, 1.5, 0.0),
        (2.0, 3.0, 0.0, 1.0),
        (2.0, -0.5, 0.0, -2.5),
        (2.0, 0.0, 2.0, 0.0),
        (0.0, 2.0, 0.0, 2.0),
        (-2.0, -0.5, -1.5, 0.0),
        (-1.0, 1.0, 0.0, 2.0),
    ],
)
def test_the_split_by_hand(naive: float, structure: float, twice: float, adds: float) -> None:
    assert split(naive, structure) == (twice, adds)


def told(found: Comparison) -> tuple[Told, ...]:
    assert found.records is not None
    assert found.records.told
    return found.records.told


def by_hand(found: Comparison, one: Told, attribute: int, parents: tuple[int, ...]) -> float:
    """Count the rows of the other folds: log2 P(level | parents, chosen) / P(level | parents, other), Laplace 1."""
    frame, fold = table(), folds_of(found.evaluations[0])
    own = frame[fold != one.pick.fold]
    names = [f"x{i}" for i in range(5)]
    here = frame.loc[one.pick.row]
    for parent in parents:
        own = own[own[names[parent]] == here[names[parent]]]
    shares = []
    for c in (one.chosen, one.other):
        rows = own[own["kind"] == "pqr"[c]]
        shares.append(((rows[names[attribute]] == here[names[attribute]]).sum() + 1) / (len(rows) + 3))
    return float(np.log2(shares[0] / shares[1]))


def test_evidence_is_that_of_tables_counted_by_hand_without_the_fold() -> None:
    found = run(smoothing="laplace:1", temperature=False)
    frame, fold = table(), folds_of(found.evaluations[0])
    with_parents = 0
    for one in told(found):
        structure = found.evaluations[0].learned((one.pick.fold,)).structures[1]
        own = frame[fold != one.pick.fold]["kind"]
        prior = np.log2((own == "pqr"[one.chosen]).sum() / (own == "pqr"[one.other]).sum())
        assert one.prior == pytest.approx(prior, abs=1e-12)
        assert sorted(line.attribute for line in one.lines) == list(range(5))
        for line in one.lines:
            assert line.level == frame.loc[one.pick.row, f"x{line.attribute}"]
            assert line.parents == structure.parents[line.attribute]
            assert line.naive == pytest.approx(by_hand(found, one, line.attribute, ()), abs=1e-9)
            assert line.structure == pytest.approx(by_hand(found, one, line.attribute, line.parents), abs=1e-9)
            with_parents += bool(line.parents)
            if not line.parents:
                assert (line.twice, line.adds) == (0.0, pytest.approx(0.0, abs=1e-9))
        p = [predicted(found, s)[one.pick.row] for s in (0, 1)]
        odds = [np.log2(side[one.chosen] / side[one.other]) for side in p]
        assert [one.naive.log_odds, one.structure.log_odds] == pytest.approx(odds, abs=1e-9)
    assert with_parents > 20


def classifier_of(found: Comparison, fold: int, s: int) -> Classifier:
    """Build the classifier of the training rows of one fold."""
    evaluation = found.evaluations[0]
    choice = evaluation.choices[(fold,)]
    learned, counted = evaluation.learned((fold,)), choice.trial.counts[(fold,)]
    structure = learned.structures[s]
    counts = tuple(counted.table(s, child) for child in range(len(structure.parents)))
    domains, prior = learned.training.view.domains, learned.training.class_mass
    target = found.classifiers[0].target
    return Classifier(domains, target, structure, counts, prior, choice.smoothings[s], choice.calibrations[s])


def codes_of(found: Comparison, one: Told) -> np.ndarray:
    """Give the codes (n, 1) of a record as the fold's training rows see them, -1 for what is unknown."""
    evaluation = found.evaluations[0]
    view, stored = evaluation.learned((one.pick.fold,)).training.view, evaluation.engine.codes[:, one.pick.place]
    every = np.arange(len(stored))
    unknown = np.zeros(len(stored), bool) if view.unknown is None else view.unknown[every, stored]
    return np.where(unknown, -1, view.recode[every, stored])[:, None]


@pytest.mark.parametrize(
    "more",
    [{}, {"missing": "sum-out"}, {"weight": "heavy"}, {"repeats": 2}, {"structures": ("naive", "kdb3")}],
    ids=str,
)
def test_sums_and_probabilities_are_those_of_a_classifier_of_the_fold(more: dict[str, Any]) -> None:
    found, hidden = run(**more), 0
    for one in told(found):
        codes, ends = codes_of(found, one), [one.chosen, one.other]
        for s, side in enumerate((one.naive, one.structure)):
            classifier = classifier_of(found, one.pick.fold, s)
            p, _ = classifier.classified(codes)
            assert side.probabilities == pytest.approx(p[0], abs=1e-12)
            whole, _ = classifier.evidence(codes)
            apart = (whole[0, ends[0]] - whole[0, ends[1]]) / np.log(2)
            assert side.log_odds == pytest.approx(one.prior + apart, abs=1e-9)
            terms = {line.attribute: (line.naive, line.structure)[s] for line in one.lines}
            for child, bits in terms.items():
                if bits is not None:
                    own = classifier.terms(codes, child)[0]
                    assert bits == pytest.approx((own[ends[0]] - own[ends[1]]) / np.log(2), abs=1e-9)
            listed = sum(bits for bits in terms.values() if bits is not None)
            assert one.prior + listed + side.summed_out == pytest.approx(side.log_odds, abs=1e-9)
        hidden += sum(line.structure is None for line in one.lines)
        assert one.naive.summed_out == pytest.approx(0.0, abs=1e-9)
    assert (hidden > 0) == (more.get("missing") == "sum-out")


def test_calibration_leads_from_the_log_odds_to_the_probabilities_given_out() -> None:
    found = run()
    classes = np.array([(table()["kind"] == level).sum() for level in "pqr"])
    for one in told(found):
        training = found.evaluations[0].learned((one.pick.fold,)).training.class_mass
        for s, side in enumerate((one.naive, one.structure)):
            shares = found.evaluations[0].choices[(one.pick.fold,)].calibrations[s].shares
            bare = [
                (side.probabilities[c] - side.floor * shares[c]) / (1 - side.floor) for c in (one.chosen, one.other)
            ]
            odds = one.prior + side.temperature * (side.log_odds - one.prior) + side.offset
            assert np.log2(bare[0] / bare[1]) == pytest.approx(odds, abs=1e-6)
        assert training.sum() < classes.sum()


def test_classes_compared_are_those_that_the_two_hold_most_probable() -> None:
    same = 0
    for one in told(run(records=40)):
        p, q = one.naive.probabilities, one.structure.probabilities
        assert one.chosen == p.argmax()
        if p.argmax() != q.argmax():
            assert one.other == q.argmax()
        else:
            same += 1
            others = [c for c in range(3) if c != one.chosen]
            assert one.other == max(others, key=lambda c: p[c] + q[c])
    assert 0 < same < 40


@cache
def wide() -> Comparison:
    named = {"structures": ("naive", "tan"), "ignore": ("site", "heavy"), "smoothing": "laplace:1"}
    return compared(table(400, 17), "kind", folds=4, **named)


def test_many_attributes_are_listed_by_evidence_and_the_others_summed_up() -> None:
    for one in told(wide()):
        assert len(one.lines) == 12
        assert one.rest.attributes == 5
        classifiers = [classifier_of(wide(), one.pick.fold, s) for s in (0, 1)]
        codes = codes_of(wide(), one)
        every = []
        for classifier in classifiers:
            terms = [classifier.terms(codes, child)[0] for child in range(17)]
            every.append([(own[one.chosen] - own[one.other]) / np.log(2) for own in terms])
        listed = {line.attribute for line in one.lines}
        size = [max(abs(a), abs(b)) for a, b in zip(*every, strict=True)]
        assert min(size[i] for i in listed) >= max(size[i] for i in range(17) if i not in listed) - 1e-12
        apart = [abs(line.naive - (line.structure or 0.0)) for line in one.lines]
        assert apart == sorted(apart, reverse=True)
        others = [i for i in range(17) if i not in listed]
        assert one.rest.naive == pytest.approx(sum(every[0][i] for i in others), abs=1e-9)
        assert one.rest.structure == pytest.approx(sum(every[1][i] for i in others), abs=1e-9)
        assert one.rest.structure == pytest.approx(one.rest.naive - one.rest.twice + one.rest.adds, abs=1e-9)


def test_attributes_that_a_structure_leaves_out_say_nothing_and_are_not_counted_twice() -> None:
    found = compared(planted(300, noise=2), "kind", folds=4, structures=("naive", "kdb-trimmed"))
    out = 0
    for one in told(found):
        dropped = found.evaluations[0].learned((one.pick.fold,)).structures[1].dropped
        for line in one.lines:
            assert line.left_out == (line.attribute in dropped)
            if line.left_out:
                out += 1
                assert (line.structure, line.twice, line.adds) == (0.0, 0.0, -line.naive)
    assert out > 0


def test_the_document_names_what_is_numbered() -> None:
    found = run()
    entry = records_entry(found)
    assert entry is not None
    assert (entry["structure"], entry["asked"]) == ("tan", 12)
    for row, one in zip(entry["rows"], told(found), strict=True):
        assert row["truth"] == "pqr"[one.truth] == table().loc[row["line"], "kind"]
        assert (row["for"], row["against"]) == ("pqr"[one.chosen], "pqr"[one.other])
        assert sum(row["alike"].values()) == one.alike.sum()
        for line, own in zip(row["attributes"], one.lines, strict=True):
            assert line["name"] == f"x{own.attribute}"
            assert line["parents"] == [f"x{parent}" for parent in own.parents]


def test_a_class_without_training_rows_is_none_of_the_two_told_of() -> None:
    """Fold f3 holds all records of one class, so that what predicts it never saw the class."""
    random, rows = np.random.default_rng(2), 240
    fold = np.arange(rows) % 4
    target = np.where((fold == 3) & (random.random(rows) < 0.3), 2, random.integers(0, 2, rows))
    first = np.where(random.random(rows) < 0.6, target, random.integers(0, 3, rows))
    columns = {"fold": fold, "a": first}
    for name in "bcd":
        columns[name] = np.where(random.random(rows) < 0.8, first, random.integers(0, 3, rows))
    frame = pd.DataFrame(columns).astype(str).assign(kind=np.array(["p", "q", "rare"])[target])
    found = compared(frame, "kind", folds=4, structures=("naive", "tan"), fold_column="fold", records=100)
    entry = finite(records_entry(found))
    own = [row for row in entry["rows"] if row["fold"] == 3]
    assert len(own) > 5
    assert any(row["truth"] == "rare" for row in own)
    for row in own:
        assert {row["for"], row["against"]} == {"p", "q"}
        assert 0 < row["probabilities"]["naive"][2] < 0.05
        assert row["prior_bits"] is not None


def test_files_tell_of_as_many_records_as_asked_for_by_any_number_of_threads(tmp_path: Path) -> None:
    table().drop(columns=["site", "heavy"]).to_csv(tmp_path / "t.csv", index=False)
    given_ = ("learn", str(tmp_path / "t.csv"), "--class", "kind", "--structures", "naive,tan", "--resamples", "0")
    found = {}
    for name, options in {"none": ("--records", "0"), "one": ("--records", "5"), "three": ("--records", "5")}.items():
        jobs = "3" if name == "three" else "1"
        done = call(*given_, "--folds", "4", "--jobs", jobs, "-o", str(tmp_path / name), "--quiet", *options)
        assert done.code == 0, done.err
        found[name] = json.loads((tmp_path / name / "comparison.json").read_text(encoding="utf-8"))
        page = (tmp_path / name / "report.html").read_text(encoding="utf-8")
        assert page.count('<details class="record"') == (0 if name == "none" else 5)
    assert found["none"]["records"] is None
    assert len(found["one"]["records"]["rows"]) == 5
    assert found["one"]["records"] == found["three"]["records"]


def test_lines_are_those_of_the_predictions_where_rows_are_left_out(tmp_path: Path) -> None:
    frame = table(blanks=0.05).drop(columns=["site", "heavy"])
    frame.to_csv(tmp_path / "t.csv", index=False)
    out = tmp_path / "out"
    given_ = ("learn", str(tmp_path / "t.csv"), "--class", "kind", "--structures", "naive,tan", "--resamples", "0")
    done = call(*given_, "--missing", "drop", "--folds", "4", "--predictions", "-o", str(out), "--quiet")
    assert done.code == 0, done.err
    rows = json.loads((out / "comparison.json").read_text(encoding="utf-8"))["records"]["rows"]
    said = pd.read_parquet(out / "predictions.parquet").set_index(["structure", "row"])
    assert max(row["line"] for row in rows) > len(frame.dropna())
    for row in rows:
        for side, name in (("naive", "naive"), ("structure", "tan")):
            own = said.loc[name, row["line"]]
            assert [own[f"p:{level}"] for level in "pqr"] == pytest.approx(row["probabilities"][side], abs=1e-12)
            assert (own["truth"], own["fold"]) == (row["truth"], row["fold"])
