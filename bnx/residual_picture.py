"""A picture of tested pairs: in every stratum, where records are more or fewer than independence gives."""

import math
from collections.abc import Sequence
from dataclasses import dataclass
from pathlib import Path
from typing import Literal, cast, get_args

from bnx.errors import DataError, SettingError
from bnx.files import check_free, write_bytes
from bnx.lettering import raster_bytes, wrapped
from bnx.marks import Box, Mark, Page, Told, Words, svg_bytes
from bnx.palette import Theme
from bnx.residual_cells import Grid, grid_of, panel_marks, shown_name
from bnx.residual_key import KEY_HEIGHT, key_marks
from bnx.residual_panels import PairPanels, Panel, chance_sentence, readable
from bnx.text import count_of, printable

__all__ = ["PairPanels", "Panel", "check_picture", "picture_page", "residual_picture"]

Form = Literal["svg", "png", "pdf"]

_MARGIN, _BETWEEN = 28.0, 20.0
_WIDEST, _NARROWEST = 1180.0, 720.0
_HIGHEST = 5600.0
"""Pairs are drawn until the picture is so high, in units of 1/72 inch; the first always."""


def residual_picture(
    pairs: Sequence[PairPanels], caption: str, path: Path, theme: str = "light", overwrite: bool = False
) -> None:
    """Write a picture of tested pairs as SVG, PNG or PDF; an SVG follows its reader's light or dark setting.

    Raises:
        SettingError: the ending or the theme is unknown, or the path is taken.
        DataError: there is no pair, or the file cannot be written.
    """
    form = check_picture(path, overwrite)
    if theme not in get_args(Theme):
        raise SettingError(f"--theme: {theme!r} cannot be used; give light or dark")
    if not pairs:
        raise DataError(f"there is no pair to draw in {path}; name two attributes, or --all")
    colours = cast(Theme, theme)
    page = picture_page(pairs, caption)
    drawn = svg_bytes(page, colours) if form == "svg" else raster_bytes(page, form, colours)
    write_bytes(str(path), drawn, overwrite, "--plot")


def check_picture(path: Path, overwrite: bool = False) -> Form:
    """Find out, before anything is computed, whether a picture can go there, and its form.

    Raises:
        SettingError: the ending is unknown, or the path is taken. DataError: there is no such folder.
    """
    form = path.suffix.lower().removeprefix(".")
    if form not in get_args(Form):
        raise SettingError(f"--plot {path}: the ending says nothing that can be drawn; use .svg, .png or .pdf")
    check_free(str(path), overwrite, "--plot")
    return cast(Form, form)


@dataclass(frozen=True)
class _Section:
    """A pair ready to be placed: what is shown of it, its sentences and its strata in rows."""

    pair: PairPanels
    sentences: tuple[str, ...]
    grid: Grid
    columns: int

    @property
    def width(self) -> float:
        return self.columns * (self.grid.width + _BETWEEN) - _BETWEEN

    @property
    def rows(self) -> int:
        return math.ceil(len(self.pair.panels) / self.columns)


def picture_page(pairs: Sequence[PairPanels], caption: str) -> Page:
    """Lay out the picture."""
    sections = [_section(pair) for pair in pairs]
    width = max(_NARROWEST, *(section.width for section in sections))
    drawn: list[Mark] = []
    heights: list[float] = []
    for section in sections:
        if heights and sum(heights) + _height(section, width) > _HIGHEST:
            break
        heights.append(_height(section, width))
    left_out = _pairs_left_out(len(heights), len(pairs))
    roomy = any(not section.grid.compact for section in sections[: len(heights)])
    header, y = _header(caption, left_out, width, roomy)
    for section, height in zip(sections, heights, strict=False):
        drawn += _section_marks(section, width, y)
        y += height
    spoken = f"Residuals of {count_of(len(heights), 'pair')}: {printable(caption)}"
    return Page(width + 2 * _MARGIN, round(y + _MARGIN - 24, 1), (*header, *drawn), spoken)


def _pairs_left_out(shown: int, every: int) -> str:
    if shown == every:
        return ""
    return f"{shown} of {every:,} pairs shown: the first in the order given; name the others to see them."


def _section(pair: PairPanels) -> _Section:
    shown, said = readable(pair)
    grid = grid_of(shown)
    fits = max(1, int((_WIDEST + _BETWEEN) // (grid.width + _BETWEEN)))
    rows = math.ceil(len(shown.panels) / fits)
    columns = max(1, math.ceil(len(shown.panels) / max(1, rows)))
    return _Section(shown, (chance_sentence(pair), *said), grid, columns)


def _heading(section: _Section, width: float) -> tuple[list[str], list[str]]:
    """Break the verdict and the sentences below it into lines."""
    verdict = list(wrapped(printable(section.pair.headline), 10.5, width, 3))
    sentences = [line for one in section.sentences for line in wrapped(printable(one), 9.0, width, 3)]
    return verdict, sentences


def _height(section: _Section, width: float) -> float:
    verdict, sentences = _heading(section, width)
    words = 24 + 14 * len(verdict) + 12.5 * len(sentences) + 12
    return words + section.rows * (section.grid.height + _BETWEEN) + 16


def _section_marks(section: _Section, width: float, y: float) -> list[Mark]:
    """Draw one pair below ``y``."""
    verdict, sentences = _heading(section, width)
    pair, grid = section.pair, section.grid
    names = wrapped(f"{shown_name(pair.a)} ~ {shown_name(pair.b)}", 14, width, 1, bold=True)
    marks: list[Mark] = [
        Box(_MARGIN, y, width, 0.8, "chip-edge"),
        Told("pair", f"{pair.a} ~ {pair.b}", (Words(_MARGIN, y + 24, names[0], 14, bold=True),)),
    ]
    y += 24
    for line in verdict:
        y += 14
        marks.append(Words(_MARGIN, y + 2, line, 10.5))
    y += 3
    for line in sentences:
        y += 12.5
        marks.append(Words(_MARGIN, y, line, 9.0, "small-text"))
    y += 13
    for number, panel in enumerate(pair.panels):
        row, column = divmod(number, section.columns)
        place = _MARGIN + column * (grid.width + _BETWEEN), y + row * (grid.height + _BETWEEN)
        marks += panel_marks(pair, panel, grid, *place)
    return marks


def _header(caption: str, left_out: str, width: float, roomy: bool) -> tuple[list[Mark], float]:
    """Draw the caption, what is left out, and the key; says where the pairs begin."""
    y = _MARGIN + 8
    marks: list[Mark] = []
    for line in wrapped(printable(caption), 16, width, 3, bold=True):
        marks.append(Words(_MARGIN, y + 4, line, 16, bold=True))
        y += 20
    if left_out:
        marks.append(Words(_MARGIN, y + 2, left_out, 9.0, "small-text"))
        y += 14
    return [*marks, key_marks(_MARGIN, y + 4, roomy)], y + KEY_HEIGHT + 16
