"""Rows of the page's tables, every figure as it is printed."""

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, replace
from typing import Any

from bnx.counted_twice import bits_twice
from bnx.findings import chance, percent
from bnx.text import bracketed, fixed, signed

__all__ = [
    "CurveTable",
    "EdgeRow",
    "PairRow",
    "ScoreRow",
    "confusion_rows",
    "curve_table",
    "edge_row",
    "mix_row",
    "pair_row",
    "score_row",
    "yardstick_row",
]

_DASH = "–"
_METHODS = {
    "chi2-tail": "X², tail of chi-square",
    "g-tail": "G, tail of chi-square",
    "moments": "X², matched moments",
    "exact": "X², exact",
    "monte-carlo": "X², random tables",
    "none": "none: these margins allow no rejection",
}


@dataclass(frozen=True)
class ScoreRow:
    """One row in the table of scores, as printed; ``kind``: ``structure``, ``mix`` or ``yardstick``."""

    kind: str
    name: str
    words: str
    role: str
    edges: str
    parameters: str
    log_loss: str
    error: str
    difference: str
    interval: str
    p_value: str
    better: str
    brier: str
    accuracy: str
    balanced: str
    auc: str
    calibration: str
    classwise: str
    slope: str
    temperature: str
    smoothing: str
    holdout: str


@dataclass(frozen=True)
class EdgeRow:
    """One edge in the ledger of its structure, as printed."""

    parent: str
    child: str
    bits: str
    gain: str
    interval: str
    chosen: str
    stability: str
    gate_p: str
    given: tuple[str, ...]
    by_blanks: bool
    verdict: str


@dataclass(frozen=True)
class PairRow:
    """One pair in the ledger, as printed."""

    a: str
    b: str
    bits: str
    interval: str
    at_most: str
    marginal: str
    double_counted: str
    outcome: str
    cramers_v: str
    statistic: str
    df: str
    adjusted_p: str
    method: str
    carried: str
    min_expected: str
    detectable: str
    verdict: str


@dataclass(frozen=True)
class CurveTable:
    """Log loss by training rows, as printed: ``rows`` of (training rows, (log loss, cost) per structure)."""

    names: tuple[str, ...]
    rows: tuple[tuple[str, tuple[tuple[str, str], ...]], ...]
    sentence: str


def _p(value: float | None) -> str:
    """Write a p-value: four decimals, or a power of ten below a thousandth."""
    if value is None:
        return _DASH
    if value == 0.0:
        return "< 1e-300"
    return f"{value:.4f}" if value >= 0.001 else f"{value:.0e}"


def _number(value: float | None, digits: int = 3) -> str:
    return _DASH if value is None else fixed(value, digits)


def _loss(value: float | None) -> str:
    return "infinite" if value is None else fixed(value)


def score_row(document: Mapping[str, Any], entry: Mapping[str, Any]) -> ScoreRow:
    """Write one structure's scores; nothing stands where the baseline has no difference to itself."""
    against = entry["against_baseline"]
    roles = {
        "recommended": document["recommended"]["name"],
        "lowest log loss": document["best"],
        "baseline": document["settings"]["baseline"],
    }
    role = ", ".join(word for word, name in roles.items() if name == entry["name"])
    return ScoreRow(
        kind="structure",
        name=entry["name"],
        words=entry["words"],
        role=role,
        edges=f"{len(entry['edges']):,}",
        parameters=f"{entry['free_parameters']:,}",
        log_loss=_loss(entry["log_loss"]),
        error="" if entry["log_loss_se"] is None else fixed(entry["log_loss_se"]),
        difference=_DASH if against["difference"] is None else signed(against["difference"]),
        interval=bracketed(against["interval"]),
        p_value=_p(against["p_value"]),
        better=chance(against["probability_better"]),
        brier=_number(entry["brier"]),
        accuracy=_number(entry["accuracy"]),
        balanced=_number(entry["balanced_accuracy"]),
        auc=_number(entry["auc"]),
        calibration=_number(entry["calibration_error"]),
        classwise=_number(entry["classwise_calibration_error"]),
        slope=_number(entry["calibration_slope"], 2),
        temperature=_number(entry["temperature"], 2),
        smoothing=entry["smoothing"],
        holdout=_loss(entry["holdout"]["log_loss"]) if "holdout" in entry else "",
    )


def mix_row(entry: Mapping[str, Any]) -> ScoreRow:
    """Write the scores of the mix, which has no edges, tables and temperature of its own."""
    return _row_of_none({"name": "mix", **entry}, "mix", "offered" if entry["offered"] else "not offered")


def yardstick_row(entry: Mapping[str, Any]) -> ScoreRow:
    """Write the scores of a model that is no structure."""
    against = {"p_value": None, "probability_better": None, **entry["against_baseline"]}
    return _row_of_none({"words": "not a structure", **entry, "against_baseline": against}, "yardstick", "")


def _row_of_none(entry: Mapping[str, Any], kind: str, role: str) -> ScoreRow:
    """Write the scores of what is no structure."""
    own = {"edges": [], "free_parameters": 0, "temperature": None, "smoothing": "", **entry}
    nobody = {"recommended": {"name": ""}, "best": "", "settings": {"baseline": ""}}
    return replace(score_row(nobody, own), kind=kind, role=role, edges=_DASH, parameters=_DASH)


def curve_table(curve: Mapping[str, Any]) -> CurveTable:
    """Write log loss by training rows."""
    rows = tuple(
        (
            f"{point['training_rows']:,.0f}",
            tuple(
                (
                    _loss(one["log_loss"]) + ("" if one["log_loss_se"] is None else f" ± {fixed(one['log_loss_se'])}"),
                    _DASH if one["cost"] is None else f"{signed(one['cost'])} {bracketed(one['interval'])}",
                )
                for one in point["structures"]
            ),
        )
        for point in curve["points"]
    )
    return CurveTable(tuple(one["name"] for one in curve["points"][0]["structures"]), rows, curve["sentence"])


def edge_row(edge: Mapping[str, Any], tries: int) -> EdgeRow:
    """Write one edge; tries: folds x repeats."""
    return EdgeRow(
        parent=edge["parent"],
        child=edge["child"],
        bits=fixed(edge["bits"]),
        gain=signed(edge["gain"], 4),
        interval=bracketed(edge["gain_interval"], 4),
        chosen=f"{edge['chosen_in']} of {tries}",
        stability=percent(edge["stability"], 0),
        gate_p=_p(edge["gate_p"]),
        given=tuple(edge["gate_given"]),
        by_blanks=edge["carried_by_blanks"],
        verdict=edge["verdict"],
    )


def confusion_rows(
    entry: Mapping[str, Any], levels: Sequence[str]
) -> tuple[tuple[str, tuple[tuple[str, str, int], ...], str], ...]:
    """List (true class, ((records, share of the class, shade 0 to 9) per class given), recall) for every class."""
    table = []
    for level, row in zip(levels, entry["confusion"], strict=True):
        total = sum(row)
        shares = [count / total if total else 0.0 for count in row]
        cells = tuple(
            (f"{count:,}", percent(share, 0) if total else _DASH, min(9, int(10 * share)))
            for count, share in zip(row, shares, strict=True)
        )
        table.append((level, cells, percent(entry["recall"][level])))
    return tuple(table)


def pair_row(pair: Mapping[str, Any]) -> PairRow:
    """Write one pair."""
    return PairRow(
        a=pair["a"],
        b=pair["b"],
        bits=fixed(pair["bits"], 4),
        interval=bracketed((pair["bits_low"], pair["bits_high"]), 3, sign=False) or _DASH,
        at_most=_number(pair["bits_at_most"], 4),
        marginal=_number(pair["marginal_bits"], 4),
        double_counted=_number(bits_twice(pair), 4),
        outcome=pair["outcome"],
        cramers_v=_number(pair["cramers_v"], 2),
        statistic=_number(pair["statistic"], 1),
        df=f"{pair['df']:,}",
        adjusted_p=_p(pair["adjusted_p"]),
        method=_METHODS[pair["method"]],
        carried="yes" if pair["sample_carries_it"] else "no",
        min_expected=_number(pair["min_expected"], 1),
        detectable=_DASH
        if pair["detectable_bits"] is None
        else ("" if pair["bits_low"] is not None else "about ") + fixed(pair["detectable_bits"], 4),
        verdict=pair["verdict"],
    )
