"""The settings of a run in words, each with the option that sets it."""

from collections.abc import Mapping
from dataclasses import dataclass
from typing import Any

__all__ = ["SettingRow", "setting_rows"]

_WORDS = {
    "target": "the class, which is to be told from the attributes",
    "structures": "structures compared",
    "baseline": "the structure that the others are compared with",
    "test": "test of independence given the class",
    "adjust": "correction for testing many pairs",
    "alpha": "level of the tests",
    "negligible": "bits given the class that do not matter",
    "folds": "folds of the cross-validation",
    "repeats": "times that folds are dealt",
    "group": "column whose groups stay in one fold",
    "fold_column": "column that gives the folds",
    "holdout": "further table, scored at the end",
    "weight": "column of weights",
    "seed": "seed of folds, random halves and random tables",
    "bins": "cut points of numeric columns",
    "numeric": "columns taken as numbers",
    "categorical": "columns of numbers taken as levels",
    "ignore": "columns left out on request",
    "keep": "columns kept that would be left out",
    "missing": "what becomes of blank cells",
    "max_levels": "levels kept per column; rarer ones are pooled",
    "smoothing": "smoothing of the tables",
    "temperature": "calibration: temperature, offsets per class and floor",
    "mix": "a mix of the structures is tried",
    "require": "edges that must be there, parent first",
    "forbid": "attributes that no edge may join",
    "resamples": "random halves for the stability of edges",
    "records": "records shown on which naive and the recommended structure disagree most",
    "yardstick": "models that are no structures are fitted for comparison",
    "learning_curve": "learnt again from shares of the rows",
}
_OPTIONS = {"target": "--class"}
_VALUES = {
    "test": {
        "auto": "auto: chi-square tail where the sample carries it, else matched moments, exact or random tables",
        "chi2": "chi2: tail of chi-square of X²",
        "g": "g: tail of chi-square of G",
        "monte-carlo": "monte-carlo: random tables with the same margins",
    },
    "adjust": {
        "bh": "bh: Benjamini and Hochberg, false-discovery rate",
        "by": "by: Benjamini and Yekutieli, false-discovery rate",
        "holm": "holm: Holm, family-wise rate",
        "none": "none: every pair at the level of the tests",
    },
    "bins": {"auto": "auto: chosen inside every training fold, by held-out log loss"},
    "smoothing": {"auto": "auto: chosen inside every training fold, by held-out log loss"},
    "missing": {
        "level": "level: blank is a level of its own",
        "drop": "drop: records with a blank cell are left out",
        "sum-out": "sum-out: blank cells are not observed, and summed out",
    },
}


@dataclass(frozen=True)
class SettingRow:
    """One setting: what it is in words, its option on the command line, its value as printed."""

    words: str
    option: str
    value: str


def setting_rows(settings: Mapping[str, Any]) -> tuple[SettingRow, ...]:
    """Write every setting of a document."""
    return tuple(
        SettingRow(_WORDS[key], _OPTIONS.get(key, "--" + key.replace("_", "-")), _value(key, value))
        for key, value in settings.items()
    )


def _value(key: str, value: Any) -> str:
    """Write a value in words."""
    if isinstance(value, list):
        return ", ".join(str(one) for one in value) or "none"
    if isinstance(value, bool):
        return "yes" if value else "no"
    return "none" if value == "" else _VALUES.get(key, {}).get(str(value), str(value))
