"""What the panel of one pair says: the figures of the ledger, and the verdict in words that cannot be misread."""

from collections.abc import Mapping
from typing import Any

from markupsafe import Markup

from bnx.edge_words import PAIR_SENTENCES, pair_sentences
from bnx.findings import drawn_pairs
from bnx.printed import pair_row
from bnx.report_data import json_block
from bnx.text import fixed

__all__ = ["FIGURES", "PAIRS_IN_PANEL", "pairs_block"]

FIGURES = (
    ("bits", "bits given the class"),
    ("corrected", "less what chance shows"),
    ("interval", "95 % interval, less chance"),
    ("upper", "at most, 95 %"),
    ("twice", "counted twice by naive, bits"),
    ("marginal", "bits without the class"),
    ("outcome", "what the class explains"),
    ("cramers_v", "Cramér’s V"),
    ("statistic", "statistic"),
    ("df", "df"),
    ("adjusted_p", "adjusted p"),
    ("method", "method"),
    ("carried", "sample carries it"),
    ("min_expected", "smallest expected"),
    ("detectable", "detectable bits"),
    ("verdict", "verdict"),
)
"""The figures of a pair in the order in which the panel lists them: key, and what it is called."""

PAIRS_IN_PANEL = 10_000
"""The strongest pairs that the panel knows; those that a structure joins come on top."""

_REPEATED = ("outcome", "df", "method", "carried", "verdict")  # in few words, which are written once and numbered
_DASH = "–"


def pairs_block(document: Mapping[str, Any]) -> Markup:
    """Write the pairs for the panel: its two attributes by number, its sentences, its figures as printed."""
    number = {name: place for place, name in enumerate(document["attributes"])}
    told = list(PAIR_SENTENCES)
    known = [(pair, _figures(pair)) for pair in _known(document)]
    words = {key: list(dict.fromkeys(figures[key] for _, figures in known)) for key in _REPEATED}
    codes = {key: {word: code for code, word in enumerate(found)} for key, found in words.items()}
    rows = []
    for pair, figures in known:
        sentences = [told.index(one) for one in pair_sentences(pair, document["settings"]["negligible"])]
        rows.append(
            [
                number[pair["a"]],
                number[pair["b"]],
                sentences,
                *(codes[key][figures[key]] if key in codes else figures[key] for key, _ in FIGURES),
            ]
        )
    return json_block(
        "panel",
        {
            "class": document["class"],
            "negligible": f"{document['settings']['negligible']:g}",
            "names": document["attributes"],
            "figures": FIGURES,
            "words": words,
            "sentences": list(PAIR_SENTENCES.values()),
            "pairs": rows,
        },
    )


def _known(document: Mapping[str, Any]) -> list[Mapping[str, Any]]:
    joined = frozenset().union(*(drawn_pairs(one) for one in document["structures"]))
    ranked = sorted(document["pairs"], key=lambda one: -one["bits"])
    rest = (pair for pair in ranked[PAIRS_IN_PANEL:] if frozenset((pair["a"], pair["b"])) in joined)
    return [*ranked[:PAIRS_IN_PANEL], *rest]


def _figures(pair: Mapping[str, Any]) -> dict[str, str]:
    """Print the figures of a pair; those that the ledger has too, as there."""
    row = pair_row(pair)
    return {
        **vars(row),
        "corrected": _DASH if pair["bits_corrected"] is None else fixed(max(0.0, pair["bits_corrected"]), 4),
        "upper": row.at_most,
        "twice": row.double_counted,
    }
