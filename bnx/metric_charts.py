"""Where the marks of the charts of scores stand: structures' folds paired with the baseline's, metric by metric."""

import math
from collections.abc import Callable, Mapping, Sequence
from dataclasses import dataclass
from typing import Any

from bnx.text import fixed, signed
from bnx.ticks import round_ticks

__all__ = ["Metric", "MetricChart", "MetricRow", "metric_charts"]

_WIDTH, _MARGIN, _STEP, _TOP, _FOOT = 720.0, 24.0, 48.0, 36.0, 52.0


@dataclass(frozen=True)
class Metric:
    """A score by its key in the document; ``meaning`` says what it is, in one sentence."""

    key: str
    name: str
    lower_is_better: bool
    unit: str
    meaning: str


_METRICS = (
    Metric("log_loss", "log loss", True, "bits", "Mean number of bits that the outcome still surprises by."),
    Metric("brier", "Brier", True, "", "Squared error of the probabilities, summed over the classes."),
    Metric("accuracy", "accuracy", False, "", "Share of records whose most probable class is the true one."),
    Metric("balanced_accuracy", "balanced accuracy", False, "", "Mean of the recalls: every class counts the same."),
    Metric("auc", "AUC", False, "", "Area under the curve, one class against the rest, mean over the classes."),
    Metric("calibration_error", "calibration error", True, "", "How far what is said lies from how often it is right."),
)


@dataclass(frozen=True)
class Tick:
    """A place on an axis, in pixels, and its number."""

    at: float
    number: str


@dataclass(frozen=True)
class MetricRow:
    """One structure: ``points`` are (x, what a reader is told) of its folds; mean, low and high are x, or None.

    ``told``: the mean difference with its interval, as printed; ``verdict``: what to think of it.
    """

    name: str
    recommended: bool
    y: float
    points: tuple[tuple[float, str], ...]
    mean: float | None
    low: float | None
    high: float | None
    told: str
    verdict: str


@dataclass(frozen=True)
class MetricChart:
    """Differences to the baseline in one metric, fold by fold, in pixels; no ``rows`` where no fold can be compared.

    ``region``: the difference without practical meaning, as printed, empty where none is set; ``left_out``: folds that
    cannot be shown.
    """

    metric: Metric
    width: float
    height: float
    bottom: float
    zero: float
    region: str
    region_left: float
    region_width: float
    ticks: tuple[Tick, ...]
    rows: tuple[MetricRow, ...]
    left_out: int


def metric_charts(document: Mapping[str, Any]) -> tuple[MetricChart, ...]:
    """Lay out every metric; nothing where there is nothing to compare with the baseline."""
    baseline = next(one for one in document["structures"] if one["name"] == document["settings"]["baseline"])
    mix = [{"name": "mix", **document["mix"]}] if document["mix"] else []
    entries = [one for one in [*document["structures"], *mix] if one is not baseline]
    entries.sort(key=lambda one: (one["log_loss"] is None, one["log_loss"] or 0.0))
    if not entries:
        return ()
    return tuple(_chart(metric, entries, baseline, document["recommended"]["name"]) for metric in _METRICS)


def _chart(
    metric: Metric, entries: Sequence[Mapping[str, Any]], baseline: Mapping[str, Any], recommended: str
) -> MetricChart:
    against = [_against(one, metric.key) for one in entries]
    folds = [_paired(one, baseline, metric) for one in entries]
    region = next((one["region"] for one in against if one["region"]), 0.0)
    ends = [value for row in folds for value, _ in row if value is not None]
    empty = not ends
    for one in against:
        ends += one["interval"] or []
    low, high = min(0.0, -region, *ends), max(0.0, region, *ends)
    scale = (_WIDTH - 2 * _MARGIN) / max(high - low, 1e-12)

    def at(value: float) -> float:
        return round(_MARGIN + (value - low) * scale, 1)

    rows = [
        _row(one["name"], own, difference, metric, at, _TOP + number * _STEP, one["name"] == recommended)
        for number, (one, own, difference) in enumerate(zip(entries, folds, against, strict=True))
    ]
    ticks = round_ticks(low, high)
    digits = max(2, -math.floor(math.log10(ticks[1] - ticks[0]) + 1e-9) if len(ticks) > 1 else 3)
    bottom = _TOP + len(entries) * _STEP - 20
    return MetricChart(
        metric=metric,
        width=_WIDTH,
        height=bottom + _FOOT,
        bottom=bottom,
        zero=at(0.0),
        region=f"{region:.2g}" if region else "",
        region_left=at(-region),
        region_width=round(at(region) - at(-region), 1),
        ticks=tuple(Tick(at(value), "0" if abs(value) < 1e-9 else signed(value, digits)) for value in ticks),
        rows=() if empty else tuple(rows),
        left_out=sum(value is None for row in folds for value, _ in row),
    )


def _against(entry: Mapping[str, Any], key: str) -> Mapping[str, Any]:
    """Look up the difference to the baseline; nulls where a whole structure has none."""
    by_metric = entry["against_baseline"]["by_metric"]
    return by_metric[key] if by_metric else {"difference": None, "interval": None, "region": None}


def _paired(entry: Mapping[str, Any], baseline: Mapping[str, Any], metric: Metric) -> list[tuple[float | None, str]]:
    """Pair the folds of two structures: (difference, None where either has no finite figure; what a reader is told)."""
    other = {(fold["repeat"], fold["fold"]): fold[metric.key] for fold in baseline["by_fold"]}
    repeated = any(fold["repeat"] for fold in entry["by_fold"])
    pairs: list[tuple[float | None, str]] = []
    for fold in entry["by_fold"]:
        own, base = fold[metric.key], other.get((fold["repeat"], fold["fold"]))
        if own is None or base is None:
            pairs.append((None, ""))
            continue
        which = f"repeat {fold['repeat'] + 1}, " if repeated else ""
        told = f"{which}fold {fold['fold'] + 1}: {entry['name']} {fixed(own)}, {baseline['name']} {fixed(base)}"
        pairs.append((own - base, f"{told}: {signed(own - base)}"))
    return pairs


def _row(
    name: str,
    folds: Sequence[tuple[float | None, str]],
    against: Mapping[str, Any],
    metric: Metric,
    at: Callable[[float], float],
    y: float,
    recommended: bool,
) -> MetricRow:
    mean, (low, high) = against["difference"], against["interval"] or (None, None)
    return MetricRow(
        name=name,
        recommended=recommended,
        y=y,
        points=tuple((at(value), told) for value, told in folds if value is not None),
        mean=None if mean is None else at(mean),
        low=None if low is None else at(low),
        high=None if high is None else at(high),
        told="no figure in some fold" if mean is None else f"{signed(mean)} [{signed(low)}, {signed(high)}]",
        verdict=_verdict(low, high, against["region"] or 0.0, metric.lower_is_better),
    )


def _verdict(low: float | None, high: float | None, region: float, lower_is_better: bool) -> str:
    """Say what to think of a difference with this interval; nothing where there is none."""
    if low is None or high is None:
        return ""
    if -region <= low and high <= region and region:
        return "too little to matter"
    if low <= 0.0 <= high:
        return "can be chance"
    return "better" if (high < 0.0) == lower_is_better else "worse"
