"""One stratum of a residual picture: a tag plugged into a frame, and in the frame a chip for every cell."""

import math
from collections.abc import Callable, Iterator
from dataclasses import dataclass

from bnx.lettering import fitted, width_of, wrapped
from bnx.marks import Box, Mark, Told, Words
from bnx.residual_chip import COUNTS_SIZE, NUMBER_SIZES, Cell, chip, chip_height
from bnx.residual_panels import PairPanels, Panel
from bnx.text import printable

__all__ = ["Grid", "grid_of", "panel_marks", "shown_name"]

_ROOMY = 64
"""At most so many cells have room for their counts,"""
_ROOMY_WIDTH = 900.0
"""and that only if a row of them is at most so wide, in units of 1/72 inch."""
_PAD, _GAP = 14.0, 4.0
_NAME, _TITLE, _NOTE = 8.5, 9.5, 8.5
_CABLE, _RING = 9.0, 4.0
_LEAST_WIDTH = 216.0


@dataclass(frozen=True)
class Grid:
    """Sizes that all strata of a pair share, in units of 1/72 inch; ``heads`` are the column names, line by line."""

    compact: bool
    cell_width: float
    cell_height: float
    names_width: float
    heads: tuple[tuple[str, ...], ...]
    title_lines: int
    note_lines: int
    width: float
    height: float

    @property
    def frame_top(self) -> float:
        """Where the frame begins, below the tag and its cable."""
        return 8 + 12 * self.title_lines + _CABLE

    @property
    def cells_top(self) -> float:
        """Where the first row of chips begins."""
        lines = max((len(head) for head in self.heads), default=1)
        return self.frame_top + 14 + 11 * self.note_lines + 15 + 10.5 * lines + 5


def shown_name(name: str) -> str:
    """Write a name so that it can be seen and steers nothing."""
    return printable(name) if name.strip() else "(empty)"


def grid_of(pair: PairPanels) -> Grid:
    """Find the sizes that fit the names and counts of a pair."""
    rows, columns = len(pair.a_levels), len(pair.b_levels)
    counts = _widest(pair, lambda cell: width_of(cell.counts, COUNTS_SIZE)) + 12
    compact = rows * columns > _ROOMY or columns * (counts + _GAP) > _ROOMY_WIDTH
    names = [shown_name(name) for name in pair.b_levels]
    least, most = (42.0, 62.0) if compact else (62.0, 96.0)
    pieces = [piece for name in names for piece in name.replace("_", "_ ").split()]
    widest = max((width_of(piece, _NAME) for piece in pieces), default=0.0)
    numbers = _widest(pair, lambda cell: width_of(cell.number, NUMBER_SIZES[compact], bold=True)) + 8
    cell_width = math.ceil(max(least, numbers, 0.0 if compact else counts, min(most, widest + 4)))
    rows_widest = max((width_of(shown_name(name), _NAME) for name in pair.a_levels), default=0.0)
    corner = min(width_of(shown_name(pair.a), _NAME, bold=True) + 12, 110.0)
    names_width = math.ceil(max(corner, min(rows_widest, 124.0)))
    inner = names_width + 8 + columns * (cell_width + _GAP) - _GAP
    width = max(_LEAST_WIDTH, inner + 2 * _PAD)
    heads = tuple(wrapped(name, _NAME, cell_width, 3) for name in names)
    titles = max((len(_title(panel, width)) for panel in pair.panels), default=1)
    notes = max((len(_note(panel, width)) for panel in pair.panels), default=1)
    grid = Grid(compact, cell_width, chip_height(compact), names_width, heads, titles, notes, width, 0.0)
    height = grid.cells_top + rows * (grid.cell_height + _GAP) - _GAP + _PAD
    return Grid(compact, cell_width, grid.cell_height, names_width, heads, titles, notes, width, height)


def _widest(pair: PairPanels, width: Callable[[Cell], float]) -> float:
    return max((width(cell) for panel in pair.panels for _, _, cell in _cells(panel)), default=0.0)


def _cells(panel: Panel) -> Iterator[tuple[int, int, Cell]]:
    rows, columns = panel.observed.shape
    for i in range(rows):
        for j in range(columns):
            yield i, j, Cell(int(panel.observed[i, j]), float(panel.expected[i, j]), float(panel.residuals[i, j]))


def _title(panel: Panel, width: float) -> tuple[str, ...]:
    return wrapped(shown_name(panel.title), _TITLE, width - 2 * _PAD - 20, 3, bold=True)


def _note(panel: Panel, width: float) -> tuple[str, ...]:
    return wrapped(printable(panel.note), _NOTE, width - 2 * _PAD - 20, 3)


def panel_marks(pair: PairPanels, panel: Panel, grid: Grid, x: float, y: float) -> tuple[Mark, ...]:
    """Draw one stratum with its upper left corner at (x, y)."""
    left = x + _PAD + grid.names_width + 8
    top = y + grid.cells_top
    chips = []
    for i, j, cell in _cells(panel):
        where = f"{pair.a} = {shown_name(pair.a_levels[i])}, {pair.b} = {shown_name(pair.b_levels[j])}"
        place = left + j * (grid.cell_width + _GAP), top + i * (grid.cell_height + _GAP)
        marks = chip(cell, *place, grid.cell_width, grid.compact)
        chips.append(Told("cell", f"{where}: {cell.told}", marks))
    return (*_frame(panel, grid, x, y), *_names(pair, grid, left, top), *chips)


def _frame(panel: Panel, grid: Grid, x: float, y: float) -> tuple[Mark, ...]:
    """Draw the tag with the stratum's name, the cable and the frame that it is plugged into."""
    title = _title(panel, grid.width)
    top = y + grid.frame_top
    tag_height = 8 + 12 * len(title)
    tag_width = max(width_of(line, _TITLE, bold=True) for line in title) + 18
    tag_top = top - _CABLE - tag_height
    plug = x + _PAD + 9
    lines = [
        Words(x + _PAD + 9, tag_top + 13 + 12 * k, line, _TITLE, "class-text", True) for k, line in enumerate(title)
    ]
    notes = [
        Words(plug + 12, top + 15 + 11 * k, line, _NOTE, "small-text")
        for k, line in enumerate(_note(panel, grid.width))
    ]
    return (
        Box(x, top, grid.width, grid.height - grid.frame_top, "frame", "frame-edge", 1.2, 9.0),
        Told("stratum", panel.title, (Box(x + _PAD, tag_top, tag_width, tag_height, "class"), *lines)),
        Box(plug - 1.25, top - _CABLE, 2.5, _CABLE + 8, "cable"),
        Box(plug - _RING, top + 8, 2 * _RING, 2 * _RING, "frame", "cable", 2.0, _RING),
        *notes,
    )


def _names(pair: PairPanels, grid: Grid, left: float, top: float) -> tuple[Mark, ...]:
    """Write the names of both attributes and of their levels."""
    found: list[Mark] = []
    head_top = top - 5 - 10.5 * max((len(head) for head in grid.heads), default=1)
    room = len(pair.b_levels) * (grid.cell_width + _GAP)
    b = fitted(shown_name(pair.b), _NAME, room - 14, bold=True)
    a = fitted(shown_name(pair.a), _NAME, grid.names_width - 12, bold=True)
    found.append(Told("attribute", pair.b, (Words(left, head_top - 4, f"{b} →", _NAME, bold=True),)))
    found.append(Told("attribute", pair.a, (Words(left - 8, top - 6, f"{a} ↓", _NAME, bold=True, anchor="end"),)))
    for j, (name, head) in enumerate(zip(pair.b_levels, grid.heads, strict=True)):
        middle = left + j * (grid.cell_width + _GAP) + grid.cell_width / 2
        lines = [
            Words(middle, top - 6 - 10.5 * (len(head) - 1 - k), line, _NAME, anchor="middle")
            for k, line in enumerate(head)
        ]
        found.append(Told("level", name, tuple(lines)))
    for i, name in enumerate(pair.a_levels):
        middle = top + i * (grid.cell_height + _GAP) + grid.cell_height / 2 + 3
        line = fitted(shown_name(name), _NAME, grid.names_width)
        found.append(Told("level", name, (Words(left - 8, middle, line, _NAME, anchor="end"),)))
    return tuple(found)
