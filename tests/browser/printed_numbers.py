"""Numbers as they are printed, and the numbers of a comparison that may be printed so."""

import re
from collections.abc import Iterable, Iterator, Mapping
from typing import Any

NUMBER = re.compile(
    r"(?<![\w.,])([-+−]?)((?:\d{1,3}(?:,\d{3})+|\d+)(?:\.\d+)?|\.\d+)(e[-+]?\d+)?(?!\w|[.,]\d)((?: to [\d.]+)?\s?%)?",
)
TURNED = frozenset({"difference", "interval", "gain", "cost", "double_counted_bits"})
"""Fields whose sign a sentence may tell in words: a gain is a loss turned round."""


def numbers_in(text: str) -> list[str]:
    """List the numbers of a text, the sign of negative ones and the % of shares with them."""
    return [
        "-" * (sign in ("-", "−")) + "0" * size.startswith(".") + size + power + "%" * bool(share)
        for sign, size, power, share in NUMBER.findall(text)
    ]


def tells(printed: str, value: float) -> bool:
    """Judge whether a printed number is a value, to the digits printed; with % it is a hundred times a share."""
    return printed in _written(value, range(9)) | _shares(value)


def told(text: str, *values: float | None) -> bool:
    """Judge whether a text prints exactly these values in this order; those that are None are left out of it."""
    printed, present = numbers_in(text), [value for value in values if value is not None]
    return len(printed) == len(present) and all(map(tells, printed, present))


def _written(value: float, decimals: Iterable[int]) -> set[str]:
    written = {f"{value:,.{digits}f}" for digits in decimals}
    written |= {one.replace(",", "") for one in written}
    written |= {f"{value:.0e}", f"{value:.1e}"}
    return written | {one.removeprefix("-") for one in written if not one.strip("-0.")}


def _shares(value: float) -> set[str]:
    if abs(value) > 1:
        return set()
    bounds = {"99.9%"} if 0.9995 <= value < 1 else {"0.1%"} if 0 < value < 0.0005 else set()  # over, under
    return bounds | {f"{one}%" for one in _written(100 * value, range(3))}


def forms(value: Any, turned: bool = False) -> set[str]:
    """List how a value may be printed: whole numbers as such, others with decimals; texts by their numbers."""
    if isinstance(value, str):
        return set(numbers_in(value))
    if value is None or isinstance(value, bool):
        return set()
    whole = float(value).is_integer()
    found = _written(value, range(1 - whole, 7)) | {f"{value:.6g}", f"{value:.2g}"} | _shares(value)
    return found | forms(-value) if turned else found


def values_in(part: Any, turned: bool = False) -> Iterator[tuple[Any, bool]]:
    """Walk through all values, names and lengths of a document; with each, whether its sign may be told in words."""
    if isinstance(part, dict):
        for key, value in part.items():
            yield key, False
            yield from values_in(value, turned or key in TURNED)
    elif isinstance(part, list):
        yield len(part), False
        for value in part:
            yield from values_in(value, turned)
    else:
        yield part, turned


def known_numbers(part: Any) -> set[str]:
    """List all that the numbers of a part of a document may be printed as."""
    return {form for value, turned in set(values_in(part)) for form in forms(value, turned)}


def only(document: Mapping[str, Any], left_out: Iterable[str]) -> dict[str, Any]:
    """Leave fields out of a document."""
    gone = set(left_out)
    return {key: value for key, value in document.items() if key not in gone}
