"""Numbers as they are printed, and every way in which a value of the comparison may be printed."""

import re
from collections.abc import Iterator
from typing import Any

NUMBER = re.compile(r"(?<![\w.,])[-+−]?(?:\d{1,3}(?:,\d{3})+|\d+)(?:\.\d+)?(?:e[-+]?\d+)?(?![\w])")


def numbers_in(text: str) -> list[str]:
    """List the numbers of a text, without signs: a gain is a loss turned round."""
    return [one.lstrip("-+−") for one in NUMBER.findall(text)]


def values_in(part: Any) -> Iterator[Any]:
    """Walk through all values and keys of a document."""
    if isinstance(part, dict):
        for key, value in part.items():
            yield key
            yield from values_in(value)
    elif isinstance(part, list):
        yield len(part)
        for value in part:
            yield from values_in(value)
    else:
        yield part


def forms(value: Any) -> set[str]:
    """List how a value may be printed: with 0 to 6 decimals, as a share, as a p-value; texts by their numbers."""
    if isinstance(value, str):
        return set(numbers_in(value))
    if value is None or isinstance(value, bool):
        return set()
    size = abs(value)
    written = {f"{size:,.{digits}f}" for digits in range(7)} | {f"{size:.{digits}f}" for digits in range(7)}
    if size <= 1:
        written |= {f"{100 * size:.{digits}f}" for digits in range(3)} | {f"{1000 * (1 - size):.0f}"}
    return written | {f"{size:.6g}", f"{size:g}", f"{size:.2g}", f"{size:.0e}", f"{size:.1e}"}


def printable_numbers(document: dict[str, Any]) -> set[str]:
    return {form for value in values_in(document) for form in forms(value)}
