"""The one screen that ``bnx learn`` prints."""

import textwrap
from collections.abc import Mapping, Sequence
from typing import Any

from bnx.text import aligned, bracketed, count_of, fixed, quoted, signed

__all__ = ["summary"]


WIDTH = 120
_FEW = 8


def summary(document: Mapping[str, Any], output: str) -> str:
    """Say in one screen what a run found out."""
    parts = [
        _head(document),
        [_table(document)],
        _legend(document),
        _held_out(document),
        _curve(document),
        _advice(document),
    ]
    return "\n\n".join("\n".join(part) for part in [*parts, [_files(document, output)]] if part)


def _wrapped(sentence: str) -> str:
    return textwrap.fill(sentence, WIDTH, break_long_words=False, break_on_hyphens=False)


def _head(document: Mapping[str, Any]) -> list[str]:
    first = document["structures"][0]
    shares = ", ".join(
        f"{level} {sum(line) / sum(map(sum, first['confusion'])):.0%}"
        for level, line in zip(document["class_levels"], first["confusion"], strict=True)
    )
    numeric = sum(one["numeric"] for one in document["schema"])
    line = (
        f"{document['source']}   {count_of(document['rows'], 'row')}   class {document['class']}: {shares}   "
        f"{count_of(len(document['attributes']), 'attribute')} ({numeric} numeric)"
    )
    return [line, *map(_wrapped, _left_out(document["left_out"]))]


def _left_out(columns: Sequence[Mapping[str, Any]]) -> list[str]:
    """Name the columns that are left out, one a line; where they are many, a line a reason."""
    if len(columns) <= _FEW:
        return [f"left out: {one['name']} ({one['reason']})" for one in columns]
    by_reason: dict[str, list[str]] = {}
    for one in columns:
        by_reason.setdefault(one["reason"], []).append(one["name"])
    lines = [f"left out: {quoted(names)} ({reason})" for reason, names in by_reason.items()]
    if len(lines) <= _FEW:
        return lines
    more = count_of(len(lines) - _FEW, "more reason")
    return [*lines[:_FEW], f"left out for {more}: see comparison.json"]


def _ranked(document: Mapping[str, Any], mix: Mapping[str, Any] | None = None) -> list[Mapping[str, Any]]:
    """List structures by log loss, and the mix among them if it is given."""
    every = [*document["structures"], *([{"name": "mix"} | dict(mix)] if mix else [])]
    return sorted(every, key=_by_loss)


def _by_loss(one: Mapping[str, Any]) -> tuple[bool, float]:
    return one["log_loss"] is None, one["log_loss"] or 0.0


def _table(document: Mapping[str, Any]) -> str:
    against = f"against {document['settings']['baseline']}, bits"
    header = ("structure", "edges", "params", "log loss, bits", against, "p", *_SCORES, "temp.")
    every = sorted([*_ranked(document, document["mix"]), *(document["yardsticks"] or ())], key=_by_loss)
    return aligned(header, [_row(one, document) for one in every])


_NO_STRUCTURE = ("not a", "structure")  # read on from one column to the next
_SCORES = ("Brier", "accuracy", "AUC", "calib.")


def _bits(loss: float | None) -> str:
    return "infinite" if loss is None else fixed(loss)


def _scores(one: Mapping[str, Any]) -> tuple[str, ...]:
    return (fixed(one["brier"]), fixed(one["accuracy"]), fixed(one["auc"]), fixed(one["calibration_error"]))


def _row(one: Mapping[str, Any], document: Mapping[str, Any]) -> tuple[str, ...]:
    against = one["against_baseline"]
    difference = (
        "" if against["difference"] is None else f"{signed(against['difference'])} {bracketed(against['interval'])}"
    )
    error = "" if one["log_loss_se"] is None else f" +- {fixed(one['log_loss_se'])}"
    p_value = against.get("p_value")
    p = "" if p_value is None else "<.001" if p_value < 0.001 else fixed(p_value)
    sizes = (f"{len(one['edges']):,}", f"{one['free_parameters']:,}") if "edges" in one else ("", "")
    mark = "*" if one["name"] == document["recommended"]["name"] else " "
    return (
        f"{mark} {one['name']}",
        *(_NO_STRUCTURE if "against_recommended" in one and "words" not in one else sizes),
        _bits(one["log_loss"]) + error,
        difference,
        p,
        *_scores(one),
        fixed(one["temperature"], 2) if "edges" in one else "",
    )


def _legend(document: Mapping[str, Any]) -> list[str]:
    """Say the names in words, and the short headings in full."""
    ranked = _ranked(document, document["mix"])
    names = "; ".join(f"{one['name']}: {one['words']}" for one in ranked if one["words"] != one["name"])
    scores = "scores after calibration" if document["settings"]["temperature"] else "scores without calibration"
    columns = f"{scores}; interval 95 %; p adjusted over the structures; calib.: calibration error; "
    columns += "temp.: temperature"
    if document["yardsticks"]:
        columns += "; not a structure: fitted on the same folds and levels for comparison only, and not calibrated"
    return [_wrapped(part + ".") for part in (names, columns) if part]


def _held_out(document: Mapping[str, Any]) -> list[str]:
    """Lay out the scores on a table that took no part, if there is one."""
    scored = [one for one in _ranked(document, document["mix"]) if "holdout" in one]
    if not scored:
        return []
    rows = [(f"  {one['name']}", _bits(one["holdout"]["log_loss"]), *_scores(one["holdout"])) for one in scored]
    head = "On the --holdout table, by the structures learnt from all rows of this one:"
    return [head, aligned(("structure", "log loss, bits", *_SCORES), rows)]


def _curve(document: Mapping[str, Any]) -> list[str]:
    """Lay out log loss by training rows, if it was asked for."""
    curve = document["learning_curve"]
    if curve is None:
        return []
    names = [one["name"] for one in curve["points"][0]["structures"]]
    header = ("training rows", *(text for name in names for text in (f"{name}, bits", "costs, bits")))
    rows = []
    for point in curve["points"]:
        cells = [f"  {point['training_rows']:,.0f}"]
        for one in point["structures"]:
            ends = one["interval"]
            cost = f"{signed(one['cost'])} {bracketed(ends)}" if ends else ""
            error = "" if one["log_loss_se"] is None else f" +- {fixed(one['log_loss_se'])}"
            cells += [_bits(one["log_loss"]) + error, cost]
        rows.append(cells)
    return [aligned(header, rows), _wrapped(curve["sentence"])]


def _advice(document: Mapping[str, Any]) -> list[str]:
    advice = document["recommended"]
    honest = advice["honest_log_loss"]
    lines = [
        f"recommended (*): {advice['name']}. {advice['reason']}",
        f"Its honest score, from folds that took no part in choosing: "
        f"{_bits(honest)} bits, accuracy {fixed(advice['honest_accuracy'])}.",
    ]
    if document["mix"]:
        lines.append(f"mix of {document['mix']['words']}. {document['mix']['reason']}")
    lines += [one["sentence"] for one in document["yardsticks"] or ()]
    naive = next((one for one in document["structures"] if one["name"] == "naive"), None)
    if naive and naive["temperature"] < 0.95:
        lines.append(
            f"Naive Bayes is over-confident here: its evidence is worth {naive['temperature']:.2f} of its face value"
            + (
                ", as happens where dependent attributes are each counted as news."
                if document["pairs_verdicts"]["dependent"]
                else "; with no dependent pair in sight, a small table may be why."
            )
        )
    return [_wrapped(line) for line in (*lines, *_pairs(document))]


def _pairs(document: Mapping[str, Any]) -> list[str]:
    """Say how many pairs depend, which most, and how many cannot be told."""
    verdicts = document["pairs_verdicts"]
    settings = document["settings"]
    rate = {"bh": "false-discovery rate", "by": "false-discovery rate", "holm": "family-wise rate", "none": "level"}
    small = verdicts["negligible"] + verdicts["detected, but negligible"]
    judged, total = document["pairs_judged"], document["pairs_total"]
    which = count_of(judged, "pair") + (f" judged ({total:,} tested)" if judged < total else "")
    line = (
        f"{verdicts['dependent']:,} of {which} depend given {document['class']} "
        f"({rate[settings['adjust']]} {settings['alpha']:g}); {small:,} are negligible; "
        f"{verdicts['not enough data']:,} cannot be told at this sample size"
    )
    dependent = [pair for pair in document["pairs"] if pair["verdict"] == "dependent"][:3]
    if not dependent:
        return [line + "."]
    most = quoted(f"{pair['a']} ~ {pair['b']} ({pair['bits']:.3f} bits)" for pair in dependent)
    return [line + ".", f"Most dependent: {most}."]


def _files(document: Mapping[str, Any], output: str) -> str:
    structures = count_of(len(document["structures"]), "structure")
    mix = "mix.json, " if document["mix"] and document["mix"]["offered"] else ""
    place = f"{output.rstrip('/') or '/'}/"
    return f"{place}: report.html, comparison.json, pairs.csv, {mix}{structures} as .json .svg .dot"
