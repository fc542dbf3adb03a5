"""The key of a residual picture: a chip explained line by line, and every way that a chip can look."""

from bnx.marks import Box, Mark, Told, Words
from bnx.residual_chip import Cell, bar, chip

__all__ = ["KEY_HEIGHT", "key_marks"]

KEY_HEIGHT = 90.0

_SAMPLE = Cell(48, 24.0, 5.2)
_SAMPLE_WIDTH, _COLUMN, _STEP = 72.0, 352.0, 15.0
_SIZE = 8.5
_LOOKS = (
    (Cell(30, 15.0, 3.0), "gain", "more records than independence gives: to the right, solid"),
    (Cell(15, 30.0, -3.0), "loss", "fewer records than independence gives: to the left, broken"),
    (Cell(16, 10.0, 1.0), "undecided", "grey: residual within ±2, within reach of chance"),
    (Cell(60, 10.0, 9.0), "gain", "pointed: over 4 times, or under a quarter of, the expected"),
)


def key_marks(x: float, y: float, roomy: bool) -> Told:
    """Draw the key with its upper left corner at (x, y); without the counts where no chip has room for them."""
    told = [
        (14.5 if roomy else 12.0, "adjusted residual, in standard errors"),
        (26.0 if roomy else 23.5, "records against those expected: ¼  ½  1  2  4 times"),
    ]
    if roomy:
        told.append((37.5, "records counted of records expected"))
    marks: list[Mark] = [
        Words(x, y + 9, "How to read a chip", _SIZE, bold=True),
        *chip(_SAMPLE, x, y + 18, _SAMPLE_WIDTH, not roomy),
    ]
    marks += [Words(x + _SAMPLE_WIDTH + 10, y + 18 + place, words, _SIZE) for place, words in told]
    marks.append(
        Words(
            x, y + (82 if roomy else 66), "Expected: what independence within the stratum gives.", _SIZE, "small-text"
        )
    )
    for number, (cell, colour, words) in enumerate(_LOOKS):
        middle = y + 6 + number * _STEP
        marks += bar(cell, x + _COLUMN + 22, middle, 16, colour)
        marks.append(Words(x + _COLUMN + 52, middle + 3, words, _SIZE))
    marks += _frames(x + _COLUMN, y + 6 + len(_LOOKS) * _STEP)
    return Told("key", "how to read a chip", tuple(marks))


def _frames(x: float, y: float) -> list[Mark]:
    """Explain the edges of a chip, and the dash in it."""
    return [
        Box(x + 5, y - 5, 14, 10, "chip", "gain", 2.0, 3.0),
        Box(x + 25, y - 5, 14, 10, "chip", "loss", 2.0, 3.0),
        Words(x + 52, y + 3, "framed: residual beyond ±4", _SIZE),
        Words(x + 12, y + _STEP + 3, "–", 10.5, anchor="middle"),
        Box(x + 25, y + _STEP - 5, 14, 10, None, "chip-edge", 0.8, 3.0, dashed=True),
        Words(x + 52, y + _STEP + 3, "residual undefined; no record of this row or column", _SIZE),
    ]
