"""What one run found, as finished words and numbers for the first screen of the report."""

from collections import Counter
from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from typing import Any

from bnx.counted_twice import CountedTwice, counted_twice, drawn_pairs
from bnx.sureness import Sureness, sureness
from bnx.text import fixed, quoted

__all__ = ["Findings", "Gain", "Mistakes", "chance", "drawn_pairs", "findings", "percent"]

_FEW = 100  # records of a class that are too few for its own figures


@dataclass(frozen=True)
class Gain:
    """A structure against the baseline: bits saved per record.

    ``kind`` is ``better``, ``worse`` or ``even``; ``share``: bits saved as a share of the baseline's log loss, empty
    where that is infinite; ``interval`` is of the bits saved; ``credible``: 0 lies outside it; ``likely``: the chance
    that it saves more than ``region`` bits.
    """

    name: str
    kind: str
    bits: str
    share: str
    interval: tuple[str, str]
    credible: bool
    likely: str
    region: str


@dataclass(frozen=True)
class Mistakes:
    """Mistakes in 1,000 records, of the recommended structure and the baseline.

    ``fewer``: how many fewer it makes, or more, as ``apart`` says: ``fewer``, ``more`` or ``as many``; ``interval``: of
    the mistakes saved, None where folds do not tell.
    """

    own: str
    baseline: str
    difference: str
    apart: str
    interval: tuple[str, str] | None


@dataclass(frozen=True)
class Findings:
    """The answer: which structure, why, how much it helps, how honest the score is, and what remains dependent.

    ``rival``: of a recommended baseline, the best structure with edges against it.
    """

    recommended: str
    words: str
    edges: int
    reason: str
    best: str
    baseline: str
    gain: Gain | None
    rival: Gain | None
    mistakes: Mistakes
    honest_log_loss: str
    baseline_log_loss: str
    honest_right: str
    picked: str
    confidence: Sureness
    dependent: int
    negligible: int
    unknown: int
    listed: int
    twice: CountedTwice
    rarest: str
    rarest_rows: str
    rarest_few: bool


def percent(share: float | None, digits: int = 1) -> str:
    """Write a share of 1 as a percentage; a dash for None."""
    return "–" if share is None else f"{100 * share:.{digits}f} %"


def chance(share: float | None) -> str:
    """Write a probability as a percentage, none but 0 and 1 themselves as 0 or 100 %; a dash for None."""
    if share is not None and 0.0 < share < 0.0005:
        return "under 0.1 %"
    return "over 99.9 %" if share is not None and 0.9995 <= share < 1.0 else percent(share)


def findings(document: Mapping[str, Any]) -> Findings:
    """Sum up a comparison document."""
    by_name = {one["name"]: one for one in document["structures"]}
    advice, verdicts = document["recommended"], document["pairs_verdicts"]
    chosen, baseline = by_name[advice["name"]], by_name[document["settings"]["baseline"]]
    records = {
        level: sum(row) / document["settings"]["repeats"]
        for level, row in zip(document["class_levels"], chosen["confusion"], strict=True)
    }
    rarest = min(records, key=lambda level: records[level])
    return Findings(
        recommended=chosen["name"],
        words=chosen["words"],
        edges=len(chosen["edges"]),
        reason=advice["reason"],
        best=document["best"],
        baseline=baseline["name"],
        gain=_gain(chosen, baseline["log_loss"]),
        rival=_rival(document["structures"], baseline) if chosen is baseline else None,
        mistakes=_mistakes(chosen, baseline),
        honest_log_loss=_loss(advice["honest_log_loss"]),
        baseline_log_loss=_loss(baseline["log_loss"]),
        honest_right=percent(advice["honest_accuracy"]),
        picked=_picked(advice["picks"], chosen["name"]),
        confidence=sureness(document),
        dependent=verdicts["dependent"],
        negligible=verdicts["negligible"] + verdicts["detected, but negligible"],
        unknown=verdicts["not enough data"],
        listed=len(document["pairs"]),
        twice=counted_twice(document, chosen),
        rarest=rarest,
        rarest_rows=f"{records[rarest]:,.0f}",
        rarest_few=records[rarest] < _FEW,
    )


def _loss(bits: float | None) -> str:
    return "infinite" if bits is None else fixed(bits)


def _picked(picks: Sequence[str], chosen: str) -> str:
    """Say how often each structure was picked without a fold, the recommended one first."""
    if not picks:
        return ""
    counts = Counter(picks)
    others = [f"{name} in {count}" for name, count in counts.most_common() if name != chosen]
    return ", ".join([f"{chosen} in {counts[chosen]} of {len(picks)} folds", *([quoted(others)] if others else [])])


def _rival(structures: Sequence[Mapping[str, Any]], baseline: Mapping[str, Any]) -> Gain | None:
    """Compare the best structure with edges with a baseline that is recommended."""
    others = [one for one in structures if one["edges"] and one is not baseline and one["log_loss"] is not None]
    best = min(others, key=lambda one: one["log_loss"], default=None)
    return _gain(best, baseline["log_loss"]) if best else None


def _gain(entry: Mapping[str, Any], whole: float | None) -> Gain | None:
    """Turn the difference of log losses round, so that more is better; None for the baseline itself."""
    against = entry["against_baseline"]
    if against["difference"] is None:
        return None
    low, high = (-end for end in reversed(against["interval"]))
    saved = -against["difference"]
    kind = "even" if fixed(abs(saved)) == fixed(0.0) else "better" if saved > 0 else "worse"
    if kind == "worse":
        low, high = -high, -low
    return Gain(
        name=entry["name"],
        kind=kind,
        bits=fixed(abs(saved)),
        share=percent(abs(saved) / whole, 0) if whole else "",
        interval=(fixed(low), fixed(high)),
        credible=low > 0 or high < 0,
        likely=chance(against["probability_better"]),
        region=f"{against['region_bits']:.2g}",
    )


def _mistakes(chosen: Mapping[str, Any], baseline: Mapping[str, Any]) -> Mistakes:
    """Count mistakes in 1,000 records, in whole ones but where there are few."""
    rates = [1000 * (1 - one["accuracy"]) for one in (chosen, baseline)]
    digits = 0 if min(rates) >= 10 else 1
    own, base = (round(rate, digits) for rate in rates)
    apart = "fewer" if own < base else "more" if own > base else "as many"
    by_metric = chosen["against_baseline"]["by_metric"]
    ends = by_metric["accuracy"]["interval"] if by_metric else None
    if ends and apart == "more":
        ends = [-end for end in reversed(ends)]
    return Mistakes(
        own=f"{own:.{digits}f}",
        baseline=f"{base:.{digits}f}",
        difference=f"{abs(base - own):.{digits}f}",
        apart=apart,
        interval=(f"{1000 * ends[0]:.{digits}f}", f"{1000 * ends[1]:.{digits}f}") if ends else None,
    )
