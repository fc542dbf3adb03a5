"""Tables of the section on scores: all rows in order, differences by metric, and classes by structure."""

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from typing import Any

from bnx.metric_charts import MetricChart
from bnx.printed import ScoreRow, confusion_rows, mix_row, score_row, yardstick_row
from bnx.text import quoted

__all__ = ["ClassTable", "DifferenceTable", "class_tables", "difference_table", "ranked_rows", "why_below"]


@dataclass(frozen=True)
class DifferenceTable:
    """Differences to the baseline as printed: ``rows`` of (name, (difference with interval, verdict) per metric)."""

    metrics: tuple[str, ...]
    rows: tuple[tuple[str, tuple[tuple[str, str], ...]], ...]


@dataclass(frozen=True)
class ClassTable:
    """What records of each class were taken for; ``rows`` as ``confusion_rows`` gives them, ``role`` in words."""

    name: str
    role: str
    rows: tuple[tuple[str, tuple[tuple[str, str, int], ...], str], ...]


def _in_order(document: Mapping[str, Any]) -> list[Mapping[str, Any]]:
    """Sort structures and mix, lowest log loss first."""
    mix = [{"name": "mix", **document["mix"]}] if document["mix"] else []
    every = [*mix, *document["structures"]]
    return sorted(every, key=lambda one: (one["log_loss"] is None, one["log_loss"] or 0.0))


def ranked_rows(document: Mapping[str, Any]) -> tuple[ScoreRow, ...]:
    """Write the scores of structures and mix, lowest log loss first, then those of models that are no structures."""
    rows = [mix_row(one) if one["name"] == "mix" else score_row(document, one) for one in _in_order(document)]
    return (*rows, *(yardstick_row(one) for one in document["yardsticks"] or ()))


def why_below(document: Mapping[str, Any]) -> str:
    """Say why the recommended structure stands below others; nothing where it stands first."""
    names, advice = [one["name"] for one in _in_order(document)], document["recommended"]
    chosen, told = advice["name"], []
    above = names[: names.index(chosen)]
    structures = [name for name in above if name != "mix"]
    if structures:
        stands = "stands" if len(structures) == 1 else "stand"
        told.append(f"{chosen} is recommended although {quoted(structures)} {stands} above it. {advice['reason']}")
    if "mix" in above:
        told.append(f"The mix stands above {chosen}, but is no single structure: the answer says when to take it.")
    return " ".join(told)


def difference_table(charts: Sequence[MetricChart]) -> DifferenceTable | None:
    """Gather the differences of all metrics that can be compared."""
    shown = [chart for chart in charts if chart.rows]
    if not shown:
        return None
    rows = tuple(
        (row.name, tuple((chart.rows[number].told, chart.rows[number].verdict) for chart in shown))
        for number, row in enumerate(shown[0].rows)
    )
    return DifferenceTable(tuple(chart.metric.name for chart in shown), rows)


def class_tables(document: Mapping[str, Any]) -> tuple[ClassTable, ...]:
    """Write the confusion table of every structure and of the mix: the recommended first, then by log loss."""
    roles = {document["settings"]["baseline"]: "baseline", document["recommended"]["name"]: "recommended"}
    tables = [
        ClassTable(one["name"], roles.get(one["name"], ""), confusion_rows(one, document["class_levels"]))
        for one in _in_order(document)
    ]
    return tuple(sorted(tables, key=lambda one: one.role != "recommended"))
