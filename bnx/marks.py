"""Marks on a page, and the page as an SVG that serves light and dark readers.

Lengths are units of 1/72 inch from the upper left corner; colours are tokens of the palette.
"""

from collections.abc import Iterator, Sequence
from dataclasses import dataclass
from typing import Literal
from xml.etree import ElementTree as ET

from bnx.palette import PALETTES, Theme
from bnx.svg import themed
from bnx.text import printable

__all__ = ["FONTS", "Anchor", "Box", "Mark", "Page", "Told", "Wedge", "Words", "svg_bytes"]

FONTS = ("DejaVu Sans", "Verdana", "Arial", "Helvetica", "sans-serif")
"""Fonts of an SVG, the first that the reader has.

Text stays text, so that it can be searched, copied and read aloud. It is measured in the first font; the second has
the same widths and the others are narrower, so that no text leaves its box.
"""

_SVG = "{http://www.w3.org/2000/svg}"
Anchor = Literal["start", "middle", "end"]


@dataclass(frozen=True)
class Box:
    """A rectangle; ``edge`` is drawn ``line`` wide, dashed where asked, the corners rounded by ``radius``."""

    x: float
    y: float
    width: float
    height: float
    fill: str | None = None
    edge: str | None = None
    line: float = 1.0
    radius: float = 0.0
    dashed: bool = False


@dataclass(frozen=True)
class Wedge:
    """A filled polygon."""

    points: tuple[tuple[float, float], ...]
    fill: str


@dataclass(frozen=True)
class Words:
    """One line of text; ``x`` is where it is anchored, ``y`` its baseline."""

    x: float
    y: float
    text: str
    size: float
    fill: str = "text"
    bold: bool = False
    anchor: Anchor = "start"


@dataclass(frozen=True)
class Told:
    """Marks that belong together, and what a reader is told who points at them; ``kind`` names them for programs."""

    kind: str
    title: str
    marks: tuple["Mark", ...]


Mark = Box | Wedge | Words | Told


@dataclass(frozen=True)
class Page:
    """A picture; ``spoken`` is what a screen reader calls it."""

    width: float
    height: float
    marks: tuple[Mark, ...]
    spoken: str


def svg_bytes(page: Page, theme: Theme) -> bytes:
    """Write a page as SVG."""
    size = f"{page.width:g}", f"{page.height:g}"
    root = ET.Element(
        f"{_SVG}svg",
        {"width": f"{size[0]}pt", "height": f"{size[1]}pt", "viewBox": f"0 0 {size[0]} {size[1]}"},
    )
    root.set("font-family", ", ".join(FONTS))
    background = Box(0, 0, page.width, page.height, fill="background")
    titles = list(_append(root, (background, *page.marks), theme))
    root = ET.fromstring(themed(ET.tostring(root)))  # it takes titles for those of an engine, so they come after it
    root.set("aria-label", page.spoken)
    for group, title in zip(root.iter(f"{_SVG}g"), titles, strict=True):
        one = ET.Element(f"{_SVG}title")
        one.text = printable(title)
        group.insert(0, one)
    text: str = ET.tostring(root, encoding="unicode")
    return f'<?xml version="1.0" encoding="UTF-8"?>\n{text}\n'.encode()


def _append(parent: ET.Element, marks: Sequence[Mark], theme: Theme) -> Iterator[str]:
    """Append marks; yields the titles of groups in document order."""
    colours = PALETTES[theme]
    for mark in marks:
        match mark:
            case Box():
                ET.SubElement(parent, f"{_SVG}rect", _rectangle(mark, theme))
            case Wedge():
                points = " ".join(f"{_number(x)},{_number(y)}" for x, y in mark.points)
                ET.SubElement(parent, f"{_SVG}polygon", {"points": points, "fill": colours[mark.fill]})
            case Words():
                _write(parent, mark, theme)
            case Told():
                group = ET.SubElement(parent, f"{_SVG}g", {"class": f"bnx-{mark.kind}"})
                yield mark.title
                yield from _append(group, mark.marks, theme)


def _number(value: float) -> str:
    return f"{value:.2f}".rstrip("0").rstrip(".")


def _rectangle(box: Box, theme: Theme) -> dict[str, str]:
    places = {"x": box.x, "y": box.y, "width": box.width, "height": box.height}
    found = {name: _number(value) for name, value in places.items()}
    found["fill"] = PALETTES[theme][box.fill] if box.fill else "none"
    if box.radius:
        found["rx"] = _number(box.radius)
    if box.edge:
        found |= {"stroke": PALETTES[theme][box.edge], "stroke-width": _number(box.line)}
    if box.dashed:
        found["stroke-dasharray"] = "2 2"
    return found


def _write(parent: ET.Element, words: Words, theme: Theme) -> None:
    found = {"x": _number(words.x), "y": _number(words.y), "font-size": _number(words.size)}
    found["fill"] = PALETTES[theme][words.fill]
    if words.bold:
        found["font-weight"] = "bold"
    if words.anchor != "start":
        found["text-anchor"] = words.anchor
    ET.SubElement(parent, f"{_SVG}text", found).text = words.text
