"""From a source of rows to a coded table: which columns take part, what their levels are, and what looks odd."""

import math
from collections.abc import Iterable, Mapping, Sequence
from dataclasses import dataclass
from typing import Literal

import numpy as np

from bnx.columns import Gatherer, NumberColumn, Tally, TextColumn, tally
from bnx.domains import Schema
from bnx.errors import DataError, SettingError
from bnx.levelling import level
from bnx.reading import Source
from bnx.screening import column_warnings, count_duplicates, few_rows, reason_to_leave_out
from bnx.tables import CodedTable, LeftOut
from bnx.text import count_of, quoted

__all__ = ["Coded", "SideColumn", "code_table"]

CLASS_LEVELS = 100
_FEW_KINDS = 10  # times the rows: repeats are then a matter of course

Column = TextColumn | NumberColumn


@dataclass(frozen=True)
class SideColumn:
    """A column that is no attribute (groups, given folds): ``codes`` (N,) int32 into ``levels``."""

    name: str
    levels: tuple[str, ...]
    codes: np.ndarray


@dataclass(frozen=True)
class Coded:
    """A coded table with all that was noticed on the way.

    ``warnings`` are sentences; ``extra`` holds the columns asked for beside the attributes, by name; ``rows_read``
    counts the rows of the source, ``duplicates`` those that repeat an earlier one in all attributes used and the class.
    """

    table: CodedTable
    left_out: tuple[LeftOut, ...]
    warnings: tuple[str, ...]
    extra: Mapping[str, SideColumn]
    rows_read: int
    duplicates: int


@dataclass(frozen=True)
class _Raw:
    """The columns of some rows of the source; ``rows`` (N,) int64 are their 0-based lines."""

    attributes: dict[str, Column]
    target: TextColumn
    side: dict[str, TextColumn]
    rows: np.ndarray

    def take(self, rows: np.ndarray) -> "_Raw":
        """Keep some rows."""
        return _Raw(
            {name: column.take(rows) for name, column in self.attributes.items()},
            self.target.take(rows),
            {name: column.take(rows) for name, column in self.side.items()},
            self.rows[rows],
        )


def code_table(
    source: Source,
    target: str,
    *,
    numeric: Sequence[str] = (),
    categorical: Sequence[str] = (),
    ignore: Sequence[str] = (),
    keep: Sequence[str] = (),
    missing: Literal["level", "drop"] = "level",
    max_levels: int = 50,
    extra: Sequence[str] = (),
) -> Coded:
    """Code a whole source.

    Rows with a blank class are dropped. A blank cell of an attribute becomes the level ``(blank)``, or with
    ``missing="drop"`` its row is dropped. A column is numeric if ``numeric`` names it, or if every value is a plain
    number and more than 20 are distinct; it is stored as at most 256 fine bins. Columns that tell nothing are left out
    unless ``keep`` names them. ``max_levels`` only serves to announce the columns whose rare levels are pooled later.

    Raises:
        DataError: a column is unknown, the class has fewer than 2 or more than 100 levels, no attribute or no row is
            left, a numeric column holds something else, or the file is malformed.
        SettingError: two settings contradict each other.
    """
    _check(source, target, numeric, categorical, ignore, keep, extra)
    wishes: dict[str, bool | None] = dict.fromkeys(
        name for name in source.columns if name not in {target, *ignore, *extra}
    )
    wishes |= dict.fromkeys((name for name in categorical if name in wishes), False)
    wishes |= dict.fromkeys((name for name in numeric if name in wishes), True)
    raw = _gathered(source, target, wishes, extra)
    read = len(raw.rows)
    raw, warnings = _with_class(raw)
    used, left_out = _screened(raw, raw.attributes, keep, drops=missing == "drop")
    if missing == "drop":
        raw, dropped = _without_blanks(raw, used)
        warnings += dropped
        used, again = _screened(raw, used, keep, drops=True) if dropped else (used, [])
        left_out = sorted(left_out + again, key=lambda item: source.columns.index(item.name))
    duplicates = count_duplicates([*(raw.attributes[name] for name in used), raw.target])
    table, pooled = _coded(raw, used)
    warnings += _table_warnings(raw, used, max_levels) + _duplicate_warning(duplicates, len(raw.rows), table.schema)
    side = {name: _side(column) for name, column in raw.side.items()}
    return Coded(table, tuple(left_out), tuple(warnings + pooled), side, read, duplicates)


def _check(
    source: Source,
    target: str,
    numeric: Sequence[str],
    categorical: Sequence[str],
    ignore: Sequence[str],
    keep: Sequence[str],
    extra: Sequence[str],
) -> None:
    """Refuse unknown columns and settings that contradict each other."""
    source.check([target, *numeric, *categorical, *ignore, *keep, *extra])
    for first, second, one, other in (
        ([target], ignore, "the class", "ignore"),
        ([target], numeric, "the class (which must be categories)", "numeric"),
        ([target], extra, "the class", "the group or fold column"),
        (numeric, categorical, "numeric", "categorical"),
        (ignore, keep, "ignore", "keep"),
    ):
        both = [name for name in first if name in second]
        if both:
            raise SettingError(f"column {both[0]!r} is given as {one} and also as {other}; it can be only one of them")


def _gathered(source: Source, target: str, wishes: Mapping[str, bool | None], extra: Sequence[str]) -> _Raw:
    """Read attributes as ``wishes`` say (None: as they look), class and extra columns as text; in one pass.

    Attributes that turn out to be text after a thousand distinct numbers take a second pass.
    """
    attributes = {name: Gatherer(name, wish) for name, wish in wishes.items()}
    texts = {name: Gatherer(name, False) for name in (target, *extra)}
    gatherers = attributes | texts
    for batch in source.blocks(list(gatherers)):
        for gatherer, array in zip(gatherers.values(), batch.columns, strict=True):
            gatherer.add(array)
    spoilt = {name: Gatherer(name, False) for name, gatherer in attributes.items() if gatherer.spoilt}
    for batch in source.blocks(list(spoilt)) if spoilt else ():
        for gatherer, array in zip(spoilt.values(), batch.columns, strict=True):
            gatherer.add(array)
    side = {name: gatherer.finish_texts() for name, gatherer in texts.items()}
    columns = {name: gatherer.finish() for name, gatherer in (attributes | spoilt).items()}
    classes = side.pop(target)
    return _Raw(columns, classes, side, np.arange(len(classes.codes), dtype=np.int64))


def _with_class(raw: _Raw) -> tuple[_Raw, list[str]]:
    """Drop the rows whose class is blank."""
    rows, read = np.flatnonzero(~raw.target.blanks), len(raw.rows)
    if len(rows) == read:
        return raw, []
    dropped = count_of(read - len(rows), "row")
    return raw.take(rows), [f"{dropped} of {read:,} dropped because the class {raw.target.name} is blank"]


def _without_blanks(raw: _Raw, used: Iterable[str]) -> tuple[_Raw, list[str]]:
    """Drop the rows with a blank cell in an attribute that takes part."""
    rows = np.flatnonzero(~np.logical_or.reduce([raw.attributes[name].blanks for name in used]))
    if len(rows) == len(raw.rows):
        return raw, []
    dropped = count_of(len(raw.rows) - len(rows), "row")
    return raw.take(rows), [f"{dropped} of {len(raw.rows):,} dropped because a cell is blank"]


def _screened(
    raw: _Raw, attributes: Iterable[str], keep: Sequence[str], drops: bool
) -> tuple[dict[str, Tally], list[LeftOut]]:
    """Tell the attributes that take part, with their tallies, from those left out.

    Raises:
        DataError: the class cannot be used, or no attribute is left.
    """
    levels = _class_levels(raw.target)
    used: dict[str, Tally] = {}
    left_out = []
    for name in attributes:
        found = tally(raw.attributes[name])
        reason = reason_to_leave_out(raw.attributes[name], found, raw.target, levels, drops)
        if reason and name not in keep:
            left_out.append(LeftOut(name, f"{reason}; --keep {name} to use it"))
        else:
            used[name] = found
    if not used:
        reasons = quoted([f"{item.name} ({item.reason})" for item in left_out]) or "there is no other column"
        raise DataError(f"no attribute is left beside the class {raw.target.name!r}: {reasons}")
    return used, left_out


def _class_levels(column: TextColumn) -> int:
    """Count the levels of the class.

    Raises:
        DataError: there are too few or too many.
    """
    found = tally(column)
    levels = len(found.values)
    if not levels:
        raise DataError(f"no row is left: in every row the class {column.name!r} or another cell is blank")
    if levels == 1:
        only = column.texts[int(found.values[0]) - 1]
        rows = count_of(len(column.codes), "row")
        raise DataError(f"the class {column.name!r} is {only!r} in all {rows} used; it must have at least two levels")
    if levels > CLASS_LEVELS:
        raise DataError(
            f"the class {column.name!r} has {levels:,} levels; a class must be categories, at most {CLASS_LEVELS}"
        )
    return levels


def _side(column: TextColumn) -> SideColumn:
    """Code a column that is no attribute."""
    levelled = level(column, tally(column))
    return SideColumn(column.name, levelled.domain.levels, levelled.codes.astype(np.int32))


def _table_warnings(raw: _Raw, used: Mapping[str, Tally], max_levels: int) -> list[str]:
    """Collect what looks odd in the class and the attributes used."""
    classes = level(raw.target, tally(raw.target))
    counts = np.bincount(classes.codes, minlength=len(classes.domain))
    warnings = few_rows(raw.target.name, classes.domain.levels, counts)
    for name, found in used.items():
        warnings += column_warnings(raw.attributes[name], found, len(raw.rows), max_levels)
    return warnings


def _duplicate_warning(duplicates: int, rows: int, schema: Schema) -> list[str]:
    """Warn of rows that may be copies; where few kinds of rows are possible, they repeat anyway."""
    kinds = math.prod(len(domain) for domain in (*schema.attributes, schema.target))
    if not duplicates:
        return []
    sentence = (
        f"{count_of(duplicates, 'row')} of {rows:,} {'repeats' if duplicates == 1 else 'repeat'} an earlier row in "
        "every attribute used and the class"
    )
    if kinds <= _FEW_KINDS * rows:
        return [f"{sentence}, as must happen where only {kinds:,} different rows are possible"]
    return [f"{sentence}; if they are copies of one record, every figure is too sure of itself"]


def _coded(raw: _Raw, used: Mapping[str, Tally]) -> tuple[CodedTable, list[str]]:
    """Code the attributes used and the class, and warn of levels pooled at once."""
    classes = level(raw.target, tally(raw.target))
    texts = [found for name, found in used.items() if isinstance(raw.attributes[name], TextColumn)]
    wide = any(len(found.values) + (found.blanks > 0) > 1 << 8 for found in texts)
    codes = np.empty((len(used), len(raw.rows)), dtype=np.uint16 if wide else np.uint8)
    domains, warnings = [], []
    for row, (name, found) in enumerate(used.items()):
        levelled = level(raw.attributes[name], found)
        codes[row] = levelled.codes
        domains.append(levelled.domain)
        if levelled.pooled:
            warnings.append(
                f"{name} has too many levels to tell apart; its {levelled.pooled:,} rarest are pooled at once"
            )
    table = CodedTable(Schema(tuple(domains), classes.domain), codes, classes.codes.astype(np.uint8), raw.rows)
    return table, warnings
