"""How many of the edges that tested structures draw are false, and how many true ones they find."""

import os
from collections.abc import Sequence
from concurrent.futures import ProcessPoolExecutor
from dataclasses import dataclass
from functools import partial
from multiprocessing import get_context
from typing import Any, NamedTuple

import networkx as nx
import numpy as np
from builders import coded, learnt
from simulations.planted import CLASS, CLASS_SHARES, DESIGNS, LEVELS, Planted

from bnx.structure import Structure

__all__ = ["PROCESSES", "STRUCTURES", "Drawn", "Rates", "draw_many", "false_edges", "rates", "share"]

STRUCTURES = ("tan-tested", "kdb2-tested")
PROCESSES = min(2, os.cpu_count() or 1)


class Drawn(NamedTuple):
    """Edges that one structure drew in one table, and what there was to find.

    ``found``: edges between related attributes, out of ``related`` pairs; ``joined``: attributes in the largest
    connected group of the ``members`` that depend on others.
    """

    edges: int
    false: int
    found: int
    related: int
    joined: int
    members: int


@dataclass(frozen=True)
class Share:
    """A mean over tables and its standard error."""

    mean: float
    error: float


@dataclass(frozen=True)
class Rates:
    """What happened over many tables of one design to one structure; no pair is related in the independent design.

    ``false``: false share of the drawn edges, 0 where nothing is drawn; ``any_edge``: tables with an edge;
    ``found``: related pairs that are drawn; ``joined``: members in one connected group.
    """

    edges: float
    false: Share
    any_edge: Share
    found: Share
    joined: Share


def share(values: Sequence[float] | np.ndarray) -> Share:
    """Average over tables."""
    found = np.asarray(values, dtype=float)
    return Share(float(found.mean()), float(found.std(ddof=1) / np.sqrt(len(found))))


def false_edges(structure: Structure, graph: "nx.DiGraph[int]") -> int:
    """Count edges between attributes that are independent given what was given when the edge was taken.

    Given are the class and, where parents are taken one after the other, the parents already taken.
    """
    false = 0
    for child, parents in enumerate(structure.parents):
        for place, parent in enumerate(parents):
            false += nx.is_d_separator(graph, {child}, {parent}, {CLASS, *parents[:place]})
    return false


def drawn(structure: Structure, planted: Planted) -> Drawn:
    """Hold one structure against the graph of its table."""
    pairs = {frozenset(edge) for edge in structure.edges}
    within: nx.Graph[int] = nx.Graph([edge for edge in structure.edges if set(edge) <= set(planted.members)])
    joined = max((len(group) for group in nx.connected_components(within)), default=0)
    false, found = false_edges(structure, planted.graph), len(pairs & planted.related)
    return Drawn(len(pairs), false, found, len(planted.related), joined, len(planted.members))


def rates(tables: Sequence[Drawn]) -> Rates:
    """Average over the tables of one design and structure."""
    edges, false, found, related, joined, members = np.array(tables, dtype=float).T
    return Rates(
        float(edges.mean()),
        share(false / np.maximum(edges, 1)),
        share(edges > 0),
        share(found / np.maximum(related, 1)),
        share(joined / np.maximum(members, 1)),
    )


def draw_one(design: str, rows: int, seed: int, settings: dict[str, Any], number: int) -> tuple[Drawn, ...]:
    """Draw one table and learn from all its rows."""
    random = np.random.default_rng([seed, rows, number, list(DESIGNS).index(design)])
    planted = DESIGNS[design](rows, random)
    table = coded(planted.codes, planted.target, LEVELS, len(CLASS_SHARES))
    return tuple(drawn(structure, planted) for structure in learnt(table, STRUCTURES, **settings).structures)


def draw_many(
    design: str, rows: int, tables: int, processes: int = 1, seed: int = 1, **settings: Any
) -> dict[str, list[Drawn]]:
    """Learn from many tables, per structure; further settings are those of a recipe."""
    one = partial(draw_one, design, rows, seed, settings)
    if processes > 1:
        with ProcessPoolExecutor(processes, mp_context=get_context("spawn")) as pool:
            found = list(pool.map(one, range(tables), chunksize=50))
    else:
        found = [one(number) for number in range(tables)]
    return {name: [each[k] for each in found] for k, name in enumerate(STRUCTURES)}
