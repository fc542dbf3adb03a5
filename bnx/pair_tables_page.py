"""Tables of pairs by class as the panel shows them: records, expected records and residuals, as printed."""

import math
from collections.abc import Mapping, Sequence
from typing import Any

from markupsafe import Markup

from bnx.report_data import json_block
from bnx.residual_chip import Cell
from bnx.text import fixed, of_p

__all__ = ["SHADES", "shade", "tables_block"]

SHADES = (2.0, 4.0, 8.0)
"""Adjusted residuals beyond which a cell is shaded one step more."""

_DASH = "–"


def shade(residual: float | None) -> int:
    """Say in which step a residual is shaded: 0 within reach of chance, 1 to 3 beyond, below 0 for too few records."""
    if residual is None:
        return 0
    steps = sum(abs(residual) > limit for limit in SHADES)
    return steps if residual > 0 else -steps


def tables_block(document: Mapping[str, Any]) -> Markup:
    """Write the tables of pairs for the scripts, by the numbers of their attributes, the lesser first."""
    number = {name: place for place, name in enumerate(document["attributes"])}
    found = {}
    for table in document["pair_tables"]:
        a, b = number[table["a"]], number[table["b"]]
        found[f"{min(a, b)},{max(a, b)}"] = {
            "a": a,
            "b": b,
            "aLevels": table["a_levels"],
            "bLevels": table["b_levels"],
            "classes": [_class_table(one) for one in table["classes"]],
            "common": _common(table["common_odds"]),
        }
    return json_block("tables", {"tables": found, "joinedWithout": f"{document['pair_tables_left_out']:,}"})


def _class_table(one: Mapping[str, Any]) -> dict[str, Any]:
    return {
        "class": one["class"],
        "rows": f"{one['rows']:,}",
        "cells": [
            [_cell(*cell) for cell in zip(*rows, strict=True)]
            for rows in zip(one["observed"], one["expected"], one["residuals"], strict=True)
        ],
        "odds": _odds(one["odds"]),
    }


def _cell(observed: float, expected: float | None, residual: float | None) -> list[str | int]:
    """Print records, expected records and the residual with its sign, and give the step of its shade."""
    nan = math.nan
    cell = Cell(observed, nan if expected is None else expected, nan if residual is None else residual)
    return [f"{observed:,}", _DASH if expected is None else f"{expected:,.1f}", cell.number, shade(residual)]


def _odds(odds: Mapping[str, float | None] | None) -> str:
    """Print an odds ratio with its interval; nothing where the levels are not two and two."""
    if odds is None:
        return ""
    ratio, low, high = (_ratio(odds[key]) for key in ("odds_ratio", "odds_low", "odds_high"))
    return f"{ratio} [{low}, {high}]"


def _ratio(value: float | None) -> str:
    if value is None:
        return "∞ or undefined"
    return fixed(value, 2) if 0.1 <= value < 1000 or value == 0 else f"{value:.2g}"


def _common(odds: Mapping[str, float | None] | None) -> Sequence[tuple[str, str]]:
    """Print what all classes say together: the common odds ratio, the test of it, and whether there is one."""
    if odds is None:
        return ()
    p = {key: _DASH if odds[key] is None else of_p(odds[key] or 0.0) for key in ("cmh_p", "tarone_p")}
    return (
        ("odds ratio common to all classes, 95 % interval", _odds(odds)),
        ("p that it is 1", p["cmh_p"]),
        ("p that it is the same in all classes", p["tarone_p"]),
    )
