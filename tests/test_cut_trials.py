"""`--bins auto`: three kinds of cut points, chosen inside training folds, and what is said of columns without a cut."""

import numpy as np
import pandas as pd
import pytest
from builders import compared, predicted

from bnx import cut_trials
from bnx.comparison import Comparison
from bnx.cut_trials import FILLED

ROWS = 600
FOLDS = 4
FAST = {"smoothing": "laplace:1", "fold_column": "site", "bins": "auto"}


def table(bands: float, edge: float) -> pd.DataFrame:
    """Make rows in which no one cut of ``ash`` pays: every second fifth holds more of one class, by ``bands``.

    ``heat`` splits the classes at its highest tenth, which five bins of equal frequency miss, by ``edge``.
    """
    random = np.random.default_rng(4)
    fifth, place = np.divmod(np.arange(ROWS), ROWS // 5)
    hot = place % 10 == 0
    share = 0.5 + bands * np.where(fifth % 2, 1, -1)
    share = np.where(hot, share + edge, share)
    grade = np.where(place * 77 % 120 < 120 * share, "ok", "bad")
    heat = np.where(hot, 90.0, 0.0) + random.permutation(ROWS) / 8
    frame = pd.DataFrame({"ash": np.arange(ROWS) + 0.5, "heat": heat, "site": "", "grade": grade})
    frame = frame.sample(frac=1, random_state=1, ignore_index=True)
    return frame.assign(site=[f"s{k % FOLDS}" for k in range(ROWS)])


def kinds(found: Comparison) -> dict[tuple[int, ...], str]:
    return {held: choice.trial.bins for held, choice in found.evaluations[0].choices.items()}


def said(found: Comparison) -> list[str]:
    return [warning for warning in found.warnings if "MDL" in warning]


def test_a_column_that_mdl_leaves_without_a_cut_is_kept_in_bins_of_equal_frequency_where_that_helps():
    frame = table(0.18, 0.9)
    found = compared(frame, "grade", **FAST)
    assert set(kinds(found).values()) == {FILLED}
    ash, heat = found.domains
    by_frequency = compared(frame, "grade", **FAST | {"bins": "frequency:5"}).domains[0]
    assert ash.cuts == by_frequency.cuts
    assert ash.cuts == pytest.approx([120, 240, 360, 480], abs=2)
    assert len(heat) == 2
    assert 75 < heat.cuts[0] < 90, "the cut of mdl stays where there is one"
    assert said(found) == [
        "ash has no MDL cut point; it is kept in 5 bins of equal frequency, which lowered the held-out loss"
    ]


def test_it_predicts_what_the_same_kind_predicts_when_it_is_asked_for():
    frame = table(0.18, 0.9)
    chosen, asked = compared(frame, "grade", **FAST), compared(frame, "grade", **FAST | {"bins": FILLED})
    assert set(kinds(asked).values()) == {FILLED}
    np.testing.assert_array_equal(predicted(chosen, 0), predicted(asked, 0))
    assert chosen.domains == asked.domains
    assert said(asked) == ["ash has no MDL cut point; it is kept in 5 bins of equal frequency"]


def test_no_row_of_a_fold_has_a_say_in_the_cut_points_that_predict_it():
    frame = table(0.18, 0.9)
    before = compared(frame, "grade", **FAST).evaluations[0]
    own = frame["site"] == "s1"
    assert 100 < own.sum() < 200
    frame.loc[own, "grade"] = np.where(frame.loc[own, "ash"] < 300, "ok", "bad")
    after = compared(frame, "grade", **FAST).evaluations[0]

    def settled(held: tuple[int, ...]) -> list[tuple[object, ...]]:
        choices = [one.choices[held] for one in (before, after)]
        return [
            (one.trial.bins, one.trial.learned[held].training.view.domains, str(one.calibrations)) for one in choices
        ]

    untouched, touched = settled((1,)), settled((0,))
    assert untouched[0][0] == FILLED
    assert untouched[0] == untouched[1]
    assert touched[0] != touched[1]


@pytest.mark.parametrize(
    ("bands", "edge", "bins", "kind", "sentence"),
    [
        (
            *(0.0, 0.9, "auto", "mdl"),
            "ash has no MDL cut point and 5 bins of equal frequency did not clearly lower the held-out loss, so all "
            f"its numbers are one level and say nothing; --bins {FILLED} would cut it",
        ),
        (
            *(0.18, 0.0, "auto", "frequency:5"),
            "ash, heat have no MDL cut point; every numeric column is cut into 5 bins of equal frequency, which "
            "lowered the held-out loss",
        ),
        (
            *(0.18, 0.9, "mdl", "mdl"),
            f"ash has no MDL cut point, so all its numbers are one level and say nothing; --bins {FILLED} would cut it",
        ),
        (
            *(0.18, 0.0, "mdl", "mdl"),
            f"ash, heat have no MDL cut point, so the numbers of each are one level and say nothing; --bins {FILLED} "
            "would cut them",
        ),
        (
            0.18,
            0.0,
            "mdl+frequency:3",
            "mdl+frequency:3",
            "ash, heat have no MDL cut point; they are kept in 3 bins of equal frequency",
        ),
        (0.18, 0.9, "frequency:5", "frequency:5", None),
        (0.18, 0.9, "width:4", "width:4", None),
    ],
)
def test_what_became_of_columns_without_a_cut_is_said(bands, edge, bins, kind, sentence):
    found = compared(table(bands, edge), "grade", **FAST | {"bins": bins})
    assert kinds(found)[()] == kind
    assert said(found) == ([] if sentence is None else [sentence])


def test_nothing_more_is_learnt_where_mdl_cuts_every_column(monkeypatch):
    learnt = []

    def counting(engine, schema, masks, bins, max_levels):
        learnt.append((bins, len(masks)))
        return make_trainings(engine, schema, masks, bins, max_levels)

    make_trainings = cut_trials.make_trainings
    monkeypatch.setattr(cut_trials, "make_trainings", counting)
    compared(table(0.0, 0.9)[["heat", "site", "grade"]], "grade", **FAST)
    sets = 1 + FOLDS + FOLDS * (FOLDS - 1) // 2
    assert learnt == [("mdl", sets), ("frequency:5", sets)]
    learnt.clear()
    compared(table(0.0, 0.9), "grade", **FAST)
    assert learnt == [("mdl", sets), ("frequency:5", sets), (FILLED, sets)]
