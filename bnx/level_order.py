"""Which attributes have ordered levels, and the scores of their levels."""

import math
from collections.abc import Mapping, Sequence

import numpy as np

from bnx.domains import Domain
from bnx.errors import DataError, SettingError
from bnx.text import nearest, quoted

__all__ = ["level_scores", "parse_ordered"]


def parse_ordered(values: Sequence[str], columns: Sequence[str]) -> dict[str, tuple[str, ...]]:
    """Read ``COL`` (levels that are numbers) and ``COL=low<middle<high``; the levels in order, none for numbers.

    Raises:
        SettingError: a column is named twice, an order holds a level twice, or a value names no column.
    """
    found: dict[str, tuple[str, ...]] = {}
    for value in values:
        name, sign, order = (value, "", "") if value in columns else value.partition("=")
        levels = tuple(level.strip() for level in order.split("<")) if sign else ()
        if name in found:
            raise SettingError(f"--ordered names {name!r} twice; name it once")
        if sign and (len(levels) < 2 or not all(levels) or len(set(levels)) < len(levels)):
            raise SettingError(f"--ordered {value}: {order!r} is no order of levels; write {name}=low<middle<high")
        found[name] = levels
    return found


def level_scores(domain: Domain, ordered: Mapping[str, tuple[str, ...]]) -> np.ndarray | None:
    """Score the levels of an attribute 1, 2, ... in their order; None if they have none.

    Levels without a place in the order, as blanks and pooled ones, have NaN.

    Raises:
        DataError: the levels are no numbers, or they are not those of the order given.
    """
    if not domain.numeric and domain.name not in ordered:
        return None
    regular = len(domain) - domain.pooled - domain.blank
    scores = np.full(len(domain), np.nan)
    scores[:regular] = (
        np.arange(regular)
        if domain.numeric
        else _places(domain.name, domain.levels[:regular], ordered.get(domain.name, ()))
    )
    return scores + 1.0


def _places(name: str, levels: Sequence[str], order: Sequence[str]) -> list[int]:
    """Find the place of every level, as an order says or else by number."""
    if order:
        unknown = [level for level in order if level not in levels]
        if unknown:
            raise DataError(f"--ordered {name}: {unknown[0]!r} is not a level of it; {nearest(unknown[0], levels)}")
        missing = [level for level in levels if level not in order]
        if missing:
            raise DataError(f"--ordered {name}: the order leaves out {quoted(missing)}; give every level its place")
        return [order.index(level) for level in levels]
    numbers = [_number(level) for level in levels]
    if not all(map(math.isfinite, numbers)):
        raise DataError(
            f"--ordered {name}: its levels ({quoted(levels)}) are no numbers; give their order, from low to high, as "
            f"in --ordered '{name}=LOWEST<...<HIGHEST', with quotation marks"
        )
    return [sorted(set(numbers)).index(number) for number in numbers]


def _number(text: str) -> float:
    """Read a number; NaN if it is none."""
    try:
        return float(text)
    except ValueError:
        return math.nan
