"""Measure one table: the whole comparison of bnx, and rivals on the very same folds."""

import hashlib
import time
from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from pathlib import Path
from typing import Any

import numpy as np
import pandas as pd
import sklearn
from quality.rival_models import RIVALS, code, out_of_fold
from quality.scoring_rows import calibration_if_perfect, judged, nats, paired

from bnx.comparison import Comparison, compare
from bnx.documents import predictions_table
from bnx.fold_cells import cells_of
from bnx.losses import Scores
from bnx.reading import open_source
from bnx.recipe import Recipe

__all__ = ["MIX", "DisagreementError", "Rows", "measure_bnx", "measure_rivals", "read_rows", "recipe_for", "run"]

Figures = dict[str, Any]
MIX = "mix"


class DisagreementError(Exception):
    """What the program reports and what its own predictions give are not the same."""


@dataclass(frozen=True)
class Rows:
    """Out-of-fold predictions of one comparison, in the order of the table.

    ``p``: by structure and by their mix, (N, C); ``single``, ``honest`` (N, C): by the structure that was picked
    without each row's fold, and by the mix where that was taken; ``truth``, ``folds`` (N,): codes of the classes and
    folds; ``lines`` (N,): of the table.
    """

    p: Mapping[str, np.ndarray]
    single: np.ndarray
    honest: np.ndarray
    truth: np.ndarray
    folds: np.ndarray
    lines: np.ndarray


def recipe_for(frame: pd.DataFrame, target: str, **settings: Any) -> Recipe:
    """Make the recipe of a table: the default one, but columns are taken as they are meant, and no random halves."""
    attributes = frame.drop(columns=target)
    numeric = tuple(name for name in attributes if attributes[name].dtype == np.float64)
    categorical = tuple(name for name in attributes if name not in numeric)
    return Recipe(target, **{"numeric": numeric, "categorical": categorical, "resamples": 0} | settings)


def run(frame: pd.DataFrame, recipe: Recipe, folder: Path) -> Comparison:
    """Write the table to a file and compare structures on it."""
    path = folder / "table.parquet"
    frame.to_parquet(path, index=False)
    return compare(open_source(str(path)), recipe, 1, lambda *_: None)


def read_rows(comparison: Comparison) -> Rows:
    """Predict all rows out of fold.

    Raises:
        DisagreementError: the honest log loss is not the one that the comparison reports.
    """
    table = predictions_table(comparison)
    names = [*comparison.recipe.structures, *([MIX] if comparison.mix else [])]
    levels = comparison.classifiers[0].target.levels
    shape = (len(names), comparison.rows)
    every = np.column_stack([table[f"p:{level}"].to_numpy() for level in levels]).reshape(*shape, len(levels))
    p = dict(zip(names, every, strict=True))
    lines, folds = (table[name].to_numpy()[: comparison.rows] for name in ("row", "fold"))
    truth = pd.Index(levels).get_indexer(table["truth"].to_pandas().astype(str)[: comparison.rows])
    advice, mix = comparison.recommendation, comparison.mix
    single = _picked(comparison, every, folds, truth, advice.picks, advice.honest)
    honest = _picked(comparison, every, folds, truth, mix.picks, mix.honest) if mix else single
    return Rows(p, single, honest, truth, folds, lines)


def _picked(
    comparison: Comparison,
    every: np.ndarray,
    folds: np.ndarray,
    truth: np.ndarray,
    picks: Sequence[int],
    reported: Scores,
) -> np.ndarray:
    """Take each fold's rows from what was picked without them."""
    p = np.empty(every.shape[1:])
    for cell, pick in zip(cells_of(comparison.evaluations), picks, strict=True):
        p[folds == cell.fold] = every[pick][folds == cell.fold]
    own = nats(p, truth).mean() / np.log(2)
    if abs(own - reported.log_loss) > 1e-9:
        raise DisagreementError(
            f"the honest log loss is reported as {reported.log_loss} bits, but predictions give {own}"
        )
    return p


def measure_bnx(frame: pd.DataFrame, recipe: Recipe, folder: Path) -> tuple[Figures, Rows]:
    """Compare structures on a table and judge all of them, and the honest choice among them."""
    began = time.perf_counter()
    comparison = run(frame, recipe, folder)
    seconds = time.perf_counter() - began
    rows = read_rows(comparison)
    names, advice = comparison.recipe.structures, comparison.recommendation
    difference, error = paired(nats(rows.honest, rows.truth), nats(rows.p["naive"], rows.truth))
    picks = [[*names, MIX][number] for number in (comparison.mix or advice).picks]
    return {
        "rows": comparison.rows,
        "attributes": len(comparison.names),
        "classes": rows.honest.shape[1],
        "left_out": [one.name for one in comparison.left_out],
        "folds": comparison.folds,
        "settings": _settings(recipe),
        "recommended": names[advice.recommended],
        "picks": {name: picks.count(name) for name in [*names, MIX] if name in picks},
        "honest": judged(rows.honest, rows.truth) | {"calibration_if_perfect": calibration_if_perfect(rows.honest)},
        "single": judged(rows.single, rows.truth),
        "against_naive": {"difference": difference, "error": error},
        "structures": {name: judged(rows.p[name], rows.truth) | _settled(comparison, name) for name in names},
        "mix": judged(rows.p[MIX], rows.truth) | _weights(comparison, names) if MIX in rows.p else None,
        "seconds": seconds,
    }, rows


def _weights(comparison: Comparison, names: Sequence[str]) -> Figures:
    """Say what the mix of all rows is made of."""
    members = comparison.mix.members if comparison.mix else {}
    return {
        "offered": bool(comparison.mix and comparison.mix.offered),
        "weights": {names[s]: weight for s, weight in members.items()},
    }


def _settings(recipe: Recipe) -> Figures:
    """List the settings that are not the default ones."""
    default = Recipe(recipe.target).to_dict()
    return {key: value for key, value in recipe.to_dict().items() if value != default[key]}


def _settled(comparison: Comparison, name: str) -> Figures:
    """Say what a structure of all rows settled on."""
    classifier = comparison.classifiers[comparison.recipe.structures.index(name)]
    return {
        "edges": len(classifier.structure.edges),
        "smoothing": str(classifier.smoothing),
        "temperature": classifier.calibration.temperature,
    }


def measure_rivals(frame: pd.DataFrame, target: str, rows: Rows, stored: Figures) -> Figures:
    """Judge the rivals on the same folds; ``stored`` figures are kept if they come from the same rows and folds."""
    mark = f"{hashlib.sha256(_bytes_of(frame, rows)).hexdigest()[:16]} scikit-learn {sklearn.__version__}"
    if stored.get("mark") == mark:
        return stored
    coded = code(frame.drop(columns=target).iloc[rows.lines])
    models: Figures = {}
    for name, predict in RIVALS.items():
        began = time.perf_counter()
        p = out_of_fold(coded, rows.truth, rows.folds, predict)
        models[name] = judged(p, rows.truth) | {"seconds": time.perf_counter() - began}
    return {"mark": mark, "models": models}


def _bytes_of(frame: pd.DataFrame, rows: Rows) -> bytes:
    cells = pd.util.hash_pandas_object(frame, index=False).to_numpy()
    return bytes(np.concatenate([cells, rows.folds.astype(np.uint64), rows.truth.astype(np.uint64)]).tobytes())
