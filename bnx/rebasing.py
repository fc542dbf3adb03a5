"""A classifier for records whose classes are mixed differently from those it was learnt from."""

import math
from collections.abc import Sequence
from dataclasses import replace

import numpy as np

from bnx.classifier import Classifier
from bnx.errors import SettingError
from bnx.text import nearest, quoted

__all__ = ["check_known", "parse_prior", "rebased"]

_TOLERANCE = 1e-6  # of the sum of shares that were typed


def parse_prior(values: Sequence[str], levels: Sequence[str]) -> np.ndarray:
    """Read ``LEVEL=P,...``, a share for each level of the class: (C,), summing to 1. Levels may hold commas and =.

    Raises:
        SettingError: a level is unknown, named twice or left out, or the shares are not shares.
    """
    found: dict[str, float] = {}
    for level, share in (pair for value in values for pair in _pairs(value)):
        if level not in levels:
            raise SettingError(f"--prior: {level!r} is not a level of the class; {nearest(level, levels)}")
        if level in found:
            raise SettingError(f"--prior names {level!r} twice; give each level one share")
        found[level] = _share(level, share)
    missing = [level for level in levels if level not in found]
    if missing:
        raise SettingError(f"--prior leaves out {quoted(missing)}; give every level of the class its share")
    total = sum(found.values())
    if abs(total - 1) > _TOLERANCE:
        raise SettingError(f"--prior: the shares sum to {total:.9g}, not to 1; give shares of the whole")
    return np.array([found[level] for level in levels]) / total


def _pairs(value: str) -> list[tuple[str, str]]:
    """Split at the commas that end in a number."""
    pairs: list[tuple[str, str]] = []
    waiting: list[str] = []
    for part in value.split(","):
        waiting.append(part)
        level, sign, share = ",".join(waiting).rpartition("=")
        if sign and _number(share) is not None:
            pairs.append((level.strip(), share))
            waiting = []
    if waiting or not pairs:
        raise SettingError(f"--prior: {','.join(waiting)!r} cannot be used; write LEVEL=P,... with P a number")
    return pairs


def _number(text: str) -> float | None:
    """Read a number; None if it is none."""
    try:
        return float(text)
    except ValueError:
        return None


def _share(level: str, text: str) -> float:
    share = float(text)
    if not math.isfinite(share) or not 0 < share < 1:
        raise SettingError(
            f"--prior: the share of {level!r} is {text.strip()}; give a number above 0 and below 1: none is certain"
        )
    return share


def rebased(classifier: Classifier, prior: np.ndarray) -> Classifier:
    """Put another class prior (C,) in the place of the training shares, before probabilities are made to sum to 1.

    What the floor gives to each class follows the new prior too.

    Raises:
        SettingError: the training rows of a class are none, so nothing is known of it.

    Source: Saerens, Latinne & Decaestecker 2002, equation 2.4 (from memory of its number).
    """
    check_known(classifier.target.levels, classifier.class_counts)
    return replace(classifier, other_prior=prior, calibration=replace(classifier.calibration, shares=prior))


def check_known(levels: Sequence[str], class_counts: np.ndarray) -> None:
    """Refuse classes that training held no record of.

    Raises:
        SettingError: there is one.
    """
    empty = [level for level, rows in zip(levels, class_counts, strict=True) if not rows]
    if empty:
        raise SettingError(
            f"--prior: training held no record of {quoted(empty)}; nothing is known of it, so drop --prior"
        )
