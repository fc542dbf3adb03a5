"""Compare ways to smooth on one table: same structures, folds, cut points to choose from, and calibration."""

from collections import Counter
from collections.abc import Iterator, Mapping, Sequence
from contextlib import ExitStack, contextmanager
from pathlib import Path
from typing import Any
from unittest.mock import patch

import numpy as np
import pandas as pd
from quality.measuring import recipe_for
from quality.smoothing_schemes import PROGRAM, SCHEMES, Way

from bnx import choosing
from bnx.calibrating import probabilities
from bnx.choosing import Trial, choose, inner_losses, make_trial
from bnx.cut_trials import bins_to_try
from bnx.dealing import deal
from bnx.engines import start_local
from bnx.engines.local import LocalEngine
from bnx.folds import sub_blocks
from bnx.learners import learner
from bnx.learning import learn, make_bounds
from bnx.reading import open_source
from bnx.recipe import Recipe
from bnx.sampling import sample_for_choices
from bnx.scoring import Counted, Terms, padded
from bnx.storing import MEMORY
from bnx.trainings import held_sets, make_trainings, mask_without

__all__ = ["STRUCTURES", "compare_ways", "prepare"]

STRUCTURES = ("naive", "tan-tested", "kdb2-tested", "kdb2")
Figures = dict[str, Any]


def terms_of(counted: Counted, which: np.ndarray, ways: Sequence[Way]) -> Terms:
    """Smooth families in several ways: what the program's own function does for its own ways."""
    one, classes = counted.families, len(counted.counts)
    starts = 1 + np.concatenate([[0], np.cumsum(one.starts[which + 1] - one.starts[which])]).astype(np.int64)
    table = np.zeros((int(starts[-1]), padded(len(ways) * (classes - 1))))
    for family, first, last in zip(which, starts, starts[1:], strict=False):
        sizes = one.sizes[family, : one.depths[family]]
        counts = counted.counts[:, one.starts[family] : one.starts[family + 1]].reshape(classes, *sizes).astype(float)
        for v, way in enumerate(ways):
            logs = np.log(way.smooth(counts)).reshape(classes, -1)
            table[first:last, v * (classes - 1) : (v + 1) * (classes - 1)] = (logs[1:] - logs[0]).T
    return Terms(counted, (), which, starts[:-1], table)


@contextmanager
def _other_ways(lead: bool) -> Iterator[None]:
    """Let the program's choices smooth by other ways than its own; without ``lead`` the least loss decides."""
    with ExitStack() as changes:
        changes.enter_context(patch.object(choosing, "terms_of", terms_of))
        for name in () if lead else ("_SMOOTHING_LEAD", "_CUTS_LEAD"):
            changes.enter_context(patch.object(choosing, name, 0.0))
        yield


def prepare(frame: pd.DataFrame, target: str, folder: Path, recipe: Recipe) -> tuple[LocalEngine, list[Trial]]:
    """Learn structures in every training set, and count their families."""
    path = folder / "table.parquet"
    frame.to_parquet(path, index=False)
    coded = recipe.code(open_source(str(path)))
    blocks, folds = deal(coded, recipe, 0, 1, MEMORY)
    engine = start_local(coded.table, blocks, folds * sub_blocks(folds), 1, lambda *_: None, MEMORY, in_place=True)
    masks = {held: mask_without(held, folds, engine.blocks // folds) for held in held_sets(folds, True)}
    bounds = make_bounds(recipe, coded.table.schema.names)
    members = [learner(name) for name in recipe.structures]
    trials = []
    for kind in bins_to_try(coded.table.schema, recipe.bins):
        trainings = make_trainings(engine, coded.table.schema, masks, kind, recipe.max_levels)
        trials.append(make_trial(engine, kind, learn(engine, trainings, members, bounds, recipe)))
    return engine, trials


def compare_ways(
    frame: pd.DataFrame,
    target: str,
    folder: Path,
    schemes: Mapping[str, Sequence[Way]] = SCHEMES,
    seeds: Sequence[int] = (1,),
    **settings: Any,
) -> Figures:
    """Give the held-out log loss in nats of every scheme and structure, and the ways that training folds settled on.

    seeds: of the dealings to folds that are averaged.
    """
    found = []
    for seed in seeds:
        recipe = recipe_for(frame, target, **{"structures": STRUCTURES, "seed": seed} | settings)
        engine, trials = prepare(frame, target, folder, recipe)
        each: Figures = {}
        for name, ways in schemes.items():
            with _other_ways(lead=name == PROGRAM):
                each[name] = _scored(engine, trials, recipe, ways)
        found.append(each)
    return {name: {s: _averaged([one[name][s] for one in found]) for s in own} for name, own in found[0].items()}


def _averaged(scores: Sequence[Figures]) -> Figures:
    ways = sum((Counter(one["ways"]) for one in scores), Counter[str]())
    return {"log_loss": sum(one["log_loss"] for one in scores) / len(scores), "ways": dict(ways)}


def _scored(engine: LocalEngine, trials: Sequence[Trial], recipe: Recipe, ways: Sequence[Way]) -> Figures:
    """Choose and calibrate inside every training fold, and score its fold."""
    sample = sample_for_choices(engine, recipe.folds)
    losses = [inner_losses(engine, trial, sample, ways, True) for trial in trials]  # type: ignore[arg-type]
    total, settled = np.zeros(len(recipe.structures)), [list[str]() for _ in recipe.structures]
    parts = engine.blocks // recipe.folds
    for fold in range(recipe.folds):
        choice = choose((fold,), recipe.folds, trials, losses, ways, sample, True, True, False)  # type: ignore[arg-type]
        counted = choice.trial.counts[(fold,)]
        prior = choice.trial.learned[(fold,)].training.log_prior
        for s in range(len(recipe.structures)):
            terms = terms_of(counted, counted.families.of[s], [choice.smoothings[s]])  # type: ignore[list-item]
            settled[s].append(choice.smoothings[s].name)  # type: ignore[attr-defined]
            for rows in engine.rows_of(fold * parts, (fold + 1) * parts):
                p = probabilities(choice.calibrations[s], prior, terms.evidence(engine.codes, rows.start, rows.stop))
                total[s] -= np.log(p[np.arange(len(p)), engine.target[rows]]).sum()
    return {
        name: {"log_loss": float(total[s] / engine.rows), "ways": {way: settled[s].count(way) for way in settled[s]}}
        for s, name in enumerate(recipe.structures)
    }
