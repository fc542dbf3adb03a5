"""What one run found, as finished words and numbers for the first screen of the report."""

from collections.abc import Mapping
from dataclasses import dataclass
from typing import Any

from bnx.text import fixed

__all__ = ["Confidence", "Findings", "Gain", "PairLine", "drawn_pairs", "findings", "percent"]

_SHOWN = 3
_RIGHT = (0.95, 1.05)


@dataclass(frozen=True)
class Gain:
    """The recommended structure against the baseline: bits saved per record and mistakes per 1,000 records.

    ``kind`` is ``better``, ``worse`` or ``even``; ``share``: bits saved as a share of the baseline's log loss, empty
    where that is infinite; ``interval`` is of the bits saved; ``credible``: 0 lies outside it.
    """

    kind: str
    bits: str
    share: str
    interval: tuple[str, str]
    credible: bool
    likely: str
    region: str


@dataclass(frozen=True)
class Confidence:
    """How sure a structure is of itself before correction: ``over``, ``right``, ``timid`` or ``unknown``.

    ``factor``: what its evidence had to be multiplied by.
    """

    name: str
    kind: str
    factor: str


@dataclass(frozen=True)
class PairLine:
    """A pair of attributes and the bits they share given the class."""

    a: str
    b: str
    bits: str
    drawn: bool


@dataclass(frozen=True)
class Findings:
    """The answer: which structure, why, how much it helps, how honest the score is, and what remains dependent."""

    recommended: str
    words: str
    edges: int
    reason: str
    best: str
    baseline: str
    gain: Gain | None
    mistakes: str
    mistakes_baseline: str
    mistakes_difference: int
    honest_log_loss: str
    honest_right: str
    picked: str
    confidence: Confidence
    dependent: int
    negligible: int
    unknown: int
    listed: int
    modelled: int
    strongest: tuple[PairLine, ...]
    left: PairLine | None
    rarest: str
    rarest_rows: int


def percent(share: float | None, digits: int = 1) -> str:
    """Write a share of 1 as a percentage; a dash for None."""
    return "–" if share is None else f"{100 * share:.{digits}f} %"


def drawn_pairs(entry: Mapping[str, Any]) -> frozenset[frozenset[str]]:
    """List the pairs that a structure joins."""
    return frozenset(frozenset((edge["parent"], edge["child"])) for edge in entry["edges"])


def findings(document: Mapping[str, Any]) -> Findings:
    """Sum up a comparison document."""
    by_name = {one["name"]: one for one in document["structures"]}
    advice, settings = document["recommended"], document["settings"]
    chosen, baseline = by_name[advice["name"]], by_name[settings["baseline"]]
    drawn = drawn_pairs(chosen)
    dependent = [pair for pair in document["pairs"] if pair["verdict"] == "dependent"]
    lines = [_pair_line(pair, drawn) for pair in sorted(dependent, key=lambda one: -one["bits"])]
    picks, verdicts = advice["picks"], document["pairs_verdicts"]
    rows = dict(zip(document["class_levels"], (sum(row) for row in chosen["confusion"]), strict=True))
    rarest = min(rows, key=lambda level: rows[level])
    mistakes = [round(1000 * (1 - one["accuracy"])) for one in (chosen, baseline)]
    return Findings(
        recommended=chosen["name"],
        words=chosen["words"],
        edges=len(chosen["edges"]),
        reason=advice["reason"],
        best=document["best"],
        baseline=baseline["name"],
        gain=_gain(chosen["against_baseline"], baseline["log_loss"]),
        mistakes=str(mistakes[0]),
        mistakes_baseline=str(mistakes[1]),
        mistakes_difference=mistakes[1] - mistakes[0],
        honest_log_loss="infinite" if advice["honest_log_loss"] is None else fixed(advice["honest_log_loss"]),
        honest_right=percent(advice["honest_accuracy"]),
        picked=f"{picks.count(chosen['name'])} of {len(picks)}" if picks else "",
        confidence=_confidence(by_name.get("naive", baseline), settings["temperature"]),
        dependent=verdicts["dependent"],
        negligible=verdicts["negligible"] + verdicts["detected, but negligible"],
        unknown=verdicts["not enough data"],
        listed=len(document["pairs"]),
        modelled=sum(line.drawn for line in lines),
        strongest=tuple(lines[:_SHOWN]),
        left=next((line for line in lines if not line.drawn), None),
        rarest=rarest,
        rarest_rows=rows[rarest] // settings["repeats"],
    )


def _pair_line(pair: Mapping[str, Any], drawn: frozenset[frozenset[str]]) -> PairLine:
    return PairLine(pair["a"], pair["b"], fixed(pair["bits"]), frozenset((pair["a"], pair["b"])) in drawn)


def _gain(against: Mapping[str, Any], whole: float | None) -> Gain | None:
    """Turn the difference of log losses round, so that more is better; None for the baseline itself."""
    if against["difference"] is None:
        return None
    low, high = (-end for end in reversed(against["interval"]))
    saved = -against["difference"]
    kind = "even" if fixed(abs(saved)) == fixed(0.0) else "better" if saved > 0 else "worse"
    return Gain(
        kind=kind,
        bits=fixed(abs(saved)),
        share=percent(saved / whole, 0) if whole else "",
        interval=(fixed(low), fixed(high)),
        credible=low > 0 or high < 0,
        likely=percent(against["probability_better"]),
        region=f"{against['region_bits']:.2g}",
    )


def _confidence(entry: Mapping[str, Any], tempered: bool) -> Confidence:
    """Read off the temperature, or without one the calibration slope, how sure a structure is of itself."""
    factor = entry["temperature"] if tempered else entry["calibration_slope"]
    if factor is None:
        return Confidence(entry["name"], "unknown", "")
    kind = "over" if factor < _RIGHT[0] else "timid" if factor > _RIGHT[1] else "right"
    return Confidence(entry["name"], kind, fixed(factor, 2))
