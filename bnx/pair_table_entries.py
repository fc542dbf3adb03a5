"""Tables of the pairs worth looking at, by class: observed, expected and residuals, as plain values."""

from collections.abc import Sequence
from typing import Any

import numpy as np

from bnx.class_tables import tables_by_shape
from bnx.comparison import Comparison
from bnx.effects import BinaryAssociation, YuleQ, binary_association, expected_and_residuals, yule_q
from bnx.verdicts import TestResult

__all__ = ["pair_table_entries"]

_MOST_CELLS = 60_000  # levels x levels x classes, of all tables
_MOST_PAIRS = 200

Ends = tuple[int, int]


def pair_table_entries(comparison: Comparison, listed: Sequence[TestResult]) -> tuple[list[dict[str, Any]], int]:
    """Describe the tables of pairs on all rows, and count the pairs that a structure joins which have none.

    Pairs that a structure joins come first, those of the recommended one before all; then those of most double-counted
    bits, as long as these are not negligible; then those of most bits. What does not fit is skipped: at most 200 pairs
    and 60,000 cells.

    listed: all pairs that the comparison lists, most bits first.
    """
    joined = _joined(comparison)
    chosen = _fitting(comparison, list(dict.fromkeys([*joined, *_telling(comparison, listed)])))
    training = comparison.evaluations[0].learned(()).training
    left, right = (np.array([ends[side] for ends in chosen], np.int64) for side in (0, 1))
    found: dict[int, dict[str, Any]] = {}
    for places, counts in tables_by_shape(comparison.evaluations[0].engine, training, left, right):
        for place, table in zip(places.tolist(), counts, strict=True):
            found[place] = _entry(comparison, chosen[place], table)
    return [found[place] for place in range(len(chosen))], len(set(joined) - set(chosen))


def _joined(comparison: Comparison) -> list[Ends]:
    """List the pairs that a structure joins, those of the recommended one first; the lesser number is first."""
    recommended = comparison.recommendation.recommended
    order = sorted(range(len(comparison.edges)), key=lambda s: s != recommended)
    ends = [(edge.parent, edge.child) for s in order for edge in comparison.edges[s]]
    return list(dict.fromkeys((min(pair), max(pair)) for pair in ends))


def _telling(comparison: Comparison, listed: Sequence[TestResult]) -> list[Ends]:
    """List pairs by double-counted bits, then, from where these are negligible, by bits."""
    number = {name: place for place, name in enumerate(comparison.names)}
    least = comparison.recipe.negligible
    twice = sorted((one for one in listed if one.double_counted_bits > least), key=lambda one: -one.double_counted_bits)
    return [(number[one.a], number[one.b]) for one in (*twice, *listed)]


def _fitting(comparison: Comparison, pairs: Sequence[Ends]) -> list[Ends]:
    """Keep the first pairs whose tables fit."""
    sizes, classes = [len(domain) for domain in comparison.domains], len(comparison.classifiers[0].target)
    chosen: list[Ends] = []
    room = _MOST_CELLS
    for a, b in pairs:
        cells = sizes[a] * sizes[b] * classes
        if len(chosen) < _MOST_PAIRS and cells <= room:
            chosen.append((a, b))
            room -= cells
    return chosen


def _entry(comparison: Comparison, ends: Ends, counts: np.ndarray) -> dict[str, Any]:
    """Describe one pair; counts (C, levels of a, levels of b)."""
    a, b = (comparison.domains[end] for end in ends)
    expected, residuals = expected_and_residuals(counts)
    binary = counts.shape[1:] == (2, 2)
    return {
        "a": a.name,
        "b": b.name,
        "a_levels": list(a.levels),
        "b_levels": list(b.levels),
        "residual": "adjusted",
        "classes": [
            {
                "class": level,
                "rows": int(counts[c].sum()),
                "observed": counts[c].tolist(),
                "expected": expected[c].tolist(),
                "residuals": residuals[c].tolist(),
                "odds": _odds(yule_q(counts[c])) if binary else None,
            }
            for c, level in enumerate(comparison.classifiers[0].target.levels)
        ],
        "common_odds": _common_odds(binary_association(counts)) if binary else None,
    }


def _odds(q: YuleQ) -> dict[str, float]:
    """Turn Yule's Q of a class and its interval into an odds ratio, infinite where it is 1."""
    ratio, low, high = ((1.0 + one) / (1.0 - one) if one != 1.0 else np.inf for one in (q.q, q.low, q.high))
    return {"odds_ratio": ratio, "odds_low": low, "odds_high": high}


def _common_odds(found: BinaryAssociation) -> dict[str, float]:
    """Describe the odds ratio common to all classes, and the tests of there being one."""
    return {
        "odds_ratio": found.odds_ratio,
        "odds_low": found.odds_low,
        "odds_high": found.odds_high,
        "cmh_p": found.cmh_p,
        "breslow_day_p": found.breslow_day_p,
        "tarone_p": found.tarone_p,
    }
