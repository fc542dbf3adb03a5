"""Classes with fewer rows than folds: nothing breaks, every loss is finite, and the run says what was not there."""

from typing import Any

import numpy as np
import pandas as pd
import pytest
from builders import compared, folds_of, predicted

from bnx.documents import comparison_document, structure_document

SETTINGS: tuple[dict[str, Any], ...] = (
    {},
    {"temperature": False},
    {"missing": "sum-out"},
    {"folds": 3},
    {"folds": 4, "repeats": 2},
    {"temperature": False, "smoothing": "laplace:1"},
)


def with_rare_class(rare: int, rows: int = 150) -> pd.DataFrame:
    """Draw four attributes, some cells blank, and a third class of so many rows."""
    random = np.random.default_rng(rare)
    target = np.array(["x"] * (rows - 50 - rare) + ["y"] * 50 + ["z"] * rare)
    shift = np.select([target == "y", target == "z"], [1, 2])
    codes = [(shift + random.integers(0, 2, rows)) % 3 for _ in range(4)]
    frame = pd.DataFrame({name: [f"v{code}" for code in own] for name, own in zip("abcd", codes, strict=True)})
    return frame.mask(random.random(frame.shape) < 0.05).assign(kind=target)


@pytest.mark.parametrize("settings", SETTINGS, ids=str)
@pytest.mark.parametrize("rare", [1, 2, 3])
def test_losses_are_finite_and_no_probability_is_0_or_1(rare: int, settings: dict[str, Any]) -> None:
    found = compared(with_rare_class(rare), "kind", structures=("naive", "tan", "kdb1-tested"), **settings)
    for s, result in enumerate(found.results):
        assert np.isfinite(result.pooled.log_loss)
        assert np.isfinite([fold.scores.log_loss for fold in result.by_fold]).all()
        p = predicted(found, s)
        assert p.min() > 0
        assert p.max() < 1
        assert sum(map(sum, result.pooled.confusion)) == 150 * settings.get("repeats", 1)
        assert structure_document(found, s)["scores"]["log_loss"] == result.pooled.log_loss
    assert np.isfinite(found.recommendation.honest.log_loss)
    assert np.isfinite([[edge.gain, edge.gain_se] for edges in found.edges for edge in edges]).all()
    assert comparison_document(found)["rows"] == 150


@pytest.mark.parametrize("rare", [1, 2, 3])
def test_the_rows_of_a_rare_class_lie_in_different_folds_and_the_run_says_so(rare: int) -> None:
    frame = with_rare_class(rare)
    found = compared(frame, "kind", folds=5)
    fold = folds_of(found.evaluations[0])[frame["kind"] == "z"]
    assert len(set(fold.tolist())) == rare
    rows = "1 row" if rare == 1 else f"{rare} rows"
    sentence = f"class z has {rows} for 5 folds: in {5 - rare} of 5 it has none to predict, so it counts in the other "
    assert f"{sentence}scores only" in found.warnings
    alone = "class z is predicted from rows that hold none of it, as all of its rows lie in one fold"
    assert (alone in found.warnings) == (rare == 1)


def test_given_folds_that_hold_a_whole_class_are_told_too() -> None:
    """Forty rows of class x, all in one of four given folds."""
    frame = with_rare_class(3)
    frame["era"] = np.where(frame["kind"] == "x", "e0", "e" + (np.arange(150) % 3 + 1).astype(str).astype(object))
    found = compared(frame, "kind", fold_column="era", temperature=False)
    assert "class x is predicted from rows that hold none of it, as all of its rows lie in one fold" in found.warnings
    assert np.isfinite(found.results[0].pooled.log_loss)
