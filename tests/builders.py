"""Small ways into the core: tables, engines and runs from arrays or frames."""

import tempfile
from collections.abc import Sequence
from dataclasses import replace
from pathlib import Path
from typing import Any

import numpy as np
import pandas as pd

from bnx.classifier import Classifier
from bnx.comparison import Comparison, compare
from bnx.dependence import Dependence
from bnx.domains import Domain, Schema
from bnx.engines import LocalEngine, start_local
from bnx.engines.local import CHUNK
from bnx.evaluation import Evaluation, predict
from bnx.gating import Answer, Bounds, Gate, Learning, learn_together
from bnx.learners import learner
from bnx.learning import Learned, learn, make_bounds
from bnx.reading import open_source
from bnx.recipe import Recipe
from bnx.structure import Structure
from bnx.tables import CodedTable, Lines
from bnx.trainings import Training, make_trainings
from bnx.views import View


def silent(stage: str, done: int, of: int) -> None:
    """Take news of progress and say nothing."""


def domain(name: str, size: int) -> Domain:
    """Name levels by their codes."""
    return Domain(name, tuple(str(level) for level in range(size)))


def coded(
    codes: np.ndarray,
    target: np.ndarray,
    sizes: Sequence[int] | None = None,
    classes: int | None = None,
    kind: type[np.unsignedinteger[Any]] = np.uint8,
) -> CodedTable:
    """Make a coded table of codes (n, N) and classes (N,); levels are those that occur unless given."""
    found = [int(row.max(initial=0)) + 1 for row in codes] if sizes is None else list(sizes)
    attributes = tuple(domain(f"a{i}", size) for i, size in enumerate(found))
    schema = Schema(attributes, domain("class", classes or int(target.max(initial=0)) + 1))
    stored = np.ascontiguousarray(codes, dtype=kind)
    return CodedTable(schema, stored, target.astype(np.uint8), Lines.all(len(target)))


def coded_frame(frame: pd.DataFrame, target: str) -> CodedTable:
    """Code a frame of texts without numeric columns, levels in sorted order."""
    names = [name for name in frame.columns if name != target]
    domains, codes = [], []
    for name in [*names, target]:
        levels, column = np.unique(frame[name].to_numpy(dtype=str), return_inverse=True)
        domains.append(Domain(name, tuple(levels.tolist())))
        codes.append(column)
    schema = Schema(tuple(domains[:-1]), domains[-1])
    return CodedTable(schema, np.array(codes[:-1], dtype=np.uint8), codes[-1].astype(np.uint8), Lines.all(len(frame)))


def started(
    table: CodedTable,
    blocks_of_rows: np.ndarray | None = None,
    blocks: int = 1,
    jobs: int = 1,
    chunk: int = CHUNK,
) -> LocalEngine:
    """Start a local engine; all rows in one block unless their blocks are given."""
    places = np.zeros(len(table.target), np.int64) if blocks_of_rows is None else blocks_of_rows
    return start_local(table, places, blocks, jobs, silent, chunk=chunk)


def in_turns(engine: LocalEngine, turns: int) -> LocalEngine:
    """Sort the rows of an engine by group only within so many stretches of the table, as large tables are."""
    groups = engine.blocks * engine.classes
    group = np.repeat(np.arange(len(engine.starts) - 1) % groups, np.diff(engine.starts))
    chunk = max(1, -(-engine.rows // turns))
    stretch = engine.order // chunk
    new = np.lexsort((engine.order, group, stretch))
    starts = np.searchsorted(stretch[new] * groups + group[new], np.arange(turns * groups + 1))
    codes = np.ascontiguousarray(engine.codes[:, new])
    return replace(engine, codes=codes, target=engine.target[new], chunk=chunk, starts=starts)


def whole(engine: LocalEngine, table: CodedTable, bins: str = "mdl", max_levels: int = 50) -> Training:
    """Make the training set of all rows."""
    masks: dict[tuple[int, ...], np.ndarray] = {(): np.ones(engine.blocks, bool)}
    return make_trainings(engine, table.schema, masks, bins, max_levels)[0]


def learnt(table: CodedTable, structures: Sequence[str], **settings: Any) -> Learned:
    """Learn structures from all rows, without any folds."""
    recipe = Recipe("class", structures=tuple(structures), baseline=structures[0], **settings)
    engine = started(table)
    bounds = make_bounds(recipe, table.schema.names)
    members = [learner(name) for name in structures]
    return learn(engine, [whole(engine, table)], members, bounds, recipe)[0]


def finished(learning: Learning, answers: dict[tuple[int, int, tuple[int, ...]], Answer] | None = None) -> Structure:
    """Run one learner; questions are answered from a script, what it does not hold is p = 1."""
    script = answers or {}

    def ask(questions: Sequence[tuple[int, Any]]) -> list[Answer]:
        return [script.get((q.child, q.candidate, q.given), Answer(1.0, 0.0)) for _, q in questions]

    return learn_together([learning], ask)[0]


def structure_of(
    name: str, relevance: Sequence[float] | np.ndarray, strength: np.ndarray, bounds: Bounds | None = None, **more: Any
) -> Structure:
    """Learn a structure from hand-written bits; every p is 1 unless ``p`` is given."""
    n = len(relevance)
    gate = Gate(more.get("alpha", 0.05), more.get("p", np.ones((n, n))))
    limits = bounds or Bounds(tuple(f"a{i}" for i in range(n)))
    dependence = Dependence(np.asarray(relevance, dtype=float), np.asarray(strength, dtype=float))
    return finished(learner(name).learn(dependence, gate, limits), more.get("answers"))


def compared(frame: pd.DataFrame, target: str, jobs: int = 1, **settings: Any) -> Comparison:
    """Run the main job on a frame, through a CSV file."""
    with tempfile.TemporaryDirectory() as folder:
        path = Path(folder) / "table.csv"
        frame.to_csv(path, index=False)
        return compare(open_source(str(path)), recipe_of(target, **settings), jobs, silent)


def recipe_of(target: str, **settings: Any) -> Recipe:
    """Make a recipe; the baseline is the first structure unless naive is among them."""
    structures = settings.get("structures", ("naive",))
    baseline = structures[0] if structures and "naive" not in structures else "naive"
    return Recipe(target, **{"structures": structures, "baseline": baseline, "resamples": 0} | settings)


def named_edges(names: Sequence[str], structure: Structure) -> set[frozenset[str]]:
    """Name the two ends of every edge."""
    return {frozenset((names[parent], names[child])) for parent, child in structure.edges}


RowsAndLevels = tuple[np.ndarray, np.ndarray, list[int]]


def rows_and_levels(frame: pd.DataFrame, target: str) -> RowsAndLevels:
    """Code a frame of texts: rows (N, n), classes (N,), levels per attribute in the whole table."""
    attributes = frame.drop(columns=target)
    columns = [np.unique(attributes[name].to_numpy(dtype=str), return_inverse=True) for name in attributes]
    truth = np.unique(frame[target].to_numpy(dtype=str), return_inverse=True)[1]
    return np.column_stack([codes for _, codes in columns]), truth, [len(levels) for levels, _ in columns]


def folds_of(evaluation: Evaluation) -> np.ndarray:
    """Tell the fold of each row of the table."""
    fold, order = np.empty(evaluation.engine.rows, np.int64), evaluation.engine.order
    for number, runs in enumerate(evaluation.fold_rows):
        for rows in runs:
            fold[order[rows]] = number
    return fold


def predicted(comparison: Comparison, s: int) -> np.ndarray:
    """Give one structure's out-of-fold probabilities (N, C) in the table's order."""
    one = comparison.evaluations[0]
    p = np.empty((one.engine.rows, one.engine.classes))
    for fold, runs in enumerate(one.fold_rows):
        predict(one, fold, s, runs, p)
    back = np.empty_like(p)
    back[one.engine.order] = p
    return back


def stored_view(classifier_domains: Sequence[Domain]) -> View:
    """See stored codes as they are."""
    sizes = np.array([len(one) for one in classifier_domains], dtype=np.int64)
    recode = np.tile(np.arange(sizes.max(), dtype=np.int32), (len(sizes), 1))
    return View(tuple(classifier_domains), recode, np.ones(len(sizes), bool), sizes)


def classifier_from(
    codes: np.ndarray, target: np.ndarray, structure: Structure, smoothing: Any, calibration: Any, **more: Any
) -> Classifier:
    """Count families by plain loops and build a classifier of them."""
    table = coded(codes, target, more.get("sizes"), more.get("classes"))
    classes, sizes = len(table.schema.target), table.schema.sizes
    counts = []
    for child, parents in enumerate(structure.parents):
        members = [*parents, child]
        cells = np.zeros((classes, *sizes[members]), np.int32)
        np.add.at(cells, (target, *codes[members]), 1)
        counts.append(cells)
    rows = np.bincount(target, minlength=classes).astype(np.int64)
    return Classifier(
        table.schema.attributes, table.schema.target, structure, tuple(counts), rows, smoothing, calibration
    )
