"""Another class prior: against the published formula and against resampled training rows."""

from dataclasses import replace
from pathlib import Path

import numpy as np
import pandas as pd
import pytest
from builders import classifier_from
from commandline import NAMES, call, refusal, small_results, small_rows, small_table, write

from bnx.calibrating import Calibration, identity
from bnx.classifier import Classifier
from bnx.errors import SettingError
from bnx.parameters import Smoothing
from bnx.rebasing import parse_prior, rebased
from bnx.structure import Structure

STRUCTURE = Structure("tan", ((), (0,), (1,)))
NEW = np.array([0.2, 0.7, 0.1])


def learnt(calibration: Calibration) -> tuple[Classifier, np.ndarray]:
    random = np.random.default_rng(6)
    target = random.choice(3, 300, p=[0.6, 0.3, 0.1])
    codes = np.array([(target + random.integers(0, 2, 300)) % 3 for _ in range(3)])
    return classifier_from(codes, target, STRUCTURE, Smoothing("laplace", 1.0), calibration, sizes=(3, 3, 3)), codes


def test_odds_move_by_the_ratio_of_the_priors() -> None:
    """Saerens, Latinne & Decaestecker 2002: p'(c|x) = p(c|x) p'(c) / p(c), made to sum to 1; at any temperature."""
    calibration = Calibration(0.7, np.array([0.1, -0.2, 0.1]), 0.0, np.full(3, 1 / 3))
    classifier, codes = learnt(calibration)
    old = classifier.class_counts / classifier.class_counts.sum()
    expected = classifier.probabilities(codes) * NEW / old
    expected /= expected.sum(axis=1, keepdims=True)
    assert rebased(classifier, NEW).probabilities(codes) == pytest.approx(expected, abs=1e-13)
    assert rebased(classifier, old).probabilities(codes) == pytest.approx(classifier.probabilities(codes), abs=1e-14)


def test_the_floor_and_a_record_of_blanks_follow_the_new_prior() -> None:
    calibration = Calibration(1.0, np.array([0.3, 0.0, -0.3]), 0.05, np.array([0.6, 0.3, 0.1]))
    classifier, codes = learnt(calibration)
    bare = replace(classifier, calibration=replace(calibration, floor=0.0))
    moved = rebased(classifier, NEW)
    expected = 0.95 * rebased(bare, NEW).probabilities(codes) + 0.05 * NEW
    assert moved.probabilities(codes) == pytest.approx(expected, abs=1e-14)
    assert moved.probabilities(np.full((3, 1), -1))[0] == pytest.approx(NEW, abs=1e-15)


def test_it_is_as_if_training_had_been_mixed_so() -> None:
    """Copies of whole classes change the prior and nothing else, but for smoothing, which is next to none here."""
    random = np.random.default_rng(1)
    target = random.choice(2, 400, p=[0.5, 0.5])
    codes = np.array([(target + (random.random(400) < 0.3)) % 2 for _ in range(3)])
    copies = np.repeat(np.arange(400), np.where(target == 1, 3, 1))
    smoothing = Smoothing("laplace", 1e-9)
    even = classifier_from(codes, target, STRUCTURE, smoothing, identity(2))
    uneven = classifier_from(codes[:, copies], target[copies], STRUCTURE, smoothing, identity(2))
    shares = np.bincount(target[copies]) / len(copies)
    assert rebased(even, shares).probabilities(codes) == pytest.approx(uneven.probabilities(codes), abs=1e-9)


def test_levels_may_hold_signs() -> None:
    levels = ("a,b", "c=d", "e f")
    assert parse_prior(["a,b=0.2, c=d=.3", "e f = 0.5"], levels).tolist() == [0.2, 0.3, 0.5]
    assert parse_prior(["x=.3333333,y=.3333333,z=.3333334"], ("x", "y", "z")).sum() == pytest.approx(1, abs=1e-15)


@pytest.mark.parametrize(
    ("text", "sentence"),
    [
        ("few=.5,many=.5", "--prior leaves out some; give every level of the class its share"),
        ("few=.5,many=.3,some=.3", "--prior: the shares sum to 1.1, not to 1; give shares of the whole"),
        ("few=.5,many=.2,most=.3", "--prior: 'most' is not a level of the class; known: few, many, some"),
        ("few=.5,few=.2,some=.3", "--prior names 'few' twice; give each level one share"),
        ("few=.5,many,some=.3", "--prior: 'many,some' is not a level of the class; did you mean some?"),
        ("few=half", "--prior: 'few=half' cannot be used; write LEVEL=P,... with P a number"),
        ("", "--prior: '' cannot be used; write LEVEL=P,... with P a number"),
        (
            "few=0,many=.5,some=.5",
            "--prior: the share of 'few' is 0; give a number above 0 and below 1: none is certain",
        ),
        (
            "few=nan,many=.5,some=.5",
            "--prior: the share of 'few' is nan; give a number above 0 and below 1: none is certain",
        ),
    ],
)
def test_what_is_no_prior(text: str, sentence: str) -> None:
    arguments = ("classify", f"{small_results()}/naive.json", small_table(), "-o", "-", "--prior", text)
    assert refusal(*arguments) == sentence


def test_a_class_without_training_rows_cannot_be_given_a_share() -> None:
    classifier, _ = learnt(identity(3))
    with pytest.raises(SettingError, match="training held no record of 2; nothing is known of it"):
        rebased(replace(classifier, class_counts=np.array([5, 5, 0])), NEW)


def test_the_output_says_what_it_is_based_on(tmp_path: Path) -> None:
    table = write(tmp_path / "new.csv", NAMES[:-1], [row[:-1] for row in small_rows(20, 3)])
    path, out = f"{small_results()}/kdb2.json", str(tmp_path / "out.csv")
    run = call("classify", path, table, "-o", out, "--prior", "few=.2,some=.1,many=.7")
    assert run.code == 0
    assert "note: probabilities are based on another class prior than that of training: few 0." in run.err
    assert " to 0.2, many 0." in run.err
    frame, plain = pd.read_csv(out), tmp_path / "plain.csv"
    assert call("classify", path, table, "-o", str(plain)).code == 0
    assert list(frame)[2:] == ["p:few", "p:many", "p:some", "prior:few", "prior:many", "prior:some"]
    assert (frame[["prior:few", "prior:many", "prior:some"]] == [0.2, 0.7, 0.1]).all(axis=None)
    before = pd.read_csv(plain)
    assert (frame["p:many"] > before["p:many"]).all()
