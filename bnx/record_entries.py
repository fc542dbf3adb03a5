"""The records on which naive and a structure disagree most, as plain values ready to be written."""

from collections.abc import Sequence
from typing import Any

from bnx.comparison import Comparison
from bnx.weight_of_evidence import Line, Side, Told

__all__ = ["records_entry"]

_MEASURE = "Jensen-Shannon divergence, bits"


def records_entry(comparison: Comparison) -> dict[str, Any] | None:
    """Describe the records; None where none are asked for."""
    records, names = comparison.records, comparison.recipe.structures
    if records is None:
        return None
    differ, other = records.differ, records.contrast.other
    return {
        "structure": None if other is None else names[other],
        "reason": records.contrast.reason,
        "measure": _MEASURE,
        "asked": records.asked,
        "differ": None
        if differ is None
        else {
            "records": differ.rows,
            "naive_right": differ.naive_right,
            "structure_right": differ.other_right,
            "mean_disagreement": differ.bits,
        },
        "rows": [_record(comparison, one) for one in records.told],
    }


def _record(comparison: Comparison, one: Told) -> dict[str, Any]:
    levels, row = comparison.classifiers[0].target.levels, one.pick.row
    return {
        "line": int(comparison.lines.of_rows(row, row + 1)[0]),
        "fold": one.pick.fold,
        "truth": levels[one.truth],
        "disagreement": one.pick.bits,
        "alike": dict(zip(levels, one.alike.tolist(), strict=True)),
        "probabilities": {"naive": one.naive.probabilities.tolist(), "structure": one.structure.probabilities.tolist()},
        "for": levels[one.chosen],
        "against": levels[one.other],
        "prior_bits": one.prior,
        "attributes": [_attribute(comparison.names, line) for line in one.lines],
        "rest": {
            "attributes": one.rest.attributes,
            "naive_bits": one.rest.naive,
            "structure_bits": one.rest.structure,
            "twice_bits": one.rest.twice,
            "adds_bits": one.rest.adds,
        },
        "naive": _side(one.naive),
        "structure": _side(one.structure),
    }


def _attribute(names: Sequence[str], line: Line) -> dict[str, Any]:
    return {
        "name": names[line.attribute],
        "level": line.level,
        "parents": [names[parent] for parent in line.parents],
        "left_out": line.left_out,
        "naive_bits": line.naive,
        "structure_bits": line.structure,
        "twice_bits": line.twice,
        "adds_bits": line.adds,
        "turned_round": line.is_turned,
    }


def _side(side: Side) -> dict[str, Any]:
    return {
        "summed_out_bits": side.summed_out,
        "log_odds_bits": side.log_odds,
        "temperature": side.temperature,
        "offset_bits": side.offset,
        "floor": side.floor,
    }
