"""One cell of a table as a chip.

It carries the adjusted residual as a number and, on a scale of doublings around a tick in its middle, a bar: to the
right and solid where there are more records than independence gives, to the left and broken where there are fewer.
The bar says how large a departure is, the number how sure; colour comes only with residuals beyond 2.
"""

import math
from collections.abc import Iterator
from dataclasses import dataclass

from bnx.marks import Box, Mark, Wedge, Words
from bnx.residual_panels import grade

__all__ = ["COUNTS_SIZE", "NUMBER_SIZES", "Cell", "bar", "chip", "chip_height"]

DOUBLINGS = 2.0
"""A bar ends at four times, or a quarter of, the records that independence gives."""
COUNTS_SIZE = 7.5
NUMBER_SIZES = {False: 10.5, True: 9.0}
"""Compact or not -> size of the residual."""
MINUS = "−"


@dataclass(frozen=True)
class Cell:
    """Rows counted, rows that independence gives and the adjusted residual; NaN where undefined."""

    observed: int
    expected: float
    residual: float

    @property
    def counts(self) -> str:
        """Write ``48 of 31.2``, or nothing where independence gives no number."""
        if not math.isfinite(self.expected):
            return ""
        return f"{self.observed:,} of {self.expected:,.{0 if self.expected >= 1000 else 1}f}"

    @property
    def number(self) -> str:
        """Write the residual with its sign, a dash where it is undefined."""
        if not math.isfinite(self.residual):
            return "–"
        rounded = f"{abs(self.residual):.1f}"
        if rounded in ("2.0", "4.0"):  # the grades end there: say on which side
            rounded = f"{abs(self.residual):.2f}"
        return rounded if rounded == "0.0" else f"{'+' if self.residual > 0 else MINUS}{rounded}"

    @property
    def doublings(self) -> float | None:
        """Take the binary logarithm of counted over expected; None where there is nothing to compare."""
        if not math.isfinite(self.expected) or self.expected <= 0:
            return None
        return math.log2(self.observed / self.expected) if self.observed else -math.inf

    @property
    def told(self) -> str:
        """Say everything about the cell."""
        if not math.isfinite(self.expected):
            return "no record of this row or column in this stratum"
        residual = f"residual {self.residual:+.2f}" if math.isfinite(self.residual) else "residual undefined"
        return f"{self.observed:,} records, {self.expected:,.2f} expected, {residual}"


def chip_height(compact: bool) -> float:
    """Say how high chips are; compact ones have no counts."""
    return 27.0 if compact else 42.0


def chip(cell: Cell, x: float, y: float, width: float, compact: bool) -> tuple[Mark, ...]:
    """Draw one cell with its upper left corner at (x, y)."""
    height, middle = chip_height(compact), x + width / 2
    if not math.isfinite(cell.expected):
        return (Box(x, y, width, height, None, "chip-edge", 0.8, 4.0, dashed=True),)
    strength, more = grade(cell.residual), cell.residual > 0
    colour = "gain" if more else "loss"
    words = ("gain" if more else "loss-text") if strength else "text"
    edge, line = (colour, 2.0) if strength == 2 else ("chip-edge", 0.8)
    baseline = 12.0 if compact else 14.5
    marks: list[Mark] = [
        Box(x, y, width, height, "chip", edge, line, 4.0),
        Words(middle, y + baseline, cell.number, NUMBER_SIZES[compact], words, bool(strength), "middle"),
        *bar(cell, middle, y + (19.5 if compact else 22.5), (width - 18) / 2, colour if strength else "undecided"),
    ]
    if not compact:
        marks.append(Words(middle, y + 37.0, cell.counts, COUNTS_SIZE, "small-text", False, "middle"))
    return tuple(marks)


def bar(cell: Cell, middle: float, y: float, reach: float, colour: str) -> Iterator[Mark]:
    """Draw the scale, the bar on it, and a wedge where the bar would run over the scale's end."""
    yield Box(middle - reach, y - 0.3, 2 * reach, 0.6, "chip-edge")
    for half in (-reach / 2, reach / 2):
        yield Box(middle + half - 0.3, y - 1.8, 0.6, 3.6, "chip-edge")
    doublings = cell.doublings
    if doublings is not None:
        thick = 3.2 if colour == "undecided" else 5.0
        length = reach * min(1.0, abs(doublings) / DOUBLINGS)
        if doublings > 0:
            yield Box(middle, y - thick / 2, length, thick, colour)
        else:
            yield from _broken(middle, y - thick / 2, length, thick, colour)
        if abs(doublings) > DOUBLINGS:
            end = middle + math.copysign(reach + 0.6, doublings)
            tip = end + math.copysign(4.0, doublings)
            yield Wedge(((end, y - 3.4), (tip, y), (end, y + 3.4)), colour)
    yield Box(middle - 0.6, y - 4.0, 1.2, 8.0, "text")


def _broken(right: float, y: float, length: float, thick: float, colour: str) -> Iterator[Mark]:
    """Draw a bar to the left, in pieces of 2 with gaps of 1.2."""
    place = 0.0
    while place < length:
        piece = min(2.0, length - place)
        yield Box(right - place - piece, y, piece, thick, colour)
        place += 3.2
