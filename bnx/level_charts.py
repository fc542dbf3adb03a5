"""Where the bars of a numeric column stand: a panel a class on the same two scales, cut points through all of them."""

import math
from collections.abc import Iterator, Mapping, Sequence
from dataclasses import dataclass
from itertools import pairwise
from typing import Any

import numpy as np

from bnx.text import count_of, cut_middle
from bnx.ticks import round_ticks

__all__ = ["FEW_RECORDS", "MOST_PANELS", "CutLine", "LevelChart", "Panel", "level_chart"]

MOST_PANELS = 12
"""Classes that are drawn, those of most rows first."""
FEW_RECORDS = 30
"""Records below which shares are called soft."""

_WIDTH, _SIDE = 460.0, 10.0
_HEAD, _BARS, _GAP, _AXIS = 17.0, 42.0, 6.0, 24.0
_LABEL, _SIGN, _MOST_LINES = 15.0, 6.4, 4
_LONG, _WIDER = 0.25, 3.0  # an outermost bin of this share of the others' range, so many times as wide as any ...
_SHORT = 0.05  # ... is drawn of this share of the width
_THIN = 3.0  # pixels that a bar is wide at least, so that it is seen
_TALL = 3.0  # a bar so many times as high as the next is cut
_LARGEST, _SMALLEST = 1e300, 1e-250  # numbers and ranges beyond are not drawn
_LEAST_PLAIN, _MOST_PLAIN, _MOST_DECIMALS = 1e-4, 1e12, 15  # of numbers written without a power of ten
_NAME = 40


@dataclass(frozen=True)
class CutLine:
    """A cut point, in pixels, and its value with the place of its words, 0 from above where there is no room for it."""

    x: float
    value: str
    words_x: float
    words_y: float


@dataclass(frozen=True)
class Panel:
    """The bars of one class as a path, and those of all classes behind them as an outline; ``cut``: bars cut short."""

    shown: str
    rows: str
    few: bool
    top: float
    bottom: float
    bars: str
    every: str
    cut: str


@dataclass(frozen=True)
class LevelChart:
    """The drawing of one column; ``beyond``: what is said of the outermost bins that are drawn shorter."""

    width: float
    height: float
    left: float
    right: float
    top: float
    axis: float
    panels: tuple[Panel, ...]
    cuts: tuple[CutLine, ...]
    ticks: tuple[tuple[float, str], ...]
    breaks: tuple[float, ...]
    beyond: tuple[str, ...]
    clipped: bool
    classes_left_out: int
    cuts_without_words: int
    words: str


@dataclass(frozen=True)
class _Scale:
    """Places of values: ``low`` is drawn at ``left`` and ``high`` at ``right``, what lies beyond in a strip beside."""

    low: float
    high: float
    left: float
    right: float

    def x(self, value: float) -> float:
        """Place a value between the ends, in pixels."""
        share = (value - self.low) / (self.high - self.low)
        return round(self.left + share * (self.right - self.left), 1)


def level_chart(
    name: str, classes: Sequence[str], cuts: Sequence[float], distribution: Mapping[str, Any]
) -> LevelChart | None:
    """Lay out the distribution of a numeric column; None where its numbers are too large or too close to be drawn."""
    edges = [float(edge) for edge in distribution["edges"]]
    if max(map(abs, edges)) > _LARGEST or edges[-1] - edges[0] < _SMALLEST:
        return None
    scale, beyond = _scaled(distribution, edges)
    places = _places(edges, scale)
    values = [f"{cut:.6g}" for cut in cuts]
    labels, without = _labels([scale.x(cut) for cut in cuts], values)
    top = _LABEL * max((1.0, *(line for *_, line in labels))) + 6.0
    rows = np.array(distribution["rows"], float)
    order = np.argsort(-rows.sum(axis=0), kind="stable")[:MOST_PANELS].tolist()
    panels, clipped = _panels(rows, sorted(order), classes, places, top)
    axis = panels[-1].bottom
    return LevelChart(
        width=_WIDTH,
        height=axis + _AXIS,
        left=_SIDE,
        right=_WIDTH - _SIDE,
        top=top,
        axis=axis,
        panels=panels,
        cuts=tuple(
            CutLine(x, value, middle, round(top - 6.0 - _LABEL * (line - 1), 1) if line else 0.0)
            for x, value, middle, line in labels
        ),
        ticks=tuple(_ticks(scale)),
        breaks=tuple(
            x for x, side in ((scale.left, scale.left > _SIDE), (scale.right, scale.right < _WIDTH - _SIDE)) if side
        ),
        beyond=beyond,
        clipped=clipped,
        classes_left_out=len(classes) - len(panels),
        cuts_without_words=without,
        words=f"{name}: how its values are spread in each class"
        + (f", cut at {', '.join(values)}" if cuts else ", not cut"),
    )


def _scaled(distribution: Mapping[str, Any], edges: Sequence[float]) -> tuple[_Scale, tuple[str, ...]]:
    """Choose what is drawn to scale: all but outermost bins that would take too much of the width."""
    low, high, left, right = edges[0], edges[-1], _SIDE, _WIDTH - _SIDE
    beyond = []
    widest = max((high - low for low, high in pairwise(edges[1:-1])), default=math.inf)
    most = max(_LONG * (edges[-2] - edges[1]), _WIDER * widest)
    if edges[1] - low > most:
        low, left = edges[1], left + _SHORT * _WIDTH
        beyond.append(f"The first bar reaches down to {distribution['lowest']:.6g}.")
    if high - edges[-2] > most:
        high, right = edges[-2], right - _SHORT * _WIDTH
        beyond.append(f"The last bar reaches up to {distribution['highest']:.6g}.")
    return _Scale(low, high, left, right), tuple(beyond)


def _places(edges: Sequence[float], scale: _Scale) -> np.ndarray:
    """Place the edges of all bins, in pixels; those beyond the scale at the ends of the drawing."""
    inside = [scale.x(min(max(edge, scale.low), scale.high)) for edge in edges[1:-1]]
    return np.array([_SIDE, *inside, _WIDTH - _SIDE])


def _panels(
    rows: np.ndarray, order: Sequence[int], classes: Sequence[str], places: np.ndarray, top: float
) -> tuple[tuple[Panel, ...], bool]:
    """Draw some classes one below the other, rows (b, C): the area of a bar is its share of the rows of its class.

    All stand on one scale but classes of few records, whose bars may be so high that they need their own.
    """
    widths = np.maximum(np.diff(places), 0.1)
    of_class = rows.sum(axis=0)
    shares = rows / np.maximum(of_class, 1.0) / widths[:, None]
    every = rows.sum(axis=1) / rows.sum() / widths
    many = [c for c in order if of_class[c] >= FEW_RECORDS]
    common = _highest(np.stack([every, *(shares[:, c] for c in many)]).max(axis=0))
    clipped, panels = False, []
    for place, c in enumerate(order):
        above = top + place * (_HEAD + _BARS + _GAP)
        bottom = above + _HEAD + _BARS
        highest = common if c in many else max(common, _highest(shares[:, c]))
        over = np.flatnonzero(shares[:, c] > highest * 1.001)
        clipped = clipped or len(over) > 0
        panels.append(
            Panel(
                shown=cut_middle(classes[c], _NAME),
                rows=count_of(int(of_class[c]), "record"),
                few=bool(of_class[c] < FEW_RECORDS),
                top=above,
                bottom=bottom,
                bars=_bars(places, shares[:, c] / highest, bottom),
                every=_outline(places, every / highest, bottom),
                cut="".join(
                    f"M{places[k]:.1f} {bottom - _BARS + 4:.1f}L{places[k + 1]:.1f} {bottom - _BARS + 1:.1f}"
                    for k in over.tolist()
                ),
            )
        )
    return tuple(panels), clipped


def _highest(heights: np.ndarray) -> float:
    """Choose what reaches the top of a panel: the highest bar, unless the next is much lower."""
    ordered = np.sort(heights)
    if len(ordered) > 1 and ordered[-2] > 0 and ordered[-1] > _TALL * ordered[-2]:
        return float(1.25 * ordered[-2])
    return float(ordered[-1]) or 1.0


def _tops(heights: np.ndarray, bottom: float) -> np.ndarray:
    """Place the tops of bars, heights as shares of a panel, in pixels."""
    return np.asarray((bottom - _BARS * np.minimum(heights, 1.0)).round(1))


def _bars(places: np.ndarray, heights: np.ndarray, bottom: float) -> str:
    """Draw bars from left to right as shapes of their own, none too thin to be seen."""
    room = np.maximum(_THIN - np.diff(places), 0.0) / 2
    lefts = np.clip(places[:-1] - room, places[0], places[-1] - _THIN)
    rights = np.maximum(np.minimum(places[1:] + room, places[-1]), lefts + _THIN)
    lefts = np.minimum(lefts, places[:-1])
    return "".join(
        f"M{left:.1f} {bottom:.1f}V{y:.1f}H{right:.1f}V{bottom:.1f}z"
        for left, right, y in zip(lefts, rights, _tops(heights, bottom), strict=True)
        if y < bottom
    )


def _outline(places: np.ndarray, heights: np.ndarray, bottom: float) -> str:
    """Draw the outline of bars from left to right as one line."""
    tops = _tops(heights, bottom)
    steps = "".join(f"V{y:.1f}H{right:.1f}" for right, y in zip(places[1:], tops, strict=True))
    return f"M{places[0]:.1f} {bottom:.1f}{steps}V{bottom:.1f}"


def _labels(xs: Sequence[float], values: Sequence[str]) -> tuple[list[tuple[float, str, float, int]], int]:
    """Put the value of each cut point on the lowest line where there is room; count those without room (line 0)."""
    ends = [-math.inf] * _MOST_LINES
    placed = []
    for x, value in zip(xs, values, strict=True):
        half = _SIGN * len(value) / 2 + 2
        middle = round(min(max(x, half), _WIDTH - half), 1)
        free = [line for line, end in enumerate(ends) if middle - half >= end]
        line = free[0] + 1 if free else 0
        if line:
            ends[line - 1] = middle + half
        placed.append((x, value, middle, line))
    return placed, sum(not line for *_, line in placed)


def _ticks(scale: _Scale) -> list[tuple[float, str]]:
    """Give round numbers along the axis, as many as there is room for."""
    for about in (6, 3):
        ticks = list(_round(scale, about))
        if sum(_SIGN * len(text) + 8 for _, text in ticks) <= scale.right - scale.left:
            return ticks
    return [ticks[0], ticks[-1]]


def _round(scale: _Scale, about: int) -> Iterator[tuple[float, str]]:
    """List round numbers, with their places."""
    power = 10.0 ** math.floor(math.log10(scale.high - scale.low))
    ticks = round_ticks(scale.low / power, scale.high / power, about)
    step = power * (ticks[1] - ticks[0] if len(ticks) > 1 else 1.0)
    decimals = max(0, -math.floor(math.log10(step) + 1e-9))
    plain = decimals <= _MOST_DECIMALS and _LEAST_PLAIN <= max(abs(scale.low), abs(scale.high)) < _MOST_PLAIN
    for tick in ticks:
        value = tick * power
        yield scale.x(value), (f"{value + 0.0:.{decimals}f}" if plain else f"{value:.6g}")
