"""What a model that nobody can read would reach on the same folds: ``--yardstick``."""

import warnings
from collections.abc import Sequence
from dataclasses import dataclass, replace

import numpy as np

from bnx.evaluation import Evaluation
from bnx.fold_cells import Cell, cells_of
from bnx.paired import Chances, Difference, bayesian_t, corrected_t
from bnx.picking import apart
from bnx.rating import StructureScore, score_of
from bnx.recipe import Recipe
from bnx.text import count_of, quoted
from bnx.yardstick_models import MODELS, MOST_LEVELS, Fitted, fit_model, limited, seen_by

__all__ = ["Yardstick", "measure_yardsticks", "yardstick_notes"]

_MEMORY = 2**31  # bytes that fits under way may take together, unless one alone takes more
_BYTES_PER_CELL = 24  # of a fit: numbers, and the copies that are made of them


@dataclass(frozen=True)
class Yardstick:
    """One model that is no structure, judged on the same folds.

    ``against_baseline``, ``apart``: its log loss by fold, in bits, less that of the baseline, and less that of the
    structure picked without the fold; None where a log loss is infinite. ``chances`` of the latter with a region of 0.
    ``unsettled``: fits that did not converge; ``pooled``: attributes of which it could not take all levels.
    """

    name: str
    score: StructureScore
    against_baseline: Difference | None
    apart: Difference | None
    chances: Chances | None
    unsettled: int
    pooled: tuple[str, ...]


def measure_yardsticks(
    evaluations: Sequence[Evaluation],
    results: Sequence[StructureScore],
    picks: Sequence[int],
    recipe: Recipe,
    folds: int,
) -> tuple[Yardstick, ...]:
    """Fit every model without each fold and score it on that fold; none unless the recipe asks for it.

    results: of the structures; picks: the structure picked inside each fold that holds rows.

    Source: Nadeau & Bengio 2003; Corani & Benavoli 2015.
    """
    if not recipe.yardstick:
        return ()
    cells = cells_of(evaluations)
    fitted = _fit_all(evaluations, cells, recipe.seed)
    picked = np.array([results[pick].by_fold[k].scores.log_loss for k, pick in enumerate(picks)])
    baseline = results[recipe.structures.index(recipe.baseline)].fold_losses
    found = []
    for m, name in enumerate(MODELS):
        own = fitted[m * len(cells) : (m + 1) * len(cells)]
        score = score_of(evaluations, own)
        differences = apart(score.fold_losses, picked)
        known = np.isfinite(differences).all()
        found.append(
            Yardstick(
                name,
                score,
                _difference(apart(score.fold_losses, baseline), folds),
                _difference(differences, folds),
                bayesian_t(differences, folds, 0.0) if known else None,
                sum(not one.settled for one in own),
                _pooled(evaluations, cells, own),
            )
        )
    return tuple(found)


def _difference(differences: np.ndarray, folds: int) -> Difference | None:
    return corrected_t(differences, folds) if np.isfinite(differences).all() else None


def _fit_all(evaluations: Sequence[Evaluation], cells: Sequence[Cell], seed: int) -> list[Fitted]:
    """Fit every model for every cell, model by model; as many at a time as memory takes."""
    engine = evaluations[0].engine
    at_once = max(1, _MEMORY // max(1, engine.codes.size * _BYTES_PER_CELL))

    def fit(item: tuple[str, Cell]) -> Fitted:
        name, cell = item
        one = evaluations[cell.repeat]
        runs = [run for fold, own in enumerate(one.fold_rows) if fold != cell.fold for run in own]
        return fit_model(name, one.engine, one.learned((cell.fold,)).training, runs, seed)

    with limited("blas"), warnings.catch_warnings():
        warnings.simplefilter("ignore")  # what does not converge is told as a note
        working = replace(engine, jobs=min(engine.jobs, at_once))
        return working.map(fit, [(name, cell) for name in MODELS for cell in cells], "fitting yardsticks")


def _pooled(evaluations: Sequence[Evaluation], cells: Sequence[Cell], own: Sequence[Fitted]) -> tuple[str, ...]:
    """Name the attributes of which a model took fewer levels than there are, in any fold."""
    fewer = np.zeros(len(own[0].seen.sizes), np.bool_)
    for cell, one in zip(cells, own, strict=True):
        fewer |= one.seen.sizes < seen_by(evaluations[cell.repeat].learned((cell.fold,)).training).sizes
    domains = evaluations[0].learned(()).training.view.domains
    return tuple(domains[i].name for i in np.flatnonzero(fewer).tolist())


def yardstick_notes(yardsticks: Sequence[Yardstick]) -> list[str]:
    """Say which fits did not converge, and what a model could not take as it is."""
    notes = [
        f"{one.name} did not converge in {count_of(one.unsettled, 'fit')}; its scores may be too bad"
        for one in yardsticks
        if one.unsettled
    ]
    return notes + [
        f"{one.name} takes at most {MOST_LEVELS} levels of an attribute; rarer ones are pooled for it: "
        f"{quoted(one.pooled)}"
        for one in yardsticks
        if one.pooled
    ]
