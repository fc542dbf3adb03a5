"""The attributes as the page shows them: levels by class, blanks, pooled values and charts, every figure as printed."""

from collections.abc import Iterator, Mapping, Sequence
from dataclasses import dataclass
from typing import Any

from bnx.findings import percent
from bnx.level_charts import FEW_RECORDS, LevelChart, level_chart
from bnx.text import count_of, fixed

__all__ = ["Attribute", "ClassCell", "ClassHead", "LevelRow", "Words", "attribute_rows"]

_OPEN_AT_FIRST = 3
_CELLS_ON_PAGE = 12_000  # of all tables of levels; six bars of a chart count as one
_NAMED = 3  # levels in a sentence
_DASH = "–"

Words = tuple[tuple[str, bool], ...]
"""Parts of a sentence; True for those that are names."""
Entry = Mapping[str, Any]


@dataclass(frozen=True)
class ClassHead:
    """One class: its name, records and share of all."""

    name: str
    rows: str
    share: str


@dataclass(frozen=True)
class ClassCell:
    """Records of one level and class: how many, their share of the level, the bar and the usual share, 0 to 100."""

    rows: str
    share: str
    bar: float
    usual: float


@dataclass(frozen=True)
class LevelRow:
    """One level, or the cells not observed, which are none; ``speaks``: class and bits, or nothing."""

    name: str
    is_level: bool
    soft: bool
    rows: str
    share: str
    cells: tuple[ClassCell, ...]
    speaks: tuple[str, str] | None


@dataclass(frozen=True)
class Attribute:
    """One attribute; ``bar`` in 0 to 100; ``missing``: why there is no table, else nothing."""

    name: str
    kind: str
    bits: str
    bar: float
    notes: tuple[str, ...]
    is_open: bool
    cautions: tuple[Words, ...]
    pooled: tuple[str, tuple[tuple[str, str], ...], str] | None
    heads: tuple[ClassHead, ...]
    levels: tuple[LevelRow, ...]
    chart: LevelChart | None
    not_drawn: str
    missing: str


def attribute_rows(document: Entry, most: int) -> tuple[Attribute, ...]:
    """List at most so many attributes, most bits with the class first; tables as far as there is room on the page."""
    schema, classes = document["schema"], document["class_levels"]
    highest = max((one["bits_with_class"] for one in schema), default=0.0) or 1.0
    room, found = _CELLS_ON_PAGE, []
    for place, one in enumerate(sorted(schema, key=lambda one: -one["bits_with_class"])[:most]):
        counted = one["counted"]
        size = _size(counted) if counted else 0
        missing = "" if counted else "There are too many levels and classes to count them all."
        if size > room:
            missing = "There is no room for its levels on this page; comparison.json counts them."
        shown = None if missing else counted
        room -= size if shown else 0
        found.append(_attribute(one, shown, classes, 100 * one["bits_with_class"] / highest, missing, place))
    return tuple(found)


def _size(counted: Entry) -> int:
    """Measure what an attribute takes of the page, in cells."""
    bars = len(counted["distribution"]["rows"]) if counted["distribution"] else 0
    classes = len(counted["rows"][0])
    return (len(counted["rows"]) + bars // 6) * classes


def _attribute(
    one: Entry, counted: Entry | None, classes: Sequence[str], bar: float, missing: str, place: int
) -> Attribute:
    chart, not_drawn = None, ""
    if counted and counted["distribution"]:
        chart = level_chart(one["name"], classes, one["cuts"], counted["distribution"])
        not_drawn = "" if chart else "Its numbers are too large or too close to be drawn."
    known = one["counted"]
    return Attribute(
        name=one["name"],
        kind=_kind(one),
        bits=fixed(one["bits_with_class"]),
        bar=round(bar, 1),
        notes=tuple(_notes(one, known)) if known else (),
        is_open=place < _OPEN_AT_FIRST,
        cautions=tuple(_cautions(one, counted, classes)) if counted else (),
        pooled=_pooled(counted) if counted else None,
        heads=_heads(counted, classes) if counted else (),
        levels=_levels(one, counted) if counted else (),
        chart=chart,
        not_drawn=not_drawn,
        missing=missing,
    )


def _kind(one: Entry) -> str:
    """Say what the column was made into, blanks aside."""
    blank = bool(one["counted"] and one["counted"]["blanks"] and one["counted"]["blanks"]["level"])
    levels = len(one["levels"]) - blank
    if not one["numeric"]:
        return count_of(levels, "level")
    return f"numeric, cut into {levels}" if one["cuts"] else "numeric, not cut"


def _notes(one: Entry, counted: Entry) -> Iterator[str]:
    """Say in the heading line how many cells are blank and how many values are pooled."""
    if counted["blanks"]:
        blank = sum(counted["blanks"]["rows"])
        every = sum(map(sum, _every(counted)))
        yield f"{blank:,} blank, {percent(blank / every)}"
    if counted["pooled"]:
        yield f"{count_of(counted['pooled']['values'], 'rare value')} pooled"


def _every(counted: Entry, key: str = "rows") -> list[list[Any]]:
    """List the rows of all levels and, where they are none, of cells not observed, by class; or their ``masses``."""
    blanks = counted["blanks"]
    return [*counted[key], *([blanks[key]] if blanks and blanks["level"] is None else [])]


def _masses(counted: Entry) -> list[list[float]]:
    """List what those rows weigh: the rows themselves where all count alike."""
    return _every(counted, "rows" if counted["masses"] is None else "masses")


def _heads(counted: Entry, classes: Sequence[str]) -> tuple[ClassHead, ...]:
    rows, masses = (list(map(sum, zip(*table, strict=True))) for table in (_every(counted), _masses(counted)))
    return tuple(
        ClassHead(name, f"{count:,}", percent(mass / sum(masses)))
        for name, count, mass in zip(classes, rows, masses, strict=True)
    )


def _levels(one: Entry, counted: Entry) -> tuple[LevelRow, ...]:
    """Write all levels, and last the cells not observed."""
    every, masses = _every(counted), _masses(counted)
    apart = len(every) > len(one["levels"])
    names = [*one["levels"], *(["not observed"] if apart else [])]
    spoken = [*counted["speaks_for"], *([counted["blanks"]["speaks_for"]] if apart else [])]
    usual = [sum(column) / sum(map(sum, masses)) for column in zip(*masses, strict=True)]
    total = sum(map(sum, every))
    return tuple(
        LevelRow(
            name=name,
            is_level=place < len(one["levels"]),
            soft=sum(rows) < FEW_RECORDS,
            rows=f"{sum(rows):,}",
            share=percent(sum(rows) / total),
            cells=_cells(rows, weights, usual),
            speaks=(says["class"], fixed(says["bits"], 2)) if says else None,
        )
        for place, (name, rows, weights, says) in enumerate(zip(names, every, masses, spoken, strict=True))
    )


def _cells(rows: Sequence[int], masses: Sequence[float], usual: Sequence[float]) -> tuple[ClassCell, ...]:
    total = sum(masses)
    return tuple(
        ClassCell(
            f"{count:,}",
            percent(mass / total) if total else _DASH,
            round(100 * mass / total, 1) if total else 0.0,
            round(100 * share, 1),
        )
        for count, mass, share in zip(rows, masses, usual, strict=True)
    )


def _pooled(counted: Entry) -> tuple[str, tuple[tuple[str, str], ...], str] | None:
    """Name the values pooled: how many, those of most rows with these, how many are not named."""
    pooled = counted["pooled"]
    if not pooled:
        return None
    named = tuple((one["value"], count_of(one["rows"], "record")) for one in pooled["most_frequent"])
    more = pooled["values"] - len(named)
    return count_of(pooled["values"], "rare value"), named, f"{more:,}" if more else ""


def _cautions(one: Entry, counted: Entry, classes: Sequence[str]) -> Iterator[Words]:
    """Warn of blanks that speak about the class, and of levels that only one class has."""
    blanks = counted["blanks"]
    if blanks and blanks["speaks_for"]:
        says = blanks["speaks_for"]["class"]
        inside, outside = _blank_shares(counted, classes.index(says))
        yield (
            *(("Blanks are more frequent in ", False), (says, True)),
            (f": {percent(inside)} of its records are blank, of all others {percent(outside)}.", False),
        )
    alone = [
        (level, says["class"])
        for level, rows, says in zip(one["levels"], counted["rows"], counted["speaks_for"], strict=True)
        if says and sum(count > 0 for count in rows) == 1
    ]
    if alone:
        words: list[tuple[str, bool]] = [("Seen in one class only: ", False)]
        for place, (level, name) in enumerate(alone[:_NAMED]):
            words += [("; " if place else "", False), (level, True), (" in ", False), (name, True)]
        yield (*words, (f"; and {len(alone) - _NAMED:,} more." if len(alone) > _NAMED else ".", False))


def _blank_shares(counted: Entry, target: int) -> tuple[float, float]:
    """Give the share of blanks in one class, and in all others."""
    blank = counted["blanks"]["rows"] if counted["masses"] is None else counted["blanks"]["masses"]
    of_class = [sum(column) for column in zip(*_masses(counted), strict=True)]
    return blank[target] / of_class[target], (sum(blank) - blank[target]) / (sum(of_class) - of_class[target])
