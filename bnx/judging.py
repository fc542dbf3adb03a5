"""Differences of each structure to the baseline, and which structure to recommend."""

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

from bnx.evaluation import Evaluation
from bnx.fold_cells import cells_of
from bnx.losses import Scores
from bnx.multiplicity import adjusted
from bnx.paired import Chances, Difference, bayesian_t, corrected_t
from bnx.picking import apart, pick, region_of
from bnx.rating import StructureScore
from bnx.structure import Structure
from bnx.text import quoted

__all__ = ["Against", "Recommendation", "against", "inner_picks", "mixed_picks", "reason_for", "recommend"]


@dataclass(frozen=True)
class Against:
    """A structure's log loss minus the baseline's, in bits; p is adjusted over the structures by Holm."""

    difference: Difference
    adjusted_p: float
    region: float
    chances: Chances


@dataclass(frozen=True)
class Recommendation:
    """Which structures are ``best`` and ``recommended`` (by number), the sentence that says why, and honest scores.

    ``picks``: what the same rule picks inside each outer fold; ``honest``: those folds' rows under those picks.
    """

    best: int
    recommended: int
    reason: str
    honest: Scores
    picks: tuple[int, ...]


def against(results: Sequence[StructureScore], baseline: int, folds: int) -> list[Against | None]:
    """Compare every structure with the baseline; None for the baseline, and where a log loss is infinite.

    Source: Nadeau & Bengio 2003; Corani & Benavoli 2015; Holm 1979.
    """
    region = region_of([result.pooled.log_loss for result in results])
    others = [s for s in range(len(results)) if s != baseline]
    found: dict[int, tuple[Difference, Chances]] = {}
    for s in others:
        differences = apart(results[s].fold_losses, results[baseline].fold_losses)
        if np.isfinite(differences).all():
            found[s] = corrected_t(differences, folds), bayesian_t(differences, folds, region)
    p = adjusted(np.array([found[s][0].p_value for s in found]), "holm")
    by_number = dict(zip(found, p.tolist(), strict=True))
    return [
        Against(found[s][0], by_number[s], region, found[s][1]) if s in found else None for s in range(len(results))
    ]


def inner_picks(evaluations: Sequence[Evaluation]) -> list[int]:
    """Pick by the same rule inside every outer fold that holds rows, from what its own inner folds say."""
    return [evaluations[cell.repeat].choices[(cell.fold,)].single for cell in cells_of(evaluations)]


def mixed_picks(evaluations: Sequence[Evaluation]) -> list[int]:
    """Pick where the mix, numbered after the last structure, may be taken instead of a structure."""
    choices = [evaluations[cell.repeat].choices[(cell.fold,)] for cell in cells_of(evaluations)]
    return [len(one.smoothings) if one.mix and one.mix.taken else one.single for one in choices]


def recommend(
    evaluations: Sequence[Evaluation],
    results: Sequence[StructureScore],
    picks: Sequence[int],
    honest: Scores,
    names: Sequence[str],
    folds: int,
) -> Recommendation:
    """Recommend a structure.

    picks, honest: what the same rule picks inside every outer fold, and how it scores on rows that it never saw.
    """
    losses = np.array([result.fold_losses for result in results])
    structures = evaluations[0].learned(()).structures
    means = [result.pooled.log_loss for result in results]
    best, chosen, chances = pick(losses, structures, means, folds)
    reason = reason_for(names, structures, means, best, chosen, chances)
    return Recommendation(best, chosen, reason, honest, tuple(picks))


def reason_for(
    names: Sequence[str],
    structures: Sequence[Structure],
    means: Sequence[float],
    best: int,
    chosen: int,
    chances: Chances,
) -> str:
    """Say why a structure is recommended.

    names, structures, means: of all compared, mean log losses in bits; best, chosen: numbers; chances: of the chosen
    against the best.
    """
    if len(names) == 1:
        return "It is the only structure compared."
    matters = f"an amount that matters (more than {region_of(means):.2g} bits)"
    own = structures[chosen]
    least = not any(len(one.edges) < len(own.edges) for one in structures)
    fewer = "none has fewer edges" if least else f"each structure with fewer edges is probably worse by {matters}"
    alike = [s for s, one in enumerate(structures) if s not in (chosen, best) and one.what_it_says == own.what_it_says]
    twins = f" {quoted([names[s] for s in alike])} learnt the same edges from all rows." if alike and own.edges else ""
    if not own.edges and chosen == best:
        return "It has the lowest log loss and no edges: no dependence pays here."
    if chosen == best:
        return f"It has the lowest log loss, and {fewer}.{twins}"
    if own.what_it_says == structures[best].what_it_says:
        same = f"From all rows it learnt the same edges as {names[best]}, which has the lowest log loss"
        return f"{same}; {fewer}.{twins}" if own.edges else f"{same}: none, so no dependence pays here."
    return (
        f"It has the fewest edges of all that are probably as good as {names[best]}, which has the lowest log loss: it "
        f"is behind by {means[chosen] - means[best]:.4f} bits, and the chance that it is worse by {matters} is "
        f"{100 * chances.worse:.0f} %.{twins}"
    )
