"""Measure one table: the whole comparison of bnx, and rivals on the very same folds."""

import hashlib
import time
from collections.abc import Mapping
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
from bnx.rating import cells_of
from bnx.reading import open_source
from bnx.recipe import Recipe

__all__ = ["DisagreementError", "Rows", "measure_bnx", "measure_rivals", "read_rows", "recipe_for", "run"]

Figures = dict[str, Any]


class DisagreementError(Exception):
    """What the program reports and what its own predictions give are not the same."""


@dataclass(frozen=True)
class Rows:
    """Out-of-fold predictions of one comparison, in the order of the table.

    ``p``: by structure, (N, C); ``honest`` (N, C): by what was picked without each row's fold; ``truth``, ``folds``
    (N,): codes of the classes and folds; ``lines`` (N,): of the table.
    """

    p: Mapping[str, np.ndarray]
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
    names, levels = comparison.recipe.structures, comparison.classifiers[0].target.levels
    shape = (len(names), comparison.rows)
    every = np.column_stack([table[f"p:{level}"].to_numpy() for level in levels]).reshape(*shape, len(levels))
    p = dict(zip(names, every, strict=True))
    lines, folds = (table[name].to_numpy()[: comparison.rows] for name in ("row", "fold"))
    truth = pd.Index(levels).get_indexer(table["truth"].to_pandas().astype(str)[: comparison.rows])
    honest = np.empty(every.shape[1:])
    for cell, pick in zip(cells_of(comparison.evaluations), comparison.recommendation.picks, strict=True):
        honest[folds == cell.fold] = every[pick][folds == cell.fold]
    own, reported = nats(honest, truth).mean() / np.log(2), comparison.recommendation.honest.log_loss
    if abs(own - reported) > 1e-9:
        raise DisagreementError(f"the honest log loss is reported as {reported} bits, but predictions give {own}")
    return Rows(p, honest, truth, folds, lines)


def measure_bnx(frame: pd.DataFrame, recipe: Recipe, folder: Path) -> tuple[Figures, Rows]:
    """Compare structures on a table and judge all of them, and the honest choice among them."""
    began = time.perf_counter()
    comparison = run(frame, recipe, folder)
    seconds = time.perf_counter() - began
    rows = read_rows(comparison)
    names, advice = comparison.recipe.structures, comparison.recommendation
    difference, error = paired(nats(rows.honest, rows.truth), nats(rows.p["naive"], rows.truth))
    picks = [names[number] for number in advice.picks]
    return {
        "rows": comparison.rows,
        "attributes": len(comparison.names),
        "classes": rows.honest.shape[1],
        "left_out": [one.name for one in comparison.left_out],
        "folds": comparison.folds,
        "settings": _settings(recipe),
        "recommended": names[advice.recommended],
        "picks": {name: picks.count(name) for name in names if name in picks},
        "honest": judged(rows.honest, rows.truth) | {"calibration_if_perfect": calibration_if_perfect(rows.honest)},
        "against_naive": {"difference": difference, "error": error},
        "structures": {name: judged(p, rows.truth) | _settled(comparison, name) for name, p in rows.p.items()},
        "seconds": seconds,
    }, rows


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
