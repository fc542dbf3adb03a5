"""Words and numbers for people: aligned tables, number formats, the nearest name."""

import difflib
import math
from collections.abc import Iterable, Sequence

__all__ = [
    "aligned",
    "bracketed",
    "count_of",
    "cut_middle",
    "fixed",
    "nearest",
    "of_p",
    "printable",
    "quoted",
    "signed",
]


_LEAST = 8  # characters of a name that is cut


def fixed(value: float | None, digits: int = 3) -> str:
    """Format a number with a fixed count of decimals; nothing for None."""
    return "" if value is None else f"{value:.{digits}f}"


def signed(value: float | None, digits: int = 3) -> str:
    """Format a number with its sign; nothing for None."""
    return "" if value is None else f"{value:+.{digits}f}"


def bracketed(ends: Sequence[float | None] | None, digits: int = 3, sign: bool = True) -> str:
    """Write an interval, its ends with their signs unless told otherwise; nothing where an end is not known."""
    if ends is None or ends[0] is None or ends[1] is None:
        return ""
    write = signed if sign else fixed
    return f"[{write(ends[0], digits)}, {write(ends[1], digits)}]"


def of_p(p: float) -> str:
    """Write a p-value with two digits; nothing for NaN."""
    if p == 0.0:
        return "<1e-300"
    return "" if math.isnan(p) else f"{p:.2g}"


def cut_middle(text: str, most: int) -> str:
    """Shorten a name to at most so many characters, keeping both its ends."""
    shown = printable(text)
    if len(shown) <= most:
        return shown
    front = (most - 1) * 2 // 3
    return f"{shown[:front]}…{shown[len(shown) - (most - 1 - front) :]}"


def count_of(number: int, noun: str, plural: str | None = None) -> str:
    """Say how many: ``1 row``, ``6,000 rows``."""
    return f"{number:,} {noun if number == 1 else plural or noun + 's'}"


def quoted(names: Iterable[str], limit: int = 8) -> str:
    """List names for a sentence, the first few in full and the others as a number."""
    every = list(names)
    shown = ", ".join(every[:limit])
    return shown if len(every) <= limit else f"{shown} and {len(every) - limit:,} more"


def nearest(name: str, names: Sequence[str]) -> str:
    """End a sentence about an unknown name: the nearest known one, or all of them."""
    close = difflib.get_close_matches(name, names, n=1, cutoff=0.6)
    if not close:
        folded = {known.casefold(): known for known in names}
        close = [folded[name.casefold()]] if name.casefold() in folded else []
    return f"did you mean {close[0]}?" if close else f"known: {quoted(names)}"


def printable(text: str) -> str:
    """Write line ends and control characters as escapes: none may break a line or steer a terminal."""
    return "".join(one if one.isprintable() else one.encode("unicode_escape").decode() for one in text)


def aligned(header: Sequence[str], rows: Iterable[Sequence[str]], left: int = 1, most: int | None = None) -> str:
    """Lay out rows under a header; the first ``left`` columns flush left, the others right.

    With ``most``, the first column is cut so that no line is longer.
    """
    lines = [[printable(cell) for cell in row] for row in (header, *rows)]
    widths = [max(len(line[k]) for line in lines) for k in range(len(header))]
    if most is not None and sum(widths) + 2 * len(widths) - 2 > most:
        widths[0] = max(_LEAST, most - sum(widths[1:]) - 2 * len(widths) + 2)
        lines = [[cut_middle(line[0], widths[0]), *line[1:]] for line in lines]
    return "\n".join(
        "  ".join(
            cell.ljust(width) if k < left else cell.rjust(width)
            for k, (cell, width) in enumerate(zip(line, widths, strict=True))
        ).rstrip()
        for line in lines
    )
