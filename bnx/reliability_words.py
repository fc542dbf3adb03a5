"""What calibration did to a structure, in sentences."""

from collections.abc import Mapping, Sequence
from typing import Any

from bnx.text import fixed

__all__ = ["ABOUT_RIGHT", "calibration_words", "strayed", "sure"]

ABOUT_RIGHT = (0.95, 1.05)
"""Temperatures at which evidence is taken to be worth its face value."""
_FAR = 0.05  # answers further apart are not as sure as one another


def sure(share: float) -> str:
    """Write a probability as a percentage, with more digits near 1: none but 1 itself is written as 100 %."""
    if 0.9995 <= share < 1.0:
        return "over 99.9 %"
    return f"{100 * share:.1f} %" if 0.99 <= share < 1.0 else f"{100 * share:.0f} %"


def calibration_words(document: Mapping[str, Any], name: str) -> str:
    """Say what the temperature of a structure means, and what calibration did to its answers."""
    found = document["reliability"][name]
    entry = next((one for one in document["structures"] if one["name"] == name), None)
    if not document["settings"]["temperature"]:
        return "Nothing was calibrated, so this is both before and after. " + _figures_of(found["after"])
    if entry is None:
        return "A mix of calibrated structures: there is nothing before calibration. " + _figures_of(found["after"])
    return " ".join(
        [
            _temperature(name, entry["temperature"], document["pairs_verdicts"]["dependent"]),
            _answers(found["before"]["bins"], found["after"]["bins"]),
            _figures(found["before"], found["after"]),
        ]
    )


def _temperature(name: str, temperature: float, dependent: int) -> str:
    """Say how much evidence counts, and why it may be less than all."""
    told = f"{'Naive Bayes' if name == 'naive' else name}: evidence counts"
    if temperature > ABOUT_RIGHT[1]:
        return f"{told} more than its face value, {temperature:.2f} of it: as counted, it was too timid."
    if temperature >= ABOUT_RIGHT[0]:
        return f"{told} at about its face value ({temperature:.2f} of it)."
    told = f"{told} {temperature:.2f} of its face value"
    if not dependent:
        return f"{told}; with no dependent pair in sight, a small table may be why."
    return f"{told}, as happens where dependence is not modelled, or tables hold few records."


def strayed(
    before: Sequence[Mapping[str, Any]], after: Sequence[Mapping[str, Any]], over: bool = True, timid: bool = True
) -> tuple[Mapping[str, Any], Mapping[str, Any] | None] | None:
    """Find the group of answers that strayed furthest from what it said, and the group as sure as it afterwards.

    before, after: bins of a reliability curve. over, timid: on which sides straying counts. A group strays where what
    it says lies outside the interval of how often it was right; the furthest has most wrongly told records. The second
    is None where afterwards no group is as sure; nothing at all where none strayed.
    """
    straying = [one for one in before if (over and _is_over(one)) or (timid and _is_timid(one))]
    if not straying:
        return None
    worst = max(straying, key=lambda one: abs(one["mean_probability"] - one["share_right"]) * one["rows"])
    near = min(after, key=lambda one: abs(one["mean_probability"] - worst["mean_probability"]))
    return worst, near if abs(near["mean_probability"] - worst["mean_probability"]) <= _FAR else None


def _is_over(one: Mapping[str, Any]) -> bool:
    return bool(one["mean_probability"] > one["interval"][1])


def _is_timid(one: Mapping[str, Any]) -> bool:
    return bool(one["mean_probability"] < one["interval"][0])


def _answers(before: Sequence[Mapping[str, Any]], after: Sequence[Mapping[str, Any]]) -> str:
    """Tell how often the answers that strayed furthest were right, and what became of answers as sure as they."""
    found = strayed(before, after)
    if found is None:
        return "Before calibration no group of answers strayed from what it said by more than chance."
    worst, near = found
    told = f"Before calibration, its answers that were {_right(worst)} of records"
    return f"{told}; after it, those that were {_right(near)}." if near else f"{told}; after it, it is never that sure."


def _right(one: Mapping[str, Any]) -> str:
    return f"{sure(one['mean_probability'])} sure were right in {sure(one['share_right'])}"


def _loss(curve: Mapping[str, Any]) -> str:
    return "infinite" if curve["log_loss"] is None else f"{fixed(curve['log_loss'])} bits"


def _figures(before: Mapping[str, Any], after: Mapping[str, Any]) -> str:
    error, then = fixed(before["calibration_error"]), fixed(after["calibration_error"])
    return f"Calibration error {error} before, {then} after; log loss {_loss(before)} before, {_loss(after)} after."


def _figures_of(curve: Mapping[str, Any]) -> str:
    return f"Calibration error {fixed(curve['calibration_error'])}, log loss {_loss(curve)}."
