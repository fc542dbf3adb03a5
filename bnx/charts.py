"""Where the marks of the triangle of pairs stand, and ticks of every chart."""

import math
from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np
from scipy.cluster.hierarchy import leaves_list, linkage

from bnx.text import fixed

__all__ = ["HEAT_ATTRIBUTES", "HeatMap", "heat_map", "round_ticks", "shortened"]

HEAT_ATTRIBUTES = 60
"""At most so many attributes stand in the triangle."""

_NUMBERED = 16
_SHAPES = {"dependent": "full", "detected, but negligible": "hollow", "negligible": "dot", "not enough data": "open"}


def round_ticks(low: float, high: float, about: int = 6) -> list[float]:
    """List round numbers from ``low`` to ``high``, steps 1, 2 or 5 times a power of ten."""
    rough = max(high - low, 1e-12) / about
    power = 10.0 ** math.floor(math.log10(rough))
    step = next(factor * power for factor in (1, 2, 5, 10) if factor * power >= rough * 0.999)
    first, last = math.ceil(low / step - 1e-9), math.floor(high / step + 1e-9)
    return [number * step for number in range(first, last + 1)]


def shortened(name: str, limit: int = 24) -> str:
    """Cut a long name; the page gives the full one on hover."""
    return name if len(name) <= limit else name[: limit - 1] + "…"


@dataclass(frozen=True)
class Mark:
    """One pair in the triangle: place of its cell, side of its mark in pixels, and what a reader is told."""

    x: float
    y: float
    middle: float
    side: float
    shape: str
    opacity: float
    number: str
    drawn: bool
    a: str
    b: str
    told: str


@dataclass(frozen=True)
class HeatMap:
    """A triangle of pairs; ``names`` are (x, y, name cut, name in full) at the end of each row."""

    cell: float
    width: float
    height: float
    names: tuple[tuple[float, float, str, str], ...]
    marks: tuple[Mark, ...]
    scale: tuple[tuple[float, float, float, str], ...]
    attributes_left_out: int
    pairs_not_listed: int


def heat_map(document: Mapping[str, Any], drawn: frozenset[frozenset[str]]) -> HeatMap | None:
    """Lay out the pairs so that attributes which share bits stand together; None with fewer than 2 attributes.

    Above 60 attributes those of the strongest pairs are taken.
    """
    pairs = {frozenset((pair["a"], pair["b"])): pair for pair in document["pairs"]}
    taken = _strongest_attributes(document)
    if len(taken) < 2 or not pairs:
        return None
    names = _ordered(taken, pairs)
    numbered = len(names) <= _NUMBERED
    cell = 40.0 if numbered else max(13.0, min(26.0, 800.0 / len(names)))
    most = max((pair["bits"] for pair in pairs.values()), default=0.0) or 1.0
    room = cell - (16.0 if numbered else 3.0)
    marks = []
    for row, b in enumerate(names):
        for column, a in enumerate(names[:row]):
            pair = pairs.get(frozenset((a, b)))
            if pair is not None:
                marks.append(_mark(pair, column * cell, row * cell, room, most, numbered, frozenset((a, b)) in drawn))
    steps = _scale(most)
    return HeatMap(
        cell=cell,
        width=round(len(names) * cell + 190.0, 1),
        height=round(len(names) * cell + 4.0, 1),
        names=tuple(
            (round(row * cell + 6, 1), round(row * cell + cell / 2 + 4, 1), shortened(name), name)
            for row, name in enumerate(names)
        ),
        marks=tuple(marks),
        scale=tuple(
            (40.0 + 74.0 * number, _side(step, most, room), _opacity(step, most), f"{step:g}")
            for number, step in enumerate(steps)
        ),
        attributes_left_out=len(document["attributes"]) - len(names),
        pairs_not_listed=len(names) * (len(names) - 1) // 2 - len(marks),
    )


def _strongest_attributes(document: Mapping[str, Any]) -> list[str]:
    """Take all attributes up to 60; above that, those of the strongest pairs."""
    if len(document["attributes"]) <= HEAT_ATTRIBUTES:
        return list(document["attributes"])
    ends = dict.fromkeys(
        name for pair in sorted(document["pairs"], key=lambda one: -one["bits"]) for name in (pair["a"], pair["b"])
    )
    chosen = set(list(ends)[:HEAT_ATTRIBUTES])
    return [name for name in document["attributes"] if name in chosen]


def _ordered(names: Sequence[str], pairs: Mapping[frozenset[str], Mapping[str, Any]]) -> list[str]:
    """Order attributes by average linkage of the bits they share, so that blocks show."""
    if len(names) < 3:
        return list(names)
    bits = np.array(
        [
            math.sqrt(max(0.0, pairs[key]["bits"])) if (key := frozenset((a, b))) in pairs else 0.0
            for row, a in enumerate(names)
            for b in names[row + 1 :]
        ]
    )
    tree = linkage(bits.max() - bits, method="average", optimal_ordering=True)
    return [names[number] for number in leaves_list(tree).tolist()]


def _scale(most: float) -> list[float]:
    """List up to four numbers 1, 2 or 5 times a power of ten that lie within the marks shown."""
    power = math.floor(math.log10(most))
    numbers = [factor * 10.0**exponent for exponent in (power - 1, power) for factor in (1, 2, 5)]
    return [number for number in numbers if number <= most * (1 + 1e-9)][-4:]


def _side(bits: float, most: float, room: float) -> float:
    return round(max(2.0, room * math.sqrt(max(0.0, bits) / most)), 1)


def _opacity(bits: float, most: float) -> float:
    return round(0.35 + 0.65 * max(0.0, bits) / most, 2)


def _mark(pair: Mapping[str, Any], x: float, y: float, room: float, most: float, numbered: bool, drawn: bool) -> Mark:
    bits = pair["bits"]
    shape = _SHAPES[pair["verdict"]]
    return Mark(
        x=round(x, 1),
        y=round(y, 1),
        middle=round(room / 2 + 1, 1),
        side=3.0 if shape == "dot" else _side(bits, most, room),
        shape=shape,
        opacity=_opacity(bits, most),
        number=fixed(bits).removeprefix("0") if numbered and shape != "dot" else "",
        drawn=drawn,
        a=pair["a"],
        b=pair["b"],
        told=f"{fixed(bits, 4)} bits, {pair['verdict']}",
    )
