"""Posteriors against full enumeration, a second library and published examples."""

from itertools import product

import numpy as np
import pytest
from builders import classifier_from
from sklearn.naive_bayes import CategoricalNB

from bnx.calibrating import Calibration, identity
from bnx.classifier import Classifier
from bnx.parameters import Smoothing
from bnx.structure import Structure

SIZES = (2, 3, 2, 3)
STRUCTURES = (
    Structure("naive", ((), (), (), ())),
    Structure("tan", ((), (0,), (1,), (1,))),
    Structure("kdb2", ((), (0,), (1, 0), (2, 0))),
    Structure("kdb3", ((3,), (3, 0), (0, 1, 3), ())),
)

# Mitchell 1997, Machine Learning, table 3.2: fourteen days; outlook, temperature, humidity, wind, tennis.
TENNIS = """
sunny hot high weak no/sunny hot high strong no/overcast hot high weak yes/rain mild high weak yes/
rain cool normal weak yes/rain cool normal strong no/overcast cool normal strong yes/sunny mild high weak no/
sunny cool normal weak yes/rain mild normal weak yes/sunny mild normal strong yes/overcast mild high strong yes/
overcast hot normal weak yes/rain mild high strong no
"""


def drawn(rows: int, seed: int, classes: int = 3) -> tuple[np.ndarray, np.ndarray]:
    """Draw codes (4, rows) that depend on the class and on each other, and the class."""
    random = np.random.default_rng(seed)
    target = random.integers(0, classes, rows)
    codes = [(target + random.integers(0, 2, rows)) % SIZES[0]]
    for size in SIZES[1:]:
        codes.append((codes[-1] * target + random.integers(0, size, rows)) % size)
    return np.array(codes), target


def enumerated(classifier: Classifier) -> np.ndarray:
    """Find P(class | record) for every record from the joint of class and all four attributes, (2, 3, 2, 3, C)."""
    prior = classifier.class_counts / classifier.class_counts.sum()
    tables = [classifier.table(child) for child in range(4)]
    joint = np.zeros((*SIZES, len(prior)))
    for cell in product(*map(range, SIZES), range(len(prior))):
        levels, c = cell[:-1], cell[-1]
        p = prior[c]
        for child, parents in enumerate(classifier.structure.parents):
            p *= tables[child][(c, *(levels[parent] for parent in parents), levels[child])]
        joint[cell] = p
    assert joint.sum() == pytest.approx(1.0, abs=1e-12)
    return joint / joint.sum(axis=-1, keepdims=True)


def every_record() -> np.ndarray:
    """List all 36 records, (4, 36)."""
    return np.array(list(product(*map(range, SIZES)))).T


@pytest.mark.parametrize("structure", STRUCTURES, ids=lambda structure: structure.name)
@pytest.mark.parametrize("smoothing", [Smoothing("laplace", 1.0), Smoothing("backoff", 2.0)], ids=str)
def test_posterior_equals_full_enumeration(structure: Structure, smoothing: Smoothing) -> None:
    codes, target = drawn(120, seed=1)
    classifier = classifier_from(codes, target, structure, smoothing, identity(3), sizes=SIZES, classes=3)
    found = classifier.probabilities(every_record())
    assert found == pytest.approx(enumerated(classifier).reshape(-1, 3), abs=1e-13)


@pytest.mark.parametrize("structure", STRUCTURES, ids=lambda structure: structure.name)
def test_temperature_offsets_and_floor_follow_their_definition(structure: Structure) -> None:
    """Log posterior = log prior + t x sum of log table terms + b_c; then p := (1 - e) p + e x shares."""
    codes, target = drawn(120, seed=2)
    calibration = Calibration(0.6, np.array([0.2, -0.3, 0.1]), 0.03, np.array([0.2, 0.3, 0.5]))
    plain = classifier_from(codes, target, structure, Smoothing("backoff", 1.0), identity(3), sizes=SIZES, classes=3)
    tempered = classifier_from(codes, target, structure, plain.smoothing, calibration, sizes=SIZES, classes=3)
    prior = np.log(np.bincount(target) / len(target))
    logs = np.log(enumerated(plain).reshape(-1, 3)) - prior  # the sum of terms, up to a constant per record
    p = np.exp(prior + 0.6 * logs + calibration.offsets)
    p /= p.sum(axis=1, keepdims=True)
    expected = 0.97 * p + 0.03 * calibration.shares
    assert tempered.probabilities(every_record()) == pytest.approx(expected, abs=1e-12)


def test_a_record_of_unknown_levels_gets_the_class_shares() -> None:
    """Whatever the calibration: temperature, offsets and floor are of evidence, and there is none."""
    codes, target = drawn(50, seed=5)
    calibration = Calibration(0.6, np.array([0.2, -0.3, 0.1]), 0.03, np.array([0.2, 0.3, 0.5]))
    classifier = classifier_from(codes, target, STRUCTURES[2], Smoothing("laplace", 1.0), calibration, sizes=SIZES)
    unknown = np.full((4, 2), -1)
    unknown[3, 1] = 0
    p = classifier.probabilities(unknown)
    assert p[0] == pytest.approx(np.bincount(target) / 50, abs=1e-15)
    assert not np.allclose(p[1], p[0])


def test_naive_bayes_equals_scikit_learn() -> None:
    codes, target = drawn(200, seed=8)
    classifier = classifier_from(codes, target, STRUCTURES[0], Smoothing("laplace", 1.0), identity(3), sizes=SIZES)
    rival = CategoricalNB(alpha=1, min_categories=list(SIZES)).fit(codes.T, target)
    records = every_record()
    assert classifier.probabilities(records) == pytest.approx(rival.predict_proba(records.T), abs=1e-12)
    assert classifier.free_parameters == 2 + 3 * sum(size - 1 for size in SIZES)


def test_free_parameters_by_hand() -> None:
    codes, target = drawn(50, seed=9)
    found = classifier_from(codes, target, STRUCTURES[2], Smoothing("laplace", 1.0), identity(3), sizes=SIZES)
    assert found.free_parameters == 2 + 3 * (1 + 2 * 2 + 6 * 1 + 4 * 2)


def tennis() -> tuple[np.ndarray, np.ndarray, list[list[str]]]:
    """Code the fourteen days; levels in alphabetical order."""
    days = np.array([day.split() for day in TENNIS.replace("\n", "").split("/")])
    levels = [sorted(set(column)) for column in days.T]
    codes = np.array([[names.index(cell) for cell in column] for names, column in zip(levels, days.T, strict=True)])
    return codes[:4], codes[4], levels


def test_the_tennis_day_of_mitchell() -> None:
    """Mitchell 1997, section 6.9.1: yes .0053, no .0206 unsmoothed; P(no) = .720067 with one record a level."""
    codes, target, levels = tennis()
    asked = ("sunny", "cool", "high", "strong")
    day = np.array([[names.index(cell)] for names, cell in zip(levels[:4], asked, strict=True)])
    assert codes.shape == (4, 14)
    bare = classifier_from(codes, target, STRUCTURES[0], Smoothing("laplace", 1e-12), identity(2))
    weights = np.exp(bare.log_prior + sum(bare.terms(day, child)[0] for child in range(4)))
    assert weights.round(4).tolist() == [0.0206, 0.0053]
    smoothed = classifier_from(codes, target, STRUCTURES[0], Smoothing("laplace", 1.0), identity(2))
    assert smoothed.probabilities(day)[0, 0] == pytest.approx(0.720067, abs=5e-7)
    assert [levels[4][code] for code in (0, 1)] == ["no", "yes"]
    assert smoothed.labels(smoothed.probabilities(day)) == ["0"]


@pytest.mark.parametrize("rule", [np.all, np.any])
@pytest.mark.parametrize("members", [(0,), (1, 3), (0, 2, 4), tuple(range(7))])
def test_naive_bayes_makes_no_error_on_a_conjunction_or_a_disjunction(rule: object, members: tuple[int, ...]) -> None:
    """Domingos & Pazzani 1997: with unlimited data, all 2 ** 7 records equally often."""
    records = np.array(list(product((0, 1), repeat=7))).T
    truth = rule(records[list(members)], axis=0).astype(int)  # type: ignore[operator]
    assert errors_with_unlimited_data(records, truth) == 0


def test_naive_bayes_errs_on_21_of_128_records_of_three_of_seven() -> None:
    """Domingos & Pazzani 1997, on m-of-n concepts: 3 or more of 7."""
    records = np.array(list(product((0, 1), repeat=7))).T
    assert errors_with_unlimited_data(records, (records.sum(axis=0) >= 3).astype(int)) == 21


def errors_with_unlimited_data(records: np.ndarray, truth: np.ndarray) -> int:
    """Count the errors of naive Bayes whose tables are exact."""
    naive = Structure("naive", ((),) * 7)
    exact = classifier_from(records, truth, naive, Smoothing("laplace", 1e-12), identity(2), sizes=(2,) * 7)
    return int((exact.probabilities(records).argmax(axis=1) != truth).sum())
