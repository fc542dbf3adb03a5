"""Single records on the page: what is said of each, and where the bars of its attributes' evidence stand."""

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from typing import Any

from bnx.findings import chance
from bnx.text import count_of, fixed, signed
from bnx.ticks import round_ticks

__all__ = ["Culprit", "EvidenceBar", "RecordCard", "RecordSection", "culprits", "record_section", "who_is_right"]

_WIDTH, _EDGE = 320.0, 16.0
_DASH = "–"
_TOLD = 3  # attributes named in the sentences above the records
_MATTERS = 0.05  # bits from which an attribute counts as counted twice in a record


@dataclass(frozen=True)
class EvidenceBar:
    """One attribute of a record, as printed, and its bars in pixels as (x, width).

    ``kept`` and ``twice_bar``: the parts of naive's bar; ``given_bar``: the structure's, None where it has none of its
    own.
    """

    name: str
    level: str | None
    parents: tuple[str, ...]
    left_out: bool
    turned: bool
    naive: str
    twice: str
    adds: str
    structure: str
    kept: tuple[float, float]
    twice_bar: tuple[float, float] | None
    given_bar: tuple[float, float] | None


@dataclass(frozen=True)
class RecordCard:
    """One record.

    ``says``: by naive and by the structure, the class held most probable and its probability; ``right``: ``both``,
    ``naive``, ``structure`` or ``neither``; ``chances``: of the two classes compared, by naive and by the structure;
    ``sums``: what the table ends with, as (words, by naive, twice, adds, by the structure), the log odds last;
    ``ticks``: (x, bits).
    """

    line: str
    truth: str
    says: tuple[tuple[str, str], tuple[str, str]]
    right: str
    bits: str
    towards: str
    away: str
    chances: tuple[tuple[str, str], tuple[str, str]]
    others_alike: int
    alike: tuple[tuple[str, str], ...]
    bars: tuple[EvidenceBar, ...]
    sums: tuple[tuple[str, ...], ...]
    temperatures: tuple[str, str]
    offsets: tuple[str, str]
    ticks: tuple[tuple[float, str], ...]


@dataclass(frozen=True)
class Culprit:
    """An attribute over all records told of: bits in an average one of them, and in how many it matters."""

    name: str
    bits: str
    records: int


@dataclass(frozen=True)
class RecordSection:
    """The whole section; ``reason``: why this structure; ``told`` is empty where ``absent`` says why.

    ``right``: records by who is right; ``differ``: of all records, those on which the two hold
    another class most probable, and those of them that the structure, and naive, have right.
    """

    structure: str
    reason: str
    absent: str
    told: tuple[RecordCard, ...]
    right: tuple[tuple[str, int], ...]
    differ: tuple[str, ...]
    twice: tuple[Culprit, ...]
    adds: tuple[Culprit, ...]
    turned: tuple[Culprit, ...]
    calibrated: bool
    width: float
    zero: float


def record_section(document: Mapping[str, Any]) -> RecordSection:
    """Lay out the records of a comparison, the bars of each on a scale of its own."""
    records = document["records"] or {"rows": [], "structure": None, "reason": "", "differ": None}
    rows, differ = records["rows"], records["differ"]
    calibrated = document["settings"]["temperature"]
    cards = tuple(_card(row, document["class_levels"], calibrated) for row in rows)
    counts = [differ[key] for key in ("records", "structure_right", "naive_right")] if differ else []
    return RecordSection(
        structure=records["structure"] or "",
        reason=records["reason"],
        absent=_absent(document["records"]),
        told=cards,
        right=tuple((who, sum(one.right == who for one in cards)) for who in ("structure", "naive", "both", "neither")),
        differ=tuple(f"{one:,}" for one in counts),
        twice=_named(culprits(rows, "twice_bits"), len(rows)),
        adds=_named(culprits(rows, "adds_bits"), len(rows)),
        turned=_named(culprits(rows, "adds_bits", turned=True), len(rows)),
        calibrated=calibrated,
        width=_WIDTH,
        zero=_WIDTH / 2,
    )


def _absent(records: Mapping[str, Any] | None) -> str:
    """Say why no record is told of; nothing where some are."""
    if records is None:
        return "No records are shown: none were asked for (--records 0)."
    if not records["structure"]:
        return f"No records are shown. {records['reason']}"
    return "" if records["rows"] else f"No records are shown: naive and {records['structure']} say the same of all."


def who_is_right(row: Mapping[str, Any], levels: Sequence[str]) -> str:
    """Say who holds the true class of a record most probable: ``both``, ``naive``, ``structure`` or ``neither``."""
    naive, structure = (_said(row["probabilities"][key], levels)[0] == row["truth"] for key in ("naive", "structure"))
    return {(True, True): "both", (True, False): "naive", (False, True): "structure"}.get((naive, structure), "neither")


def culprits(rows: Sequence[Mapping[str, Any]], key: str, turned: bool = False) -> list[tuple[str, float, int]]:
    """Sum up a kind of bits by attribute over the records told of, its sign apart: (name, bits, records it matters in).

    turned: of attributes whose evidence the parents turn round, or else of the others. Those without parents tell
    nothing here: only smoothing tells their evidence apart. The most first.
    """
    sums: dict[str, tuple[float, int]] = {}
    for row in rows:
        for one in row["attributes"]:
            bits = abs(one[key] or 0.0) if one["parents"] and one["turned_round"] == turned else 0.0
            total, records = sums.get(one["name"], (0.0, 0))
            sums[one["name"]] = total + bits, records + (bits >= _MATTERS)
    return sorted(((name, bits, n) for name, (bits, n) in sums.items() if n), key=lambda one: (-one[1], one[0]))


def _named(found: Sequence[tuple[str, float, int]], records: int) -> tuple[Culprit, ...]:
    return tuple(Culprit(name, fixed(bits / records, 2), n) for name, bits, n in found[:_TOLD])


def _said(p: Sequence[float], levels: Sequence[str]) -> tuple[str, str]:
    """Name the class held most probable, the first among equals, with its probability."""
    most = max(range(len(p)), key=lambda c: (p[c], -c))
    return levels[most], chance(p[most])


def _card(row: Mapping[str, Any], levels: Sequence[str], calibrated: bool) -> RecordCard:
    p, q = row["probabilities"]["naive"], row["probabilities"]["structure"]
    ends = [levels.index(row[key]) for key in ("for", "against")]
    bits = [one[key] for one in row["attributes"] for key in ("naive_bits", "structure_bits")]
    most = max((abs(one) for one in bits if one is not None), default=0.0) or 1.0
    return RecordCard(
        line=f"{row['line']:,}",
        truth=row["truth"],
        says=(_said(p, levels), _said(q, levels)),
        right=who_is_right(row, levels),
        bits=fixed(row["disagreement"]),
        towards=row["for"],
        away=row["against"],
        chances=((chance(p[ends[0]]), chance(p[ends[1]])), (chance(q[ends[0]]), chance(q[ends[1]]))),
        others_alike=sum(row["alike"].values()) - 1,
        alike=tuple((level, f"{count:,}") for level, count in row["alike"].items() if count),
        bars=tuple(_bar(one, most) for one in row["attributes"]),
        sums=tuple(_sums(row, calibrated)),
        temperatures=(fixed(row["naive"]["temperature"]), fixed(row["structure"]["temperature"])),
        offsets=(_bits(row["naive"]["offset_bits"]), _bits(row["structure"]["offset_bits"])),
        ticks=tuple((_x(one, most), f"{abs(one):g}") for one in round_ticks(-most, most, 5)),
    )


def _sums(row: Mapping[str, Any], calibrated: bool) -> list[tuple[str, ...]]:
    """List what else enters the log odds, and these themselves."""
    found: list[tuple[str, ...]] = []
    rest, prior = row["rest"], _bits(row["prior_bits"])
    if rest["attributes"]:
        words = count_of(rest["attributes"], "more attribute")
        parts = (_bits(rest[f"{part}_bits"]) for part in ("naive", "twice", "adds", "structure"))
        found.append((words, *parts))
    summed = [row[side]["summed_out_bits"] for side in ("naive", "structure")]
    if any(_bits(one) != "0.00" for one in summed) or any(one["structure_bits"] is None for one in row["attributes"]):
        found.append(("what hangs on cells not observed", _bits(summed[0]), "", "", _bits(summed[1])))
    found.append(("shares of the two classes", prior, "", "", prior))
    odds = [_bits(row[side]["log_odds_bits"]) for side in ("naive", "structure")]
    return [*found, ("log odds before calibration" if calibrated else "log odds", odds[0], "", "", odds[1])]


def _bits(value: float | None) -> str:
    """Write bits with their sign, but no sign of nothing."""
    if value is None:
        return _DASH
    text = signed(value, 2)
    return text[1:] if text[1:] == "0.00" else text


def _part(value: float | None) -> str:
    """Write a part of some bits; a dash for one too small to be printed."""
    text = _bits(value)
    return _DASH if text == "0.00" else text


def _x(bits: float, most: float) -> float:
    return round(_WIDTH / 2 + bits / most * (_WIDTH / 2 - _EDGE), 1)


def _between(start: float, end: float, most: float) -> tuple[float, float]:
    low, high = sorted((_x(start, most), _x(end, most)))
    return low, round(high - low, 1)


def _bar(one: Mapping[str, Any], most: float) -> EvidenceBar:
    naive, twice, given = one["naive_bits"], one["twice_bits"] or 0.0, one["structure_bits"]
    return EvidenceBar(
        name=one["name"],
        level=one["level"],
        parents=tuple(one["parents"]),
        left_out=one["left_out"],
        turned=one["turned_round"],
        naive=_bits(naive),
        twice=_part(one["twice_bits"]),
        adds=_part(one["adds_bits"]),
        structure=_bits(given),
        kept=_between(0.0, naive - twice, most),
        twice_bar=_between(naive - twice, naive, most) if twice else None,
        given_bar=None if given is None else _between(0.0, given, most),
    )
