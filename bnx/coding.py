"""From a source of rows to a coded table: which columns take part, what their levels are, and what looks odd."""

import math
from collections.abc import Iterable, Mapping, Sequence
from concurrent.futures import ThreadPoolExecutor
from dataclasses import dataclass, replace
from typing import Literal

import numpy as np

from bnx.cells import Cells
from bnx.columns import Column, Extent, Tally, TextColumn, tally
from bnx.domains import Domain, Schema
from bnx.duplicates import count_duplicates
from bnx.errors import DataError, SettingError
from bnx.levelling import Levelled, level
from bnx.passes import gather
from bnx.reading import Source
from bnx.screening import column_warnings, few_rows, reason_to_leave_out
from bnx.storing import MEMORY, Store
from bnx.tables import CodedTable, LeftOut, Lines
from bnx.text import count_of, quoted
from bnx.weighing import RowWeights, scaled, with_weight

__all__ = ["MISSING", "Coded", "SideColumn", "code_table"]

Missing = Literal["level", "drop", "sum-out"]

MISSING: tuple[Missing, ...] = ("level", "drop", "sum-out")
CLASS_LEVELS = 100
_FEW_KINDS = 10  # times the rows: repeats are then a matter of course


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
    counts the rows of the source, ``duplicates`` those that repeat an earlier one in all attributes used and the class;
    ``weighing``: the column of weights, if there is one, whose counts the rows follow already; ``extents``: of the
    attributes used, in their order.
    """

    table: CodedTable
    left_out: tuple[LeftOut, ...]
    warnings: tuple[str, ...]
    extra: Mapping[str, SideColumn]
    rows_read: int
    duplicates: int
    weighing: RowWeights | None = None
    extents: tuple[Extent, ...] = ()


@dataclass(frozen=True)
class _Raw:
    """The columns of a source, and which of its lines are used so far."""

    attributes: dict[str, Column]
    target: TextColumn
    side: dict[str, TextColumn]
    lines: Lines
    jobs: int
    store: Store


def code_table(
    source: Source,
    target: str,
    *,
    numeric: Sequence[str] = (),
    categorical: Sequence[str] = (),
    ignore: Sequence[str] = (),
    keep: Sequence[str] = (),
    missing: Missing = "level",
    max_levels: int = 50,
    extra: Sequence[str] = (),
    jobs: int = 1,
    store: Store = MEMORY,
    weights: RowWeights | None = None,
) -> Coded:
    """Code a whole source on ``jobs`` threads, keeping what has a value per row in ``store``.

    weights: of the rows, whose counts the source follows already.

    Rows with a blank class are dropped. A blank cell of an attribute becomes the level ``(blank)``; with
    ``missing="drop"`` its row is dropped, with ``"sum-out"`` the cell is one that was not observed. A column is numeric
    if ``numeric`` names it, or if every value is a plain number and more than 20 are distinct; it is stored as at most
    256 fine bins. Columns that tell nothing are left out unless ``keep`` names them. ``max_levels`` only serves to
    announce the columns whose rare levels are pooled later.

    Raises:
        DataError: a column is unknown, the class has fewer than 2 or more than 100 levels, no attribute or no row is
            left, a numeric column holds something else, or the file is malformed.
        SettingError: two settings contradict each other.
    """
    _check(source, target, numeric, categorical, ignore, keep, extra)
    apart = {target, *ignore, *extra, *([weights.column] if weights else [])}
    wishes: dict[str, bool | None] = dict.fromkeys(name for name in source.columns if name not in apart)
    wishes |= dict.fromkeys((name for name in categorical if name in wishes), False)
    wishes |= dict.fromkeys((name for name in numeric if name in wishes), True)
    raw = _gathered(source, target, wishes, extra, jobs, store)
    raw, warnings = _with_class(raw)
    if weights and not weights.counts:
        raw = replace(raw, lines=with_weight(weights, raw.lines))
    used, left_out = _screened(raw, raw.attributes, keep, drops=missing != "level")
    if missing == "drop":
        raw, dropped = _without_blanks(raw, used)
        warnings += dropped
        used, again = _screened(raw, used, keep, drops=True) if dropped else (used, [])
        left_out = sorted(left_out + again, key=lambda item: source.columns.index(item.name))
    for name in raw.attributes.keys() - used:
        raw.attributes[name].cells.clear()
    duplicates = count_duplicates([*(raw.attributes[name] for name in used), raw.target], raw.lines, jobs)
    warnings += _table_warnings(raw, used, max_levels)
    side = {name: _side(column, raw) for name, column in raw.side.items()}
    table, pooled = _coded(raw, used, veiled=missing == "sum-out")
    if weights and not weights.counts:
        table = replace(table, weights=scaled(weights, raw.lines, store))
    if weights is None or not weights.counts:  # records that a row stands for are alike by intent
        warnings += _duplicate_warning(duplicates, raw.lines.count, table.schema)
    noted = (*(weights.notes if weights else []), *warnings, *pooled)
    extents = tuple(found.extent for found in used.values())
    return Coded(table, tuple(left_out), noted, side, raw.lines.read, duplicates, weights, extents)


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


def _gathered(
    source: Source, target: str, wishes: Mapping[str, bool | None], extra: Sequence[str], jobs: int, store: Store
) -> _Raw:
    """Read attributes as ``wishes`` say (None: as they look), class and extra columns as text; in one pass.

    Attributes that turn out to be text after a thousand distinct numbers take a second pass.
    """
    texts = dict.fromkeys((target, *extra), False)
    gathered = gather(source, {**wishes, **texts}, jobs, store)
    spoilt = dict.fromkeys((name for name, gatherer in gathered.items() if gatherer.spoilt), False)
    gathered |= gather(source, spoilt, jobs, store)
    for name, wish in wishes.items():
        if wish is None:
            gathered[name].refuse_infinite()
    side = {name: gathered[name].finish_texts() for name in texts}
    columns = {name: gathered[name].finish() for name in wishes}
    classes = side.pop(target)
    return _Raw(columns, classes, side, Lines.all(len(classes.cells)), jobs, store)


def _with_class(raw: _Raw) -> tuple[_Raw, list[str]]:
    """Drop the rows whose class is blank."""
    kept = np.empty(raw.lines.read, np.bool_)
    for rows in raw.lines.stretches():
        np.logical_not(raw.target.blanks(rows), out=kept[rows])
    lines = Lines.marked(kept)
    if lines.count == lines.read:
        return raw, []
    dropped = count_of(lines.read - lines.count, "row")
    sentence = f"{dropped} of {lines.read:,} dropped because the class {raw.target.name} is blank"
    return replace(raw, lines=lines), [sentence]


def _without_blanks(raw: _Raw, used: Iterable[str]) -> tuple[_Raw, list[str]]:
    """Drop the rows with a blank cell in an attribute that takes part."""
    kept = raw.lines.kept.copy() if len(raw.lines.kept) else np.ones(raw.lines.read, np.bool_)
    for name in used:
        for rows in raw.lines.stretches():
            kept[rows] &= ~raw.attributes[name].blanks(rows)
    lines = Lines.marked(kept)
    if lines.count == raw.lines.count:
        return raw, []
    dropped = count_of(raw.lines.count - lines.count, "row")
    return replace(raw, lines=lines), [f"{dropped} of {raw.lines.count:,} dropped because a cell is blank"]


def _screened(
    raw: _Raw, attributes: Iterable[str], keep: Sequence[str], drops: bool
) -> tuple[dict[str, Tally], list[LeftOut]]:
    """Tell the attributes that take part, with their tallies, from those left out.

    Raises:
        DataError: the class cannot be used, or no attribute is left.
    """
    levels = _class_levels(raw)
    used: dict[str, Tally] = {}
    left_out = []

    def look(name: str) -> tuple[str, Tally, str | None]:
        found = tally(raw.attributes[name], raw.lines, raw.store)
        raw.attributes[name].cells.let_go()
        return name, found, reason_to_leave_out(raw.attributes[name], found, raw.target, levels, raw.lines, drops)

    with ThreadPoolExecutor(raw.jobs) as pool:
        looked = list(pool.map(look, attributes))
    for name, found, reason in looked:
        if reason and name not in keep:
            left_out.append(LeftOut(name, f"{reason}; --keep {name} to use it"))
        else:
            used[name] = found
    if not used:
        reasons = quoted([f"{item.name} ({item.reason})" for item in left_out]) or "there is no other column"
        raise DataError(f"no attribute is left beside the class {raw.target.name!r}: {reasons}")
    return used, left_out


def _class_levels(raw: _Raw) -> int:
    """Count the levels of the class.

    Raises:
        DataError: there are too few or too many.
    """
    column = raw.target
    found = tally(column, raw.lines, raw.store)
    levels = found.distinct
    if not levels:
        raise DataError(f"no row is left: in every row the class {column.name!r} or another cell is blank")
    if levels == 1:
        only = column.texts[int(found.values[0]) - 1]
        rows = count_of(raw.lines.count, "row")
        raise DataError(f"the class {column.name!r} is {only!r} in all {rows} used; it must have at least two levels")
    if levels > CLASS_LEVELS:
        raise DataError(
            f"the class {column.name!r} has {levels:,} levels; a class must be categories, at most {CLASS_LEVELS}"
        )
    return levels


def _side(column: TextColumn, raw: _Raw) -> SideColumn:
    """Code a column that is no attribute."""
    levelled = level(column, tally(column, raw.lines, raw.store))
    codes = raw.store.empty((raw.lines.count,), np.int32)
    _write(levelled, column.cells, raw.lines, codes)
    return SideColumn(column.name, levelled.domain.levels, codes)


def _table_warnings(raw: _Raw, used: Mapping[str, Tally], max_levels: int) -> list[str]:
    """Collect what looks odd in the class and the attributes used."""
    found = tally(raw.target, raw.lines, raw.store)
    levelled = level(raw.target, found)
    counts = np.zeros(len(levelled.domain), np.int64)
    counts[levelled.lookup[found.values]] = found.counts
    warnings = few_rows(raw.target.name, levelled.domain.levels, counts)
    for name, own in used.items():
        warnings += column_warnings(raw.attributes[name], own, raw.lines.count, max_levels)
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


def _coded(raw: _Raw, used: Mapping[str, Tally], veiled: bool) -> tuple[CodedTable, list[str]]:
    """Code the attributes used and the class, using up the raw columns, and warn of levels pooled at once.

    veiled: whether blank cells are cells not observed, and no level.
    """
    target = raw.store.empty((raw.lines.count,), np.uint8)
    classes = level(raw.target, tally(raw.target, raw.lines, raw.store))
    _write(classes, raw.target.cells, raw.lines, target)
    levelled = [level(raw.attributes[name], found) for name, found in used.items()]
    levelled = [one.veiled() for one in levelled] if veiled else levelled
    wide = any(one.lookup.dtype.itemsize > 1 for one in levelled)
    codes = raw.store.empty((len(used), raw.lines.count), np.uint16 if wide else np.uint8)

    def write(number: int, name: str) -> Domain:
        cells = raw.attributes[name].cells
        _write(levelled[number], cells, raw.lines, codes[number])
        cells.clear()
        raw.store.let_go(codes[number])
        return levelled[number].domain

    with ThreadPoolExecutor(raw.jobs) as pool:
        domains = tuple(pool.map(write, range(len(used)), used))
    warnings = [
        f"{one.domain.name} has too many levels to tell apart; its {one.pooled:,} rarest are pooled at once"
        for one in levelled
        if one.pooled
    ]
    return CodedTable(Schema(domains, classes.domain), codes, target, raw.lines), warnings


def _write(levelled: Levelled, cells: Cells, lines: Lines, codes: np.ndarray) -> None:
    """Code the rows used of one column."""
    done = 0
    for rows in lines.stretches():
        raw = lines.pick(rows, cells.part(rows))
        levelled.write(raw, codes[done : done + len(raw)])
        done += len(raw)
