"""What to leave out of a table, and what to warn of, before anything is learnt from it."""

from collections.abc import Sequence

import numpy as np

from bnx.blocks import part_numbers
from bnx.columns import Column, NumberColumn, Tally, TextColumn
from bnx.tables import Lines
from bnx.text import count_of, quoted

__all__ = ["column_warnings", "few_rows", "reason_to_leave_out"]

IDENTIFIER_LEVELS = 50
IDENTIFIER_SHARE = 0.9
FEW_ROWS = 10
MOSTLY_BLANK = 0.5
MOSTLY_NUMBERS = 0.9


def reason_to_leave_out(
    column: Column, found: Tally, target: TextColumn, levels: int, lines: Lines, drops_blanks: bool
) -> str | None:
    """Say why a column can or must tell nothing: all blank, constant, an identifier, or the class itself; else None.

    ``target`` is the class with ``levels`` levels in the same rows. Identifiers are sought among texts and whole
    numbers only: measurements may well differ in every row.
    """
    distinct, filled = found.distinct, found.filled
    if not distinct:
        return "every cell is blank"
    if distinct == 1 and (drops_blanks or not found.blanks):
        return f"the same value in every {'row' if not found.blanks else 'cell that is not blank'}"
    if distinct > IDENTIFIER_LEVELS and distinct > IDENTIFIER_SHARE * filled and _names_things(column, found):
        some = f"{distinct:,} different values in {filled:,} rows"
        return "a different value in every row" if distinct == filled else some
    if distinct + (found.blanks > 0) == levels and _one_to_one(column, found, target, lines):
        return "it is the class under other names"
    return None


def _names_things(column: Column, found: Tally) -> bool:
    """Tell a column that could be an identifier: texts, or whole numbers."""
    return isinstance(column, TextColumn) or found.whole


def _one_to_one(column: Column, found: Tally, target: TextColumn, lines: Lines) -> bool:
    """Tell whether every value goes with one class level and every class level with one value."""
    width = len(target.texts) + 1
    seen = np.zeros((found.distinct + 1) * width, np.bool_)
    for rows in lines.stretches():
        classes = lines.pick(rows, target.cells.part(rows))
        cells = lines.pick(rows, _places(column, found, rows)) * width + classes
        seen |= np.bincount(cells, minlength=len(seen)) > 0
        together = seen.reshape(-1, width)
        if max(together.sum(axis=0).max(), together.sum(axis=1).max()) > 1:
            return False
    return True


def _places(column: Column, found: Tally, rows: slice) -> np.ndarray:
    """Number the values of a stretch by their place among those found; blank is one of them."""
    if isinstance(column, NumberColumn):
        return np.searchsorted(found.values, column.numbers(rows))
    place = np.full(len(column.texts) + 1, found.distinct)
    place[found.values] = np.arange(found.distinct)
    return np.asarray(place[column.cells.part(rows)])


def few_rows(name: str, levels: Sequence[str], counts: np.ndarray) -> list[str]:
    """Warn of class levels with fewer than 10 rows."""
    return [
        f"class {name} = {level} has {count_of(int(count), 'row')}: every figure for this class is anecdotal"
        for level, count in zip(levels, counts, strict=True)
        if count < FEW_ROWS
    ]


def column_warnings(column: Column, found: Tally, rows: int, max_levels: int) -> list[str]:
    """Warn of a column that is mostly blank, has many levels, is nearly numeric, or spells a level in several ways."""
    warnings = []
    if found.blanks > MOSTLY_BLANK * rows:
        warnings.append(f"{column.name} is blank in {found.blanks:,} of {count_of(rows, 'row')}")
    if isinstance(column, TextColumn):
        texts = [column.texts[raw - 1] for raw in found.values]
        if len(texts) > max_levels:
            warnings.append(
                f"{column.name} has {len(texts):,} levels; "
                f"all but the {max_levels:,} most frequent of the training rows are pooled"
            )
        warnings += _nearly_numeric(column.name, texts) + _spellings(column.name, texts)
    return warnings


def _nearly_numeric(name: str, texts: list[str]) -> list[str]:
    """Warn of a text column in which only a few levels are no numbers."""
    numbers = part_numbers(texts)
    others = [text for text, number in zip(texts, numbers, strict=True) if not number]
    if not others or len(texts) - len(others) <= 20 or len(others) > (1 - MOSTLY_NUMBERS) * len(texts):
        return []
    return [
        f"{name} is read as text because of {quoted(map(repr, others), 3)}, the only "
        f"{count_of(len(others), 'level')} of {len(texts):,} that {'is' if len(others) == 1 else 'are'} not a number; "
        "leave such cells blank to have it numeric"
    ]


def _spellings(name: str, texts: list[str]) -> list[str]:
    """Warn of levels that differ only in capitals or in white space around them."""
    first: dict[str, str] = {}
    twins = [(first.setdefault(text.strip().casefold(), text), text) for text in sorted(texts)]
    pairs = [f"{one!r} and {other!r}" for one, other in twins if one != other]
    if not pairs:
        return []
    return [f"{name} has levels that differ only in capitals or in spaces around them: {quoted(pairs, 3)}"]
