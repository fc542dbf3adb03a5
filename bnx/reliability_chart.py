"""Where the marks of a reliability picture stand: what was said against how often it was right."""

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from typing import Any

from bnx.reliability_words import calibration_words, sure
from bnx.ticks import round_ticks

__all__ = ["ReliabilityChart", "ReliabilityMark", "ReliabilityRow", "ReliabilitySide", "reliability_charts"]

_LEFT, _TOP, _SIDE = 60.0, 8.0, 258.0
_RIGHT, _BOTTOM = 14.0, 44.0


@dataclass(frozen=True)
class ReliabilityMark:
    """One bin, in pixels: its place, the ends of its interval, and what a reader is told."""

    x: float
    y: float
    high: float
    low: float
    told: str


@dataclass(frozen=True)
class ReliabilityRow:
    """One bin in the table, as printed."""

    side: str
    records: str
    said: str
    right: str
    interval: str


@dataclass(frozen=True)
class ReliabilitySide:
    """Bins before or after calibration (``kind``), and the line through them."""

    kind: str
    line: str
    marks: tuple[ReliabilityMark, ...]


@dataclass(frozen=True)
class ReliabilityChart:
    """One structure: a square picture with the same two axes, the words beside it and its table.

    ``ticks``: (x, y, percent) of both axes.
    """

    name: str
    words: str
    summary: str
    width: float
    height: float
    left: float
    top: float
    right: float
    bottom: float
    ticks: tuple[tuple[float, float, str], ...]
    sides: tuple[ReliabilitySide, ...]
    rows: tuple[ReliabilityRow, ...]


def reliability_charts(document: Mapping[str, Any]) -> tuple[ReliabilityChart, ...]:
    """Lay out every structure whose reliability the document holds, all on the same scale; of a mix last."""
    sides = {name: _sides(document, found) for name, found in document["reliability"].items()}
    lowest = min(
        min(one["mean_probability"], one["interval"][0])
        for own in sides.values()
        for _, curve in own
        for one in curve["bins"]
    )
    ticks = round_ticks(0.0, 1.0, 10)
    ticks = [tick for tick in ticks if tick >= max([0.0, *(one for one in ticks if one <= lowest)])]
    return tuple(_chart(document, name, own, ticks) for name, own in sides.items())


def _sides(document: Mapping[str, Any], found: Mapping[str, Any]) -> list[tuple[str, Mapping[str, Any]]]:
    """Name the curves to draw; one, where nothing was calibrated or nothing is known of before."""
    if not document["settings"]["temperature"]:
        return [("not calibrated", found["after"])]
    return [*([("before", found["before"])] if found["before"] else []), ("after", found["after"])]


def _chart(
    document: Mapping[str, Any], name: str, curves: Sequence[tuple[str, Mapping[str, Any]]], ticks: Sequence[float]
) -> ReliabilityChart:
    low = ticks[0]

    def x(share: float) -> float:
        return round(_LEFT + (share - low) / (1.0 - low) * _SIDE, 1)

    def y(share: float) -> float:
        return round(_TOP + (1.0 - share) / (1.0 - low) * _SIDE, 1)

    sides = []
    for kind, curve in curves:
        marks = tuple(
            ReliabilityMark(
                x(one["mean_probability"]),
                y(one["share_right"]),
                y(one["interval"][1]),
                y(one["interval"][0]),
                f"{kind}: {sure(one['mean_probability'])} sure, right in {sure(one['share_right'])}",
            )
            for one in curve["bins"]
        )
        sides.append(ReliabilitySide(kind, " ".join(f"{mark.x},{mark.y}" for mark in marks), marks))
    told = ", ".join(f"calibration error {curve['calibration_error']:.3f} {kind}" for kind, curve in curves)
    return ReliabilityChart(
        name=name,
        words=calibration_words(document, name),
        summary=f"{told}; points on the diagonal are right as often as they say. The table below holds the figures.",
        width=_LEFT + _SIDE + _RIGHT,
        height=_TOP + _SIDE + _BOTTOM,
        left=_LEFT,
        top=_TOP,
        right=_LEFT + _SIDE,
        bottom=_TOP + _SIDE,
        ticks=tuple((x(tick), y(tick), f"{100 * tick:.0f}") for tick in ticks),
        sides=tuple(sides),
        rows=tuple(_row(kind, one) for kind, curve in curves for one in curve["bins"]),
    )


def _row(kind: str, one: Mapping[str, Any]) -> ReliabilityRow:
    low, high = (f"{100 * end:.1f}" for end in one["interval"])
    return ReliabilityRow(
        side=kind,
        records=f"{one['rows']:,}" if isinstance(one["rows"], int) else f"{one['rows']:,.1f}",
        said=f"{100 * one['mean_probability']:.2f} %",
        right=f"{100 * one['share_right']:.1f} %",
        interval=f"{low} to {high} %",
    )
