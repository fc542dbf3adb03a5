"""What a run says of what was not there: blanks that are no level, levels and classes unseen, rows not ranked."""

from collections.abc import Sequence

import numpy as np

from bnx.evaluation import Evaluation
from bnx.rating import EXACT_ROWS, SLOPE_ROWS, StructureScore
from bnx.summing_out import MOST_CELLS
from bnx.text import count_of, quoted

__all__ = ["rare_classes", "rating_notes", "unobserved_notes"]


def unobserved_notes(evaluation: Evaluation, names: Sequence[str]) -> list[str]:
    """Say how many cells were summed out when folds were predicted."""
    blank, new = _summed_out(evaluation)
    notes = []
    if blank.any():
        cells = _listed(names, blank)
        notes.append(f"blank cells are not observed, so they count in no table and are summed out: {cells}")
    if new.any():
        cells = _listed(names, new)
        notes.append(f"levels that a training fold does not hold were summed out in the rows it predicts: {cells}")
    rough = _approximated(evaluation) if blank.any() else 0
    if rough:
        notes.append(
            f"{count_of(rough, 'prediction')} out of fold {'is' if rough == 1 else 'are'} approximate: so many cells "
            f"not observed hang together that summing them out exactly takes a table of over {MOST_CELLS:,} cells"
        )
    return notes


def _listed(names: Sequence[str], rows: np.ndarray) -> str:
    return quoted(f"{name} ({count_of(n, 'row')})" for name, n in zip(names, rows.tolist(), strict=True) if n)


def _summed_out(evaluation: Evaluation) -> tuple[np.ndarray, np.ndarray]:
    """Count, per attribute, the rows of all folds that are blank, and those of a level new to their training fold."""
    engine, folds = evaluation.engine, len(evaluation.fold_rows)
    blank, new = np.zeros(len(engine.margins), np.int64), np.zeros(len(engine.margins), np.int64)
    parts = engine.blocks // folds
    for fold in range(folds):
        view = evaluation.learned((fold,)).training.view
        if view.unknown is None:
            continue
        for i in np.flatnonzero(view.unknown.any(axis=1)).tolist():
            rows = engine.margins[i][fold * parts : (fold + 1) * parts].sum(axis=(0, 1))
            unknown = np.flatnonzero(view.unknown[i, : len(rows)])
            blanks = int(rows[-1]) if i in view.veiled else 0
            blank[i] += blanks
            new[i] += int(rows[unknown].sum()) - blanks
    return blank, new


def _approximated(evaluation: Evaluation) -> int:
    """Count the rows of all structures that could only be predicted approximately."""
    structures = range(len(evaluation.choices[()].smoothings))

    def count(item: tuple[int, int]) -> int:
        fold, s = item
        predictor = evaluation.predictor(fold, s)
        runs = evaluation.fold_rows[fold]
        return sum(predictor.terms.rows_approximated(predictor.codes, run.start, run.stop) for run in runs)

    items = [(fold, s) for fold in range(len(evaluation.fold_rows)) for s in structures]
    return sum(evaluation.engine.map(count, items))


def rare_classes(evaluations: Sequence[Evaluation], levels: Sequence[str]) -> list[str]:
    """Say which folds hold no row of a class, and which are predicted from training rows without one."""
    notes = []
    every = [one.engine.class_counts.reshape(len(one.fold_rows), -1, len(levels)).sum(axis=1) for one in evaluations]
    for level, counts in zip(levels, np.concatenate(every).T, strict=True):
        without, folds = int((counts == 0).sum()), len(counts)
        rows = int(counts.sum()) // len(evaluations)
        if without:
            notes.append(
                f"class {level} has {count_of(rows, 'row')} for {count_of(folds // len(evaluations), 'fold')}: in "
                f"{without} of {folds} it has none to predict, so it counts in the other scores only"
            )
        if (counts == rows).any():
            notes.append(
                f"class {level} is predicted from rows that hold none of it, as all of its rows lie in one fold"
            )
    return notes


def rating_notes(results: Sequence[StructureScore]) -> list[str]:
    """Say how far rankings may be off where rows are too many to be ranked one by one."""
    rows = sum(fold.rows for fold in results[0].by_fold)
    every = [one for result in results for one in (result.pooled, *(fold.scores for fold in result.by_fold))]
    area, error = (max(getattr(one, name) for one in every) for name in ("auc_within", "calibration_within"))
    if rows <= EXACT_ROWS or not area + error:
        return []
    return [
        f"{rows:,} rows are too many to rank one by one: areas under the curve come from histograms and are within "
        f"{area:.1g}, calibration errors within {error:.1g}; calibration slopes are found from {SLOPE_ROWS:,} rows"
    ]
