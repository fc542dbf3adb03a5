"""Where the marks of the triangle of pairs stand: area is bits, shape is the verdict, names hang on the diagonal."""

import math
import unicodedata
from collections.abc import Callable, Mapping, Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np
from markupsafe import Markup
from scipy.cluster.hierarchy import leaves_list, linkage

from bnx.counted_twice import bits_twice
from bnx.report_data import json_block
from bnx.text import fixed

__all__ = ["TRIANGLE_ATTRIBUTES", "Triangle", "shortened", "triangle", "triangle_block"]

TRIANGLE_ATTRIBUTES = 60
"""At most so many attributes stand in the triangle."""

_NUMBERED = 16
_WIDTH, _NAMES = 1095.0, 200.0
_WIDEST, _LEAST = 34.0, 12.0
_SHAPES = {"dependent": "full", "detected, but negligible": "hollow", "negligible": "dot", "not enough data": "open"}
_SMALLEST = {"full": 7.5, "hollow": 8.5, "dot": 4.4, "open": 8.5}
_MEASURES: tuple[tuple[str, str, Callable[[Mapping[str, Any]], float | None]], ...] = (
    ("bits", "bits given the class", lambda pair: pair["bits"]),
    ("marginal_bits", "bits without the class", lambda pair: pair["marginal_bits"]),
    ("double_counted_bits", "counted twice, bits", bits_twice),
)


@dataclass(frozen=True)
class Mark:
    """One pair: the middle of its mark in pixels, and its side and number by each measure.

    ``row`` and ``column``: places of its two attributes in the order of the triangle.
    """

    row: int
    column: int
    x: float
    y: float
    shape: str
    sides: tuple[float, ...]
    numbers: tuple[str, ...]
    a: str
    b: str
    told: str


@dataclass(frozen=True)
class Name:
    """An attribute on the diagonal: its socket, its place in pixels, and its name cut and in full."""

    socket: float
    x: float
    y: float
    short: str
    full: str


@dataclass(frozen=True)
class Measure:
    """What the marks can show, and its scale: (x of a mark's middle, side, number)."""

    key: str
    label: str
    scale: tuple[tuple[float, float, str], ...]


@dataclass(frozen=True)
class Triangle:
    """The triangle in pixels; ``ground`` is the path below its cells, ``frames`` the corners of framed cells."""

    cell: float
    width: float
    height: float
    ground: str
    lines: str
    names: tuple[Name, ...]
    marks: tuple[Mark, ...]
    frames: tuple[tuple[float, float], ...]
    measures: tuple[Measure, ...]
    attributes_left_out: int
    pairs_not_listed: int

    @property
    def is_numbered(self) -> bool:
        """Tell whether every mark has its number."""
        return len(self.names) <= _NUMBERED

    @property
    def pairs(self) -> frozenset[frozenset[str]]:
        """List the pairs shown."""
        return frozenset(frozenset((mark.a, mark.b)) for mark in self.marks)


def triangle(document: Mapping[str, Any], drawn: frozenset[frozenset[str]]) -> Triangle | None:
    """Lay out the pairs so that attributes which share bits stand together; None with fewer than 2 attributes.

    Above 60 attributes those of the strongest pairs are taken. drawn: the pairs whose cells are framed.
    """
    pairs = {frozenset((pair["a"], pair["b"])): pair for pair in document["pairs"]}
    taken = _strongest_attributes(document)
    if len(taken) < 2 or not pairs:
        return None
    names = _ordered(taken, pairs)
    numbered = len(names) <= _NUMBERED
    cell = 40.0 if numbered else max(_LEAST, min(_WIDEST, math.floor((_WIDTH - _NAMES) / (len(names) + 1))))
    room = cell - (16.0 if numbered else 2.0)
    cells = [
        (row, column, pairs[key])
        for row, b in enumerate(names)
        for column, a in enumerate(names[:row])
        if (key := frozenset((a, b))) in pairs
    ]
    shown = [pair for _, _, pair in cells]
    values = {key: [bits_of(pair) for pair in shown] for key, _, bits_of in _MEASURES}
    measures = [(key, label) for key, label, _ in _MEASURES if any(bits is not None for bits in values[key])]
    most = {key: max((bits or 0.0 for bits in values[key]), default=0.0) for key, _ in measures}
    return Triangle(
        cell=cell,
        width=round((len(names) + 1) * cell + _NAMES, 1),
        height=round(len(names) * cell + 2.0, 1),
        ground=_ground(len(names), cell),
        lines=_lines(len(names), cell),
        names=tuple(_name(place, cell, name) for place, name in enumerate(names)),
        marks=tuple(
            _mark(cells[number], {key: values[key][number] for key in most}, cell, room, most)
            for number in range(len(cells))
        ),
        frames=tuple(
            (column * cell, row * cell) for row, column, pair in cells if frozenset((pair["a"], pair["b"])) in drawn
        ),
        measures=tuple(Measure(key, label, _scale(most[key], room)) for key, label in measures),
        attributes_left_out=len(document["attributes"]) - len(names),
        pairs_not_listed=len(names) * (len(names) - 1) // 2 - len(cells),
    )


def triangle_block(shown: Triangle, place: Mapping[frozenset[str], int]) -> Markup:
    """Write for the script where each mark stands, which row of the ledger it is, and its sides."""
    return json_block(
        "triangle",
        {
            "cell": shown.cell,
            "size": len(shown.names),
            "marks": [[mark.row, mark.column, place[frozenset((mark.a, mark.b))]] for mark in shown.marks],
            "middles": [[f"{mark.x:g}", f"{mark.y:g}"] for mark in shown.marks],
            "measures": [
                {
                    "label": measure.label,
                    "sides": [f"{mark.sides[number]:g}" for mark in shown.marks],
                    "numbers": [mark.numbers[number] for mark in shown.marks] if shown.is_numbered else [],
                }
                for number, measure in enumerate(shown.measures)
            ],
        },
    )


def shortened(name: str, width: float = _NAMES - 24.0) -> str:
    """Cut a name that is wider than so many pixels of 12 pixel type; the page gives the full one elsewhere."""
    reached = np.cumsum([_advance(sign) for sign in name])
    if not len(reached) or reached[-1] <= width:
        return name
    return name[: int(np.searchsorted(reached, width - 12.0))] + "…"


def _advance(sign: str) -> float:
    """Say how many pixels a sign may need in bold type of 12 pixels, whatever the font."""
    if unicodedata.category(sign) in {"Mn", "Me", "Cf"}:
        return 0.0
    if unicodedata.east_asian_width(sign) in "WF" or sign in "mwMW@%—…":
        return 12.5
    return 9.5 if sign.isupper() or not sign.isascii() else 8.2


def _strongest_attributes(document: Mapping[str, Any]) -> list[str]:
    """Take all attributes up to 60; above that, those of the strongest pairs."""
    if len(document["attributes"]) <= TRIANGLE_ATTRIBUTES:
        return list(document["attributes"])
    ends = dict.fromkeys(
        name for pair in sorted(document["pairs"], key=lambda one: -one["bits"]) for name in (pair["a"], pair["b"])
    )
    chosen = set(list(ends)[:TRIANGLE_ATTRIBUTES])
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


def _ground(size: int, cell: float) -> str:
    """Draw the steps round all cells."""
    steps = "".join(f"h{cell:g}v{cell:g}" for _ in range(size - 1))
    return f"M0 {cell:g}{steps}H0z"


def _lines(size: int, cell: float) -> str:
    """Draw the lines between cells."""
    across = (f"M0 {row * cell:g}h{row * cell:g}" for row in range(2, size))
    down = (f"M{column * cell:g} {(column + 1) * cell:g}V{size * cell:g}" for column in range(1, size - 1))
    return "".join((*across, *down))


def _name(place: int, cell: float, name: str) -> Name:
    middle = round((place + 0.5) * cell, 1)
    return Name(middle, round((place + 1) * cell + 2.0, 1), round(middle + 4.0, 1), shortened(name), name)


def _mark(
    place: tuple[int, int, Mapping[str, Any]],
    bits: Mapping[str, float | None],
    cell: float,
    room: float,
    most: Mapping[str, float],
) -> Mark:
    """Draw one pair; bits, most: its own and the largest by measure."""
    row, column, pair = place
    shape = _SHAPES[pair["verdict"]]
    numbered = room < cell - 2.0
    return Mark(
        row=row,
        column=column,
        x=round((column + 0.5) * cell, 1),
        y=round(row * cell + (room / 2 + 2.0 if numbered else cell / 2), 1),
        shape=shape,
        sides=tuple(max(_SMALLEST[shape], _side(bits[key], most[key], room)) for key in most),
        numbers=tuple(_short(bits[key]) if numbered else "" for key in most),
        a=pair["a"],
        b=pair["b"],
        told=f"{fixed(pair['bits'], 4)} bits, {pair['verdict']}",
    )


def _short(bits: float | None) -> str:
    """Write bits in three decimals without the zero before them; nothing for what rounds to none."""
    written = fixed(bits)
    return "" if written.lstrip("-0.") == "" else written.replace("0.", ".", 1)


def _side(bits: float | None, most: float, room: float) -> float:
    return round(room * math.sqrt(max(0.0, bits or 0.0) / most), 1) if most > 0 else 0.0


def _scale(most: float, room: float) -> tuple[tuple[float, float, str], ...]:
    """Take up to four numbers 1, 2 or 5 times a power of ten that lie within the marks shown."""
    if most <= 0:
        return ()
    power = math.floor(math.log10(most))
    numbers = [factor * 10.0**exponent for exponent in (power - 1, power) for factor in (1, 2, 5)]
    inside = [number for number in numbers if number <= most * (1 + 1e-9)][-4:]
    return tuple(
        (22.0 + 100.0 * place, max(_SMALLEST["full"], _side(number, most, room)), f"{number:g}")
        for place, number in enumerate(inside)
    )
