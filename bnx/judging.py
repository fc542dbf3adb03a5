"""Scores of each structure, differences to the baseline, and which structure to recommend."""

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

from bnx.calibrating import slope
from bnx.engines import LocalEngine
from bnx.evaluation import Evaluation
from bnx.losses import Scores, log_losses, scores
from bnx.multiplicity import adjusted
from bnx.paired import Chances, Difference, bayesian_t, corrected_t
from bnx.structure import Structure

__all__ = ["Against", "FoldScore", "Recommendation", "StructureScore", "against", "recommend", "region_of", "score"]


@dataclass(frozen=True)
class FoldScore:
    """Scores of one structure on the rows of one fold."""

    repeat: int
    fold: int
    rows: int
    scores: Scores
    slope: float | None


@dataclass(frozen=True)
class StructureScore:
    """Out-of-fold scores of one structure: pooled, and fold by fold; ``error``: standard error of the log loss."""

    pooled: Scores
    error: float
    slope: float | None
    by_fold: tuple[FoldScore, ...]

    @property
    def fold_losses(self) -> np.ndarray:
        """Mean log loss of each fold of each repeat, bits."""
        return np.array([fold.scores.log_loss for fold in self.by_fold])


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


def score(evaluations: Sequence[Evaluation], engine: LocalEngine) -> list[StructureScore]:
    """Score every structure on all out-of-fold rows."""
    structures = range(len(evaluations[0].p))
    cells = [(s, repeat, fold) for s in structures for repeat, one in enumerate(evaluations) for fold in _filled(one)]

    def judge_fold(cell: tuple[int, int, int]) -> FoldScore:
        s, repeat, fold = cell
        one = evaluations[repeat]
        rows = one.fold_rows[fold]
        p, truth = _joined(one.p[s], rows), _joined(one.engine.target, rows)
        return FoldScore(repeat, fold, len(truth), scores(p, truth, one.engine.classes), slope(p, truth))

    def judge(s: int) -> tuple[Scores, float, float | None]:
        p, truth = pooled(evaluations, s)
        rows = log_losses(p, truth)
        with np.errstate(invalid="ignore"):
            error = float(rows.std() / np.sqrt(len(rows) / len(evaluations)))
        return scores(p, truth, engine.classes), error, slope(p, truth)

    by_fold = engine.map(judge_fold, cells, "scoring")
    overall = engine.map(judge, structures, "scoring")
    return [
        StructureScore(*overall[s], tuple(one for cell, one in zip(cells, by_fold, strict=True) if cell[0] == s))
        for s in structures
    ]


def _filled(evaluation: Evaluation) -> list[int]:
    """List the folds that hold rows."""
    return [fold for fold, runs in enumerate(evaluation.fold_rows) if any(run.stop > run.start for run in runs)]


def _joined(values: np.ndarray, runs: Sequence[slice]) -> np.ndarray:
    """Join the values of several runs of rows."""
    return values[runs[0]] if len(runs) == 1 else np.concatenate([values[run] for run in runs])


def pooled(evaluations: Sequence[Evaluation], s: int) -> tuple[np.ndarray, np.ndarray]:
    """Join one structure's out-of-fold probabilities (rows, C) and the truth (rows,) over repeats."""
    if len(evaluations) == 1:
        return evaluations[0].p[s], evaluations[0].engine.target
    return (
        np.concatenate([one.p[s] for one in evaluations]),
        np.concatenate([one.engine.target for one in evaluations]),
    )


def region_of(losses: Sequence[float]) -> float:
    """Width in bits of the region of practical equivalence: .01, or 5 % of the best log loss if that is less."""
    return min(0.01, 0.05 * min(losses))


def against(results: Sequence[StructureScore], baseline: int, folds: int) -> list[Against | None]:
    """Compare every structure with the baseline; None for the baseline, and where a log loss is infinite.

    Source: Nadeau & Bengio 2003; Corani & Benavoli 2015; Holm 1979.
    """
    region = region_of([result.pooled.log_loss for result in results])
    others = [s for s in range(len(results)) if s != baseline]
    found: dict[int, tuple[Difference, Chances]] = {}
    for s in others:
        differences = _differences(results[s].fold_losses, results[baseline].fold_losses)
        if np.isfinite(differences).all():
            found[s] = corrected_t(differences, folds), bayesian_t(differences, folds, region)
    p = adjusted(np.array([found[s][0].p_value for s in found]), "holm")
    by_number = dict(zip(found, p.tolist(), strict=True))
    return [
        Against(found[s][0], by_number[s], region, found[s][1]) if s in found else None for s in range(len(results))
    ]


def _differences(losses: np.ndarray, others: np.ndarray) -> np.ndarray:
    """Subtract fold means; infinite minus infinite is no difference that could be judged."""
    with np.errstate(invalid="ignore"):
        return np.asarray(losses - others)


def pick(
    losses: np.ndarray, structures: Sequence[Structure], means: Sequence[float], folds: int
) -> tuple[int, int, Chances]:
    """Pick the structure with fewest edges whose chance of being worse than the best by the region is below .5.

    Of structures that are the same but for their name, the first one asked for stands for all.
    losses: (structures, folds) mean log losses in bits; means: of each structure.

    Returns:
        The best, the pick, and the chances of the pick against the best.
    """
    best = int(np.argmin(means))
    region = region_of(means)
    chances = [_chances(row, losses[best], folds, region) for row in losses]
    able = [s for s in range(len(structures)) if s == best or chances[s].worse < 0.5]
    first = {structures[s].parents: s for s in reversed(able)}
    chosen = min(first.values(), key=lambda s: (len(structures[s].edges), means[s], s))
    return best, chosen, chances[chosen]


def _chances(losses: np.ndarray, best: np.ndarray, folds: int, region: float) -> Chances:
    differences = _differences(losses, best)
    if not np.isfinite(differences).all():
        return Chances(0.0, 0.0, 1.0)
    return bayesian_t(differences, folds, region)


def recommend(
    evaluations: Sequence[Evaluation], results: Sequence[StructureScore], names: Sequence[str], folds: int
) -> Recommendation:
    """Recommend a structure, and score the same rule applied inside every outer fold to rows that it never saw."""
    losses = np.array([result.fold_losses for result in results])
    structures = evaluations[0].learned(()).structures
    means = [result.pooled.log_loss for result in results]
    best, chosen, chances = pick(losses, structures, means, folds)
    p, truth, picks = [], [], []
    for one in evaluations:
        for fold in _filled(one):
            inner = one.choices[(fold,)].losses
            own = one.learned((fold,)).structures
            picked = pick(inner, own, inner.mean(axis=1).tolist(), inner.shape[1])[1] if len(own) > 1 else 0
            picks.append(picked)
            p += [one.p[picked][run] for run in one.fold_rows[fold]]
            truth += [one.engine.target[run] for run in one.fold_rows[fold]]
    honest = scores(np.concatenate(p), np.concatenate(truth), evaluations[0].engine.classes)
    return Recommendation(best, chosen, _reason(names, structures, means, best, chosen, chances), honest, tuple(picks))


def _reason(
    names: Sequence[str],
    structures: Sequence[Structure],
    means: Sequence[float],
    best: int,
    chosen: int,
    chances: Chances,
) -> str:
    """Say why a structure is recommended."""
    if len(names) == 1:
        return "It is the only structure compared."
    fewer = (
        f"every structure with fewer edges is more likely than not to be worse by more than {region_of(means):.2g} bits"
    )
    if not structures[chosen].edges and chosen == best:
        return "It has the lowest log loss and no edges: no dependence pays here."
    if chosen == best:
        return f"It has the lowest log loss, and {fewer}."
    if structures[chosen].parents == structures[best].parents:
        return f"From all rows it learnt the same edges as {names[best]}, which has the lowest log loss; {fewer}."
    return (
        f"It has the fewest edges of all structures that are not credibly worse than the best, {names[best]}: the "
        f"difference is {means[chosen] - means[best]:.4f} bits, with a chance of {chances.worse:.0%} to exceed "
        f"{region_of(means):.2g} bits."
    )
