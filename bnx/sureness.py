"""How sure a structure is of itself before correction, as sentences for the first screen."""

from collections.abc import Mapping
from dataclasses import dataclass
from typing import Any

from bnx.reliability_words import ABOUT_RIGHT, strayed, sure
from bnx.text import fixed

__all__ = ["Sureness", "sureness"]

_SCOPE = "Scores are those after this correction, bits of evidence those before it."


@dataclass(frozen=True)
class Sureness:
    """What the evidence of ``name`` is worth: ``over``-confident, about ``right``, too ``timid`` or ``unknown``.

    ``factor``: what its evidence is, or would have to be, multiplied by.
    """

    name: str
    kind: str
    factor: str
    sentence: str


def sureness(document: Mapping[str, Any]) -> Sureness:
    """Judge naive Bayes, or the baseline where naive was not compared.

    By its temperature, or without calibration by the slope that one would have.
    """
    entry, tempered = _judged(document), document["settings"]["temperature"]
    factor = entry["temperature"] if tempered else entry["calibration_slope"]
    if factor is None:
        return Sureness(entry["name"], "unknown", "", "Not measured: there are too few mistakes to tell.")
    kind = "over" if factor < ABOUT_RIGHT[0] else "timid" if factor > ABOUT_RIGHT[1] else "right"
    parts = [_worth(document, entry["name"], kind, fixed(factor, 2)), _answers(document, entry["name"], kind)]
    parts.append(_others(document, entry["name"]) if tempered else "Nothing was corrected (--no-temperature).")
    return Sureness(entry["name"], kind, fixed(factor, 2), " ".join(part for part in parts if part))


def _judged(document: Mapping[str, Any]) -> Mapping[str, Any]:
    by_name: dict[str, Mapping[str, Any]] = {one["name"]: one for one in document["structures"]}
    return by_name.get("naive") or by_name[document["settings"]["baseline"]]


def _worth(document: Mapping[str, Any], name: str, kind: str, factor: str) -> str:
    """Say what the evidence is worth, and why it may be worth less."""
    told = f"The evidence of {name} is worth"
    if kind == "right":
        return f"{told} about its face value ({factor} of it): it is about as sure as it should be."
    if kind == "timid":
        return f"{told} {factor} times its face value: as counted, it is less sure than it should be."
    if not document["pairs_verdicts"]["dependent"]:
        return f"{told} only {factor} of its face value; with no dependent pair in sight, a small table may be why."
    if name == "naive":
        return f"{told} only {factor} of its face value, as happens where dependent attributes each count as news."
    return f"{told} only {factor} of its face value: dependence that it does not model, or tables of few records."


def _answers(document: Mapping[str, Any], name: str, kind: str) -> str:
    """Tell how often the answers that strayed furthest were right, and what became of answers as sure as they."""
    found = document["reliability"].get(name)
    if found is None or found["before"] is None or kind == "right":
        return ""
    groups = strayed(found["before"]["bins"], found["after"]["bins"], over=kind == "over", timid=kind == "timid")
    if groups is None:
        return "No group of its answers strayed from what it said by more than chance."
    worst, near = groups
    if not document["settings"]["temperature"]:
        return f"Where its answers stray furthest it is {_right(worst)}."
    told = f"Where its answers stray furthest it is, uncorrected, {_right(worst)}"
    return f"{told}; corrected, {_right(near)}." if near else f"{told}; corrected, it is never that sure."


def _right(one: Mapping[str, Any]) -> str:
    return f"{sure(one['mean_probability'])} sure and right in {sure(one['share_right'])} of records"


def _others(document: Mapping[str, Any], name: str) -> str:
    """Say what the evidence of the recommended structure is worth, where that is another one."""
    chosen = next(one for one in document["structures"] if one["name"] == document["recommended"]["name"])
    if chosen["name"] == name:
        return _SCOPE
    worth = fixed(chosen["temperature"], 2)
    return f"The evidence of {chosen['name']} is worth {worth}. {_SCOPE}"
