"""A structure as text: parents with their evidence, tables, and what it says about independence."""

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from itertools import product
from typing import Any

import networkx as nx

from bnx.classifier import Classifier
from bnx.errors import DataError
from bnx.text import aligned, bracketed, count_of, fixed, nearest, signed

__all__ = ["Separation", "separation", "structure_text", "table_text"]


_BY_BLANKS = "o carried by blank cells: less than half of the bits are left where neither is blank"


@dataclass(frozen=True)
class Separation:
    """Whether a structure makes two attributes independent given others."""

    structure: str
    a: str
    b: str
    given: tuple[str, ...]
    separated: bool

    def to_dict(self) -> dict[str, Any]:
        """Give the answer as plain values."""
        return {
            "structure": self.structure,
            "a": self.a,
            "b": self.b,
            "given": list(self.given),
            "separated": self.separated,
        }

    def __str__(self) -> str:
        """Say it in a sentence."""
        given = f"given {', '.join(self.given)}" if self.given else "with nothing given"
        if self.separated:
            return (
                f"{self.structure} makes {self.a} and {self.b} independent {given}: every path between them is blocked."
            )
        return f"{self.structure} lets {self.a} and {self.b} depend {given}: a path between them is open."


def separation(classifier: Classifier, a: str, b: str, given: Sequence[str]) -> Separation:
    """Answer by d-separation in the graph of class and attributes.

    Raises:
        DataError: a name is unknown, or named twice.

    Source: Pearl 1988, chapter 3.
    """
    names = [domain.name for domain in classifier.domains]
    target = classifier.target.name
    known = [target, *names]
    for name in (a, b, *given):
        if name not in known:
            raise DataError(f"{name!r} is not in this structure; {nearest(name, known)}")
    named = [a, b, *given]
    twice = [name for place, name in enumerate(named) if name in named[:place]]
    if twice:
        raise DataError(f"{twice[0]!r} is named twice, but the two and what is given must differ; name each once")
    graph = nx.DiGraph((target, name) for name in names)
    graph.add_edges_from((names[parent], names[child]) for parent, child in classifier.structure.edges)
    answer = bool(nx.is_d_separator(graph, {a}, {b}, set(given)))
    return Separation(classifier.structure.name, a, b, tuple(given), answer)


def structure_text(document: Mapping[str, Any]) -> str:
    """Lay out a structure document: how it was made, every attribute, every edge with its evidence."""
    settings = f"smoothing {document['smoothing']}, temperature {document['temperature']:.2f}"
    rows = [
        (
            one["name"],
            str(len(one["levels"])),
            fixed(document["bits_with_class"][one["name"]]),
            ", ".join(one["parents"]) or "-",
        )
        for one in document["attributes"]
    ]
    head = (
        f"{document['name']} ({document['words']})   class {document['class']['name']}: "
        f"{', '.join(document['class']['levels'])}\n{document['rows']:,} rows of {document['source']}; {settings}; "
        f"{count_of(document['free_parameters'], 'free parameter')}"
    )
    attributes = aligned(("attribute", "levels", "bits with class", "parents"), rows)
    return "\n\n".join([head, attributes, _edges(document)])


def _edges(document: Mapping[str, Any]) -> str:
    if not document["edges"]:
        return "no edges between attributes"
    settings = document["settings"]
    folds = f" of {document['folds'] * settings['repeats']}"
    rows = [
        (
            f"{edge['parent']} -> {edge['child']}",
            edge["verdict"] + (" o" if edge.get("carried_by_blanks", False) else ""),
            fixed(edge["bits"]),
            f"{signed(edge['gain'], 4)} {bracketed(edge['gain_interval'], 4)}",
            f"{edge['chosen_in']}{folds}",
            fixed(edge["stability"], 2),
            "" if edge["gate_p"] is None else f"{edge['gate_p']:.2g}",
        )
        for edge in sorted(document["edges"], key=lambda edge: -edge["bits"])
    ]
    header = ("edge", "verdict", "bits given class", "held-out gain, bits", "folds", "stability", "gate p")
    blanks = any(edge.get("carried_by_blanks", False) for edge in document["edges"])
    return aligned(header, rows, left=2) + (f"\n{_BY_BLANKS}" if blanks else "")


def table_text(classifier: Classifier, name: str) -> str:
    """Lay out one attribute's probabilities given class and parents, with the rows behind each line.

    Raises:
        DataError: no attribute has this name.
    """
    names = [domain.name for domain in classifier.domains]
    if name not in names:
        raise DataError(f"{name!r} is not an attribute of this structure; {nearest(name, names)}")
    child = names.index(name)
    parents = classifier.structure.parents[child]
    levels = [classifier.target.levels, *(classifier.domains[parent].levels for parent in parents)]
    table = classifier.table(child)
    rows = []
    for place in product(*(range(len(own)) for own in levels)):
        context = [own[k] for own, k in zip(levels, place, strict=True)]
        behind = round(classifier.counts[child][place].sum())
        rows.append((*context, *(fixed(float(p)) for p in table[place]), f"{behind:,}"))
    header = (classifier.target.name, *(names[parent] for parent in parents), *classifier.domains[child].levels, "rows")
    return f"{name}\n" + aligned(header, rows, left=1 + len(parents))
