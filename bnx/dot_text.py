"""Words in DOT: names that cannot break out of it, cut to fit, and how wide they come out."""

import html
import re
import unicodedata
from collections.abc import Iterable, Iterator

from graphviz import escape, quoting

__all__ = ["cell", "clean", "cut", "hint", "lines_of", "markup", "quote", "width_of"]

NAME_COLUMNS = 22
"""Columns of a chip's name; a wide (East Asian) character takes two."""

# Control characters, lone surrogates, non-characters (none may stand in XML) and marks that turn the reading direction.
_UNPRINTABLE = re.compile("[\x00-\x1f\x7f-\x9f\u200e\u200f\u2028-\u202e\u2066-\u2069\ud800-\udfff\ufffe\uffff]")


def clean(text: str) -> str:
    """Replace the characters no picture can carry."""
    return _UNPRINTABLE.sub("\ufffd", text)


def quote(text: str) -> str:
    """Write text as a quoted DOT label that draws back as it was."""
    return str(quoting.quote(escape(html.escape(clean(text), quote=False))))


def hint(text: str) -> str:
    """Write text as a quoted DOT tooltip; engines undo the escapes of those twice."""
    return quote(clean(text).replace("\\", "\\\\"))


def markup(text: str) -> str:
    """Write text for the inside of a DOT table; a backslash would start an escape there too."""
    return html.escape(clean(text)).replace("\\", "\\\\")


def _columns(text: str) -> Iterator[int]:
    for character in text:
        if unicodedata.combining(character):
            yield 0
        else:
            yield 2 if unicodedata.east_asian_width(character) in "WF" else 1


def cut(text: str, columns: int = NAME_COLUMNS) -> str:
    """Shorten text to some columns, with an ellipsis in place of the rest."""
    text = clean(text)
    if sum(_columns(text)) <= columns:
        return text
    kept, room = 0, columns - 1
    for taken in _columns(text):
        room -= taken
        if room < 0:
            break
        kept += 1
    return text[:kept].rstrip() + "…"


def width_of(text: str, points: float, share: float = 0.6) -> int:
    """Reckon the width of text in points, ``share`` of its height a column; the typeface of the reader is not known."""
    return round(sum(_columns(text)) * points * share) + 2


def lines_of(phrases: Iterable[tuple[str, str]], columns: int = 92) -> list[list[tuple[str, str]]]:
    """Share out phrases, each with its colour, over lines of at most so many columns where possible."""
    lines: list[list[tuple[str, str]]] = []
    room = 0
    for phrase, colour in phrases:
        if len(phrase) > room or not lines:
            lines.append([])
            room = columns
        lines[-1].append((phrase, colour))
        room -= len(phrase) + 3
    return lines


def cell(text: str, points: float, colour: str, width: int, height: int, bold: bool = False) -> str:
    """Write one table cell of a fixed size in points whose words start at its left edge, whatever typeface there is."""
    words = markup(text) or "&#160;"
    words = f"<B>{words}</B>" if bold else words
    return (
        f'<TD FIXEDSIZE="TRUE" WIDTH="{width}" HEIGHT="{height}" ALIGN="LEFT">'
        f'<FONT POINT-SIZE="{points:g}" COLOR="{colour}">{words}<BR ALIGN="LEFT"/></FONT></TD>'
    )
