"""Where the marks of the chart of folds stand: every structure's folds as points paired with the baseline's."""

import math
from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from typing import Any

from bnx.text import signed

__all__ = ["FoldChart", "fold_chart", "round_ticks"]

_FOLD_WIDTH, _FOLD_MARGIN, _FOLD_STEP = 720.0, 24.0, 54.0


@dataclass(frozen=True)
class Tick:
    """A place on an axis, in pixels, and its number."""

    at: float
    number: str


@dataclass(frozen=True)
class FoldRow:
    """One structure's folds: ``points`` are (x, what a reader is told); mean, low and high are x, or None."""

    name: str
    recommended: bool
    y: float
    points: tuple[tuple[float, str], ...]
    mean: float | None
    low: float | None
    high: float | None
    told: str


@dataclass(frozen=True)
class FoldChart:
    """Differences of log loss to the baseline, fold by fold, in pixels of a ``width`` x ``height`` picture."""

    width: float
    height: float
    zero: float
    region_left: float
    region_width: float
    ticks: tuple[Tick, ...]
    rows: tuple[FoldRow, ...]
    left_out: int


def round_ticks(low: float, high: float, about: int = 6) -> list[float]:
    """List round numbers from ``low`` to ``high``, steps 1, 2 or 5 times a power of ten."""
    rough = max(high - low, 1e-12) / about
    power = 10.0 ** math.floor(math.log10(rough))
    step = next(factor * power for factor in (1, 2, 5, 10) if factor * power >= rough * 0.999)
    first, last = math.ceil(low / step - 1e-9), math.floor(high / step + 1e-9)
    return [number * step for number in range(first, last + 1)]


def _fold_differences(entry: Mapping[str, Any], baseline: Mapping[str, Any]) -> list[tuple[str, float | None]]:
    """Pair the folds of two structures: (which fold, difference in bits, None where either loss is infinite)."""
    other = {(fold["repeat"], fold["fold"]): fold["log_loss"] for fold in baseline["by_fold"]}
    pairs = []
    for fold in entry["by_fold"]:
        mine, base = fold["log_loss"], other.get((fold["repeat"], fold["fold"]))
        told = f"repeat {fold['repeat'] + 1}, fold {fold['fold'] + 1}"
        pairs.append((told, None if mine is None or base is None else mine - base))
    return pairs


def fold_chart(document: Mapping[str, Any]) -> FoldChart | None:
    """Lay out every structure's folds against the baseline's; None where there is nothing to compare."""
    baseline = next(one for one in document["structures"] if one["name"] == document["settings"]["baseline"])
    entries = [one for one in document["structures"] if one is not baseline]
    differences = [_fold_differences(one, baseline) for one in entries]
    ends = [value for row in differences for _, value in row if value is not None]
    if not ends:
        return None
    region = next(
        (one["against_baseline"]["region_bits"] for one in entries if one["against_baseline"]["region_bits"]), 0.0
    )
    for one in entries:
        ends += one["against_baseline"]["interval"] or []
    low, high = min(0.0, -region, *ends), max(0.0, region, *ends)
    scale = (_FOLD_WIDTH - 2 * _FOLD_MARGIN) / max(high - low, 1e-12)

    def at(bits: float) -> float:
        return round(_FOLD_MARGIN + (bits - low) * scale, 1)

    rows = tuple(
        _fold_row(one, row, at, 34 + number * _FOLD_STEP, one["name"] == document["recommended"]["name"])
        for number, (one, row) in enumerate(zip(entries, differences, strict=True))
    )
    ticks = round_ticks(low, high)
    digits = max(2, -math.floor(math.log10(ticks[1] - ticks[0])) if len(ticks) > 1 else 3)
    return FoldChart(
        width=_FOLD_WIDTH,
        height=34 + len(entries) * _FOLD_STEP + 34,
        zero=at(0.0),
        region_left=at(-region),
        region_width=round(at(region) - at(-region), 1),
        ticks=tuple(Tick(at(value), "0" if abs(value) < 1e-9 else signed(value, digits)) for value in ticks),
        rows=rows,
        left_out=sum(value is None for row in differences for _, value in row),
    )


def _fold_row(
    entry: Mapping[str, Any], folds: Sequence[tuple[str, float | None]], at: Any, y: float, recommended: bool
) -> FoldRow:
    against = entry["against_baseline"]
    low, high = against["interval"] or (None, None)
    mean = against["difference"]
    told = "no finite difference" if mean is None else f"{signed(mean)} bits [{signed(low)}, {signed(high)}]"
    return FoldRow(
        name=entry["name"],
        recommended=recommended,
        y=y,
        points=tuple((at(value), f"{name}: {signed(value)} bits") for name, value in folds if value is not None),
        mean=None if mean is None else at(mean),
        low=None if low is None else at(low),
        high=None if high is None else at(high),
        told=told,
    )
