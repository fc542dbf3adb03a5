"""Yardsticks as plain values ready to be written."""

from typing import Any

from bnx.comparison import Comparison
from bnx.paired import Difference
from bnx.score_entries import fold_entries, score_entry
from bnx.text import signed
from bnx.yardstick import Yardstick
from bnx.yardstick_models import BOOSTING

__all__ = ["yardstick_entries", "yardstick_sentence"]


def yardstick_entries(comparison: Comparison) -> list[dict[str, Any]] | None:
    """Describe the models that are no structures, and their scores; None where none was fitted."""
    levels = comparison.classifiers[0].target.levels
    entries = [
        {
            "name": one.name,
            **score_entry(one.score, levels),
            "by_fold": fold_entries(one.score, levels),
            "against_baseline": _difference_entry(one.against_baseline),
            "against_recommended": {
                **_difference_entry(one.apart),
                "probability_better": one.chances.better if one.chances else None,
            },
            "sentence": yardstick_sentence(one),
        }
        for one in comparison.yardsticks
    ]
    return entries or None


def _difference_entry(difference: Difference | None) -> dict[str, Any]:
    """Describe a mean difference over folds."""
    return {
        "difference": difference.mean if difference else None,
        "interval": [difference.low, difference.high] if difference else None,
    }


def yardstick_sentence(one: Yardstick) -> str:
    """Say in one sentence whether a model that one can read costs anything against this one."""
    name = one.name.capitalize()
    if one.apart is None:
        return f"{name} cannot be compared with the recommended structure, as a log loss is infinite."
    better = one.apart.mean < 0
    low, high = (-one.apart.high, -one.apart.low) if better else (one.apart.low, one.apart.high)
    told = (
        f"{name} is {'better' if better else 'worse'} than the recommended structure by {abs(one.apart.mean):.3f} bits "
        f"per record [{signed(low)}, {signed(high)}]"
    )
    if low <= 0 <= high:
        told, what = f"{told}, which can be chance", "no cost of a model one can read is seen here"
    else:
        what = "that is what a model one can read costs here" if better else "a model one can read costs nothing here"
    return f"{told}: {what}." if one.name == BOOSTING else f"{told}."
