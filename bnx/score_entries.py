"""Scores as plain values ready to be written."""

from collections.abc import Mapping, Sequence
from typing import Any

from bnx.before_after import Reliability
from bnx.judging import Against
from bnx.metric_differences import REGIONS
from bnx.paired import Difference
from bnx.rating import StructureScore
from bnx.reliability import Curve

__all__ = ["against_entry", "fold_entries", "reliability_entry", "score_entry"]


def score_entry(result: StructureScore, levels: Sequence[str]) -> dict[str, Any]:
    """Describe the pooled scores."""
    return {
        **result.pooled.to_dict(levels),
        "log_loss_se": result.error,
        "calibration_slope": result.slope,
    }


def fold_entries(result: StructureScore, levels: Sequence[str]) -> list[dict[str, Any]]:
    """Describe the scores of every fold."""
    return [
        {
            "repeat": fold.repeat,
            "fold": fold.fold,
            "rows": fold.rows,
            **fold.scores.to_dict(levels),
            "calibration_slope": fold.slope,
        }
        for fold in result.by_fold
    ]


def against_entry(against: Against | None, by_metric: Mapping[str, Difference | None] | None) -> dict[str, Any]:
    """Describe the difference to the baseline; nulls for the baseline itself."""
    metrics = None if by_metric is None else _metric_entries(by_metric, against.region if against else None)
    if against is None:
        keys = ("difference", "interval", "p_value", "region_bits", "probability_better", "probability_equivalent")
        return {**dict.fromkeys(keys), "by_metric": metrics}
    return {
        "difference": against.difference.mean,
        "interval": [against.difference.low, against.difference.high],
        "p_value": against.adjusted_p,
        "p_value_alone": against.difference.p_value,
        "region_bits": against.region,
        "probability_better": against.chances.better,
        "probability_equivalent": against.chances.equivalent,
        "by_metric": metrics,
    }


def _metric_entries(by_metric: Mapping[str, Difference | None], region: float | None) -> dict[str, Any]:
    """Describe differences by metric; region: of the log loss."""
    regions = {"log_loss": region, **REGIONS}
    return {
        metric: {
            "difference": found.mean if found else None,
            "interval": [found.low, found.high] if found else None,
            "region": regions.get(metric),
        }
        for metric, found in by_metric.items()
    }


def reliability_entry(found: Reliability) -> dict[str, Any]:
    """Describe reliability before and after calibration."""
    return {"before": found.before and _curve_entry(found.before), "after": _curve_entry(found.after)}


def _curve_entry(curve: Curve) -> dict[str, Any]:
    return {
        "log_loss": curve.log_loss,
        "calibration_error": curve.calibration_error,
        "bins": [
            {
                "mean_probability": one.mean,
                "share_right": one.right,
                "interval": list(one.interval),
                "rows": int(one.rows) if one.rows.is_integer() else one.rows,
                "effective_rows": one.effective_rows,
            }
            for one in curve.bins
        ],
    }
