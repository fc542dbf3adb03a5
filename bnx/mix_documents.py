"""The mix of structures as plain values ready to be written."""

from collections.abc import Mapping, Sequence
from typing import Any

from bnx.comparison import Comparison
from bnx.formats.mix_json import mixed_document
from bnx.mix_judging import JudgedMix
from bnx.mixed_classifier import mix_words
from bnx.plain import finite
from bnx.score_entries import against_entry, fold_entries, score_entry
from bnx.text import bracketed

__all__ = ["mix_document", "mix_entry"]


def mix_entry(comparison: Comparison) -> dict[str, Any] | None:
    """Describe the mix, its scores, and whether it is offered; None where nothing is mixed."""
    mix, names = comparison.mix, comparison.recipe.structures
    if mix is None:
        return None
    levels = comparison.classifiers[0].target.levels
    members = [names[s] for s in mix.members]
    entry = {
        "words": mix_words(members, list(mix.members.values())),
        "members": [{"name": names[s], "weight": weight} for s, weight in mix.members.items()],
        "sharpness": mix.sharpness,
        "offered": mix.offered,
        "reason": mix_reason(mix, names, names[comparison.recommendation.recommended]),
        **score_entry(mix.score, levels),
        "by_fold": fold_entries(mix.score, levels),
        "against_baseline": against_entry(mix.against, comparison.by_metric(mix.score)),
        "against_recommended": {
            "difference": mix.apart.mean if mix.apart else None,
            "interval": [mix.apart.low, mix.apart.high] if mix.apart else None,
            "probability_better": mix.better,
        },
        "honest_if_allowed": {
            "log_loss": mix.honest.log_loss,
            "accuracy": mix.honest.accuracy,
            "picks": [names[s] if s < len(names) else "mix" for s in mix.picks],
        },
    }
    if comparison.held_out:
        entry["holdout"] = comparison.held_out[-1].to_dict(levels)
    return entry


def mix_document(comparison: Comparison, structures: Sequence[Mapping[str, Any]]) -> dict[str, Any]:
    """Describe the mix with the documents of its members, ready for JSON; structures: documents of all."""
    mix, entry = comparison.mix, mix_entry(comparison)
    if mix is None or entry is None:
        raise ValueError("there is no mix to describe")
    given = {"words", "members", "sharpness", "by_fold", "honest_if_allowed", "offered", "reason"}
    document: dict[str, Any] = finite(
        {
            **mixed_document([structures[s] for s in mix.members], list(mix.members.values()), mix.sharpness),
            "scores": {key: value for key, value in entry.items() if key not in given},
            "offered": entry["offered"],
            "reason": entry["reason"],
        }
    )
    return document


def mix_reason(mix: JudgedMix, names: Sequence[str], recommended: str) -> str:
    """Say whether the mix is offered, and why."""
    if len(mix.members) == 1:
        return f"Not offered: of all rows, {names[next(iter(mix.members))]} takes all the weight."
    if mix.apart is None:
        return "Not offered: it cannot be compared, as a log loss is infinite."
    saves = mix.apart.mean <= 0
    low, high = (-mix.apart.high, -mix.apart.low) if saves else (mix.apart.low, mix.apart.high)
    chance = "which can be chance" if low <= 0 <= high else "more than chance"
    told = (
        f"{'saves' if saves else 'costs'} {abs(mix.apart.mean):.3f} bits per record {bracketed((low, high))} against "
        f"the structure picked without each fold, {chance}; the chance "
        f"that it is better is {100 * mix.better:.0f} %."
    )
    if not mix.offered:
        return f"Not offered: it {told}"
    return (
        f"It may serve where only the probabilities count; take {recommended} where one graph has to be explained or "
        f"handed over. It {told}"
    )
