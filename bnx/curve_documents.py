"""The learning curve as plain values ready to be written."""

from typing import Any

from bnx.comparison import Comparison
from bnx.learning_curve import FLAT, HELPS, LearningCurve
from bnx.text import signed

__all__ = ["curve_entry", "curve_sentence"]


def curve_entry(comparison: Comparison) -> dict[str, Any] | None:
    """Describe log loss by training rows; None where it was not asked for."""
    curve, names = comparison.curve, comparison.recipe.structures
    if curve is None:
        return None
    points = [
        {
            "share": point.share,
            "training_rows": point.rows,
            "structures": [
                {
                    "name": names[s],
                    "log_loss": one.pooled.log_loss,
                    "log_loss_se": one.error,
                    "fold_log_losses": one.fold_losses.tolist(),
                    "cost": cost.mean if cost else None,
                    "interval": [cost.low, cost.high] if cost else None,
                }
                for s, one, cost in zip(curve.structures, point.scores, point.costs, strict=True)
            ],
        }
        for point in curve.points
    ]
    sentence = curve_sentence(curve, names[curve.structures[-1]])
    return {"points": points, "region_bits": curve.region, "verdict": curve.verdict, "sentence": sentence}


def curve_sentence(curve: LearningCurve, name: str) -> str:
    """Say in one sentence what half the rows cost, and what that says of more rows."""
    if curve.share is None:
        return "Whether more rows would help cannot be told, as every fold is one group."
    rows = "Half the rows" if round(curve.share, 1) == 0.5 else f"Training on {curve.share:.0%} of the rows"
    if curve.half is None:
        return f"{rows}: what that costs {name} cannot be told, as a log loss is infinite."
    half = f"[{signed(curve.half.low)}, {signed(curve.half.high)}]"
    cost = (
        f"{rows} cost{'' if rows.startswith('Half') else 's'} {name} {signed(curve.half.mean)} bits per record {half}"
    )
    if curve.verdict == HELPS:
        return f"{cost}: more rows would probably help."
    if curve.verdict == FLAT:
        return f"{cost}: the curve is flat, to within {curve.region:.2g} bits."
    return f"{cost}: whether more rows would help cannot be told from these folds."
