"""How wide words are, and a page of marks as PNG or PDF: all that needs matplotlib, whose import takes a while."""

import math
import re
import warnings
from collections.abc import Iterable
from functools import cache
from io import BytesIO
from pathlib import Path
from typing import Literal

import matplotlib as mpl
from matplotlib.figure import Figure
from matplotlib.font_manager import get_font_names
from matplotlib.ft2font import FT2Font
from matplotlib.patches import FancyBboxPatch, Polygon, Rectangle
from matplotlib.text import Text
from matplotlib.transforms import Affine2D, Transform

from bnx.marks import Box, Mark, Page, Told, Wedge, Words
from bnx.palette import PALETTES, Theme

__all__ = ["fitted", "raster_bytes", "width_of", "wrapped"]

MEASURED_IN = "DejaVu Sans"
SUBSTITUTES = (
    "Noto Sans CJK SC",
    "Noto Sans CJK JP",
    "Noto Sans CJK KR",
    "Noto Sans Arabic",
    "Noto Sans Hebrew",
    "Noto Sans Devanagari",
    "Noto Sans Thai",
    "WenQuanYi Zen Hei",
    "PingFang SC",
    "Microsoft YaHei",
    "Segoe UI Symbol",
    "Arial Unicode MS",
)
"""Where the measuring font lacks a sign, those of these that the machine has are tried; a hollow box otherwise."""

_METADATA: dict[str, dict[str, str | None]] = {
    "png": {"Software": "bnx"},
    "pdf": {"Creator": "bnx", "Producer": None, "CreationDate": None},
}
"""Without dates, so that equal pictures are equal files."""
_WIDEST = 1.0
"""Width, in parts of the size, of a sign that the measuring font lacks."""


@cache
def _font(bold: bool) -> FT2Font:
    return FT2Font(str(Path(mpl.get_data_path()) / "fonts" / "ttf" / f"DejaVuSans{'-Bold' if bold else ''}.ttf"))


@cache
def _advance(sign: str, bold: bool) -> float:
    """Measure one sign, in parts of the font's size."""
    font = _font(bold)
    if not font.get_char_index(ord(sign)):
        return _WIDEST
    font.set_size(100.0, 72.0)
    return font.load_char(ord(sign)).linearHoriAdvance / 65536 / 100


def width_of(text: str, size: float, bold: bool = False) -> float:
    """Measure a line in units of 1/72 inch; signs that the measuring font lacks count as full squares."""
    return size * math.fsum(_advance(sign, bold) for sign in text)


def fitted(text: str, size: float, width: float, bold: bool = False) -> str:
    """Cut a line that is too wide in its middle, since many names differ at their ends only."""
    if width_of(text, size, bold) <= width:
        return text
    kept = min(len(text) - 1, int(width / (size * 0.2)))
    while kept > 1:
        tail = kept // 3
        cut = f"{text[: kept - tail].rstrip()}…{text[len(text) - tail :].lstrip()}"
        if width_of(cut, size, bold) <= width:
            return cut
        kept -= 1
    return f"{text[:kept]}…"


def wrapped(text: str, size: float, width: float, lines: int, bold: bool = False) -> tuple[str, ...]:
    """Break text into at most so many lines, at spaces and behind ``_ - /``; what is too long is cut."""
    found: list[str] = []
    rest = text.strip()
    while rest and len(found) < lines - 1 and width_of(rest, size, bold) > width:
        line = ""
        for piece in re.findall(r"\s*[^\s_/-]*[_/-]?", rest):
            if width_of((line + piece).rstrip(), size, bold) > width:
                break
            line += piece
        if not line:
            break
        found.append(line.rstrip())
        rest = rest[len(line) :].lstrip()
    return (*found, fitted(rest, size, width, bold))


def raster_bytes(page: Page, form: Literal["png", "pdf"], theme: Theme) -> bytes:
    """Draw a page as PNG (144 dots an inch) or PDF, whatever the user's matplotlibrc says; no date is written."""
    file = BytesIO()
    with mpl.rc_context(), warnings.catch_warnings():
        mpl.rcdefaults()
        mpl.rcParams["pdf.fonttype"] = 42
        mpl.rcParams["font.family"] = [MEASURED_IN, *_substitutes()]
        warnings.filterwarnings("ignore", message=".*Glyph.*missing from")
        figure = Figure(figsize=(page.width / 72, page.height / 72), dpi=144, facecolor=PALETTES[theme]["background"])
        place = Affine2D().scale(1 / 72, -1 / 72).translate(0, page.height / 72) + figure.dpi_scale_trans
        for artist in _artists(page.marks, place, theme):
            figure.add_artist(artist)
        figure.savefig(file, format=form, metadata=_METADATA[form])
    return file.getvalue()


def _substitutes() -> list[str]:
    here = frozenset(get_font_names())
    return [name for name in SUBSTITUTES if name in here]


def _artists(
    marks: Iterable[Mark], place: Transform, theme: Theme
) -> Iterable[Rectangle | FancyBboxPatch | Polygon | Text]:
    colours = PALETTES[theme]
    for mark in marks:
        match mark:
            case Box():
                yield _box(mark, place, theme)
            case Wedge():
                yield Polygon(mark.points, closed=True, facecolor=colours[mark.fill], linewidth=0, transform=place)
            case Words():
                yield _text(mark, place, theme)
            case Told():
                yield from _artists(mark.marks, place, theme)


def _box(box: Box, place: Transform, theme: Theme) -> Rectangle | FancyBboxPatch:
    patch: Rectangle | FancyBboxPatch = Rectangle((box.x, box.y), box.width, box.height)
    if box.radius:
        corners = f"round,pad=0,rounding_size={box.radius}"
        patch = FancyBboxPatch((box.x, box.y), box.width, box.height, boxstyle=corners)
    patch.set_facecolor(PALETTES[theme][box.fill] if box.fill else "none")
    patch.set_edgecolor(PALETTES[theme][box.edge] if box.edge else "none")
    patch.set_linewidth(box.line if box.edge else 0.0)
    patch.set_linestyle((0, (2 / box.line, 2 / box.line)) if box.dashed else "solid")
    patch.set_transform(place)
    return patch


def _text(words: Words, place: Transform, theme: Theme) -> Text:
    """Letter one line; the signs ``$ _ ^`` are themselves, not mathematics."""
    side: Literal["left", "center", "right"] = (
        "left" if words.anchor == "start" else "center" if words.anchor == "middle" else "right"
    )
    return Text(
        words.x,
        words.y,
        words.text,
        color=PALETTES[theme][words.fill],
        fontsize=words.size,
        fontweight="bold" if words.bold else "normal",
        horizontalalignment=side,
        verticalalignment="baseline",
        parse_math=False,
        transform=place,
    )
