"""The attributes and the records of each of their levels by class, as plain values."""

from collections.abc import Sequence
from typing import Any

import numpy as np

from bnx.comparison import Comparison
from bnx.level_counts import LevelCounts
from bnx.level_evidence import Spoken, evidence_of

__all__ = ["attribute_entries"]


def attribute_entries(comparison: Comparison) -> list[dict[str, Any]]:
    """Describe every attribute, with its counts as far as the comparison keeps them."""
    classes = comparison.classifiers[0].target.levels
    return [
        {
            "name": domain.name,
            "numeric": domain.numeric,
            "levels": list(domain.levels),
            "cuts": list(domain.cuts),
            "bits_with_class": float(bits),
            "counted": None if counts is None else _counted(counts, classes),
        }
        for domain, bits, counts in zip(comparison.domains, comparison.relevance, comparison.levels, strict=True)
    ]


def _counted(counts: LevelCounts, classes: Sequence[str]) -> dict[str, Any]:
    """Describe the counts of one attribute."""
    spread, extent = counts.spread, counts.extent
    masses = counts.rows if counts.masses is None else counts.masses
    return {
        "rows": counts.rows.tolist(),
        "masses": None if counts.masses is None else counts.masses.tolist(),
        "speaks_for": [_spoken(one, classes) for one in evidence_of(counts.rows, masses)],
        "different_values": extent.distinct,
        "blanks": _blanks(counts, classes),
        "pooled": counts.pooled
        and {
            "level": counts.domain.levels[counts.pooled.level],
            "values": counts.pooled.values,
            "most_frequent": [{"value": value, "rows": rows} for value, rows in counts.pooled.named],
        },
        "distribution": spread
        and {
            "lowest": extent.lowest,
            "highest": extent.highest,
            "edges": spread.edges.tolist(),
            "rows": spread.rows.tolist(),
        },
    }


def _blanks(counts: LevelCounts, classes: Sequence[str]) -> dict[str, Any] | None:
    """Describe blank cells; as a level they are one of the levels, else they stand beside those."""
    domain = counts.domain
    if not counts.blank_rows.any():
        return None
    rows = np.stack([counts.blank_rows, counts.rows.sum(axis=0) - domain.blank * counts.blank_rows])
    masses = rows
    if counts.masses is not None and counts.blank_masses is not None:
        rest = counts.masses.sum(axis=0) - domain.blank * counts.blank_masses
        masses = np.stack([counts.blank_masses, np.maximum(rest, 0.0)])
    return {
        "level": domain.levels[-1] if domain.blank else None,
        "rows": counts.blank_rows.tolist(),
        "masses": None if counts.blank_masses is None else counts.blank_masses.tolist(),
        "speaks_for": _spoken(evidence_of(rows, masses)[0], classes),
    }


def _spoken(spoken: Spoken | None, classes: Sequence[str]) -> dict[str, Any] | None:
    return (
        None if spoken is None else {"class": classes[spoken.target], "bits": spoken.bits, "residual": spoken.residual}
    )
