"""The learned structures as the page shows them: drawings, ledgers of edges, and the data that their scripts read."""

from collections.abc import Iterable, Mapping, Sequence
from dataclasses import dataclass
from typing import Any

from markupsafe import Markup

from bnx.edge_words import CHIP_SENTENCES, EDGE_CLAUSES, WHAT_IF, what_if
from bnx.embedding import embed
from bnx.printed import EdgeRow, ScoreRow, edge_row, score_row
from bnx.report_data import json_block
from bnx.text import count_of, fixed, signed

__all__ = [
    "EDGES_IN_DATA",
    "EDGES_ON_PAGE",
    "Drawn",
    "Sliders",
    "draw_structure",
    "edges_block",
    "own_attributes",
    "sliders",
]

EDGES_ON_PAGE = 300
"""Rows of the ledger of each structure that the page shows, strongest first."""
EDGES_IN_DATA = 1500
"""Edges of each structure that the scripts know: clear gains before others, then those of most bits."""

_BITS_STEP, _GAIN_STEP = 0.005, 0.0005
_COLUMNS = ("parent", "child", "bits", "gain", "interval", "chosen", "stability", "gate", "given", "blanks", "verdict")


@dataclass(frozen=True)
class Drawn:
    """One structure: its drawing (empty without a drawing engine) and its ledger.

    ``prefix`` begins the ids of its drawing. ``ledger`` holds the strongest of ``edges_total`` edges, each with the id
    of its row.
    """

    prefix: str
    score: ScoreRow
    picture: Markup
    ledger: tuple[tuple[str, EdgeRow], ...]
    edges_total: int
    is_open: bool


@dataclass(frozen=True)
class Slider:
    """A slider's least and greatest value and its step, as printed."""

    least: str
    most: str
    step: str


@dataclass(frozen=True)
class Sliders:
    """From where to where the edges of all structures can be sifted: by bits given the class and by held-out gain."""

    bits: Slider
    gain: Slider


def draw_structure(
    document: Mapping[str, Any], entry: Mapping[str, Any], svg: str, prefix: str
) -> tuple[Drawn, tuple[str, ...]]:
    """Lay out one structure, and list the style rules of its drawing.

    Raises:
        FormatError: the drawing is no SVG.
    """
    picture = embed(svg, prefix) if svg else None
    tries = document["folds"] * document["settings"]["repeats"]
    place = {name: number for number, name in enumerate(own_attributes(document, entry))}
    one = Drawn(
        prefix=prefix,
        score=score_row(document, entry),
        picture=Markup(picture.markup) if picture else Markup(),
        ledger=tuple(
            (f"{prefix}-r{place[edge['parent']]}-{place[edge['child']]}", edge_row(edge, tries))
            for edge in _strongest(entry)[:EDGES_ON_PAGE]
        ),
        edges_total=len(entry["edges"]),
        is_open=entry["name"] == document["recommended"]["name"],
    )
    return one, picture.styles if picture else ()


def own_attributes(document: Mapping[str, Any], entry: Mapping[str, Any]) -> list[str]:
    """List the attributes of a structure in the order in which its drawing numbers them."""
    dropped = frozenset(entry["chosen"]["dropped"] if entry["chosen"] else ())
    return [name for name in document["attributes"] if name not in dropped]


def _strongest(entry: Mapping[str, Any]) -> list[Mapping[str, Any]]:
    return sorted(entry["edges"], key=lambda one: -one["bits"])


def sliders(structures: Sequence[Mapping[str, Any]]) -> Sliders | None:
    """Find from where to where all edges of all structures reach; None without edges."""
    edges = [edge for entry in structures for edge in entry["edges"]]
    if not edges:
        return None
    gains = [edge["gain"] for edge in edges]
    return Sliders(
        _slider(0.0, max(edge["bits"] for edge in edges), _BITS_STEP, 3),
        _slider(min(gains), max(gains), _GAIN_STEP, 4),
    )


def _slider(least: float, most: float, step: float, digits: int) -> Slider:
    """Widen a range to whole steps, so that every edge can be shown, and all but the greatest be hidden."""
    low, high = (least // step) * step, (most // step) * step
    return Slider(fixed(low, digits), fixed(high if high > low else low + step, digits), f"{step:g}")


def edges_block(document: Mapping[str, Any], ordered: Iterable[tuple[str, Mapping[str, Any]]]) -> Markup:
    """Write every edge of every structure for the scripts, figures as printed, attributes by number.

    ordered: structures of the document with the prefixes of their drawings.
    """
    tries = document["folds"] * document["settings"]["repeats"]
    number = {name: place for place, name in enumerate(document["attributes"])}
    schema = {one["name"]: one for one in document["schema"]}
    return json_block(
        "edges",
        {
            "class": document["class"],
            "names": document["attributes"],
            "levels": [count_of(len(schema[name]["levels"]), "level") for name in document["attributes"]],
            "bits": [fixed(schema[name]["bits_with_class"]) for name in document["attributes"]],
            "edgeClauses": dict(EDGE_CLAUSES),
            "chipSentences": dict(CHIP_SENTENCES),
            "whatIf": dict(WHAT_IF),
            "columns": [*_COLUMNS, "amount", "whatIf", "folds"],
            "structures": [
                {
                    "name": entry["name"],
                    "words": entry["words"],
                    "prefix": prefix,
                    "own": [number[name] for name in own_attributes(document, entry)],
                    "total": len(entry["edges"]),
                    "edges": _edges(entry, tries, number),
                }
                for prefix, entry in ordered
            ],
        },
    )


def _edges(entry: Mapping[str, Any], tries: int, number: Mapping[str, int]) -> list[list[Any]]:
    """Write the edges that the scripts know, most bits first; gains by fold of those in the ledger only."""
    strongest = _strongest(entry)
    known = sorted(range(len(strongest)), key=lambda rank: strongest[rank]["verdict"] != "gains")[:EDGES_IN_DATA]
    return [_edge(strongest[rank], tries, number, rank < EDGES_ON_PAGE) for rank in sorted(known)]


def _edge(edge: Mapping[str, Any], tries: int, number: Mapping[str, int], by_fold: bool) -> list[Any]:
    """Write one edge in the order of the columns."""
    row = edge_row(edge, tries)
    amount = fixed(abs(edge["gain"]), 4)
    return [
        number[row.parent],
        number[row.child],
        *(row.bits, row.gain, row.interval, row.chosen, row.stability, row.gate_p),
        [number[name] for name in row.given],
        int(row.by_blanks),
        row.verdict,
        amount,
        what_if(edge, tries, amount),
        [signed(gain, 4) for gain in edge["gain_by_fold"]] if by_fold else [],
    ]
