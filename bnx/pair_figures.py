"""What the panel of one pair says: the figures of the ledger, and the verdict in words that cannot be misread."""

from collections.abc import Mapping
from typing import Any

from markupsafe import Markup

from bnx.printed import PairRow, pair_row
from bnx.report_data import json_block

__all__ = ["FIGURES", "pairs_block"]

FIGURES = (
    ("bits given the class", "bits"),
    ("95 % interval", "interval"),
    ("bits without the class", "marginal"),
    ("what the class explains", "outcome"),
    ("Cramér’s V", "cramers_v"),
    ("statistic", "statistic"),
    ("df", "df"),
    ("adjusted p", "adjusted_p"),
    ("method", "method"),
    ("sample carries it", "carried"),
    ("smallest expected", "min_expected"),
    ("detectable bits", "detectable"),
    ("verdict", "verdict"),
)
"""The figures of a pair in the order in which the panel lists them: what each is called, and its field of a row."""


def pairs_block(document: Mapping[str, Any]) -> Markup:
    """Write every listed pair for the panel: its two attributes by number, then its figures as printed."""
    number = {name: place for place, name in enumerate(document["attributes"])}
    rows = (pair_row(pair, frozenset()) for pair in document["pairs"])
    return json_block(
        "panel",
        {
            "names": document["attributes"],
            "labels": [label for label, _ in FIGURES],
            "pairs": [[number[row.a], number[row.b], *_figures(row)] for row in rows],
        },
    )


def _figures(row: PairRow) -> list[str]:
    return [getattr(row, field) for _, field in FIGURES]
