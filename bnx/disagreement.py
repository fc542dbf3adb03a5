"""The records on which two structures disagree most, out of fold: one more pass of predictions, a running list."""

from collections.abc import Sequence
from dataclasses import dataclass
from functools import partial

import numpy as np
from scipy.special import rel_entr

from bnx.engines import LocalEngine
from bnx.evaluation import Evaluation
from bnx.fold_cells import Cell, cells_of
from bnx.structure import Structure

__all__ = ["Contrast", "Differ", "Pick", "alike_by_class", "contrast_of", "jensen_shannon", "picked"]

_ROWS = 16_384  # predicted at a time
_DIGITS = 12  # so that records that are told the same tie, whatever the last bits of their logs
_LEAST = 1e-9  # bits below which nobody disagrees


@dataclass(frozen=True)
class Contrast:
    """Which structure naive is compared with, by number, and why in a sentence; ``other`` is None if none can be."""

    naive: int
    other: int | None
    reason: str


@dataclass(frozen=True)
class Pick:
    """A record: bits of disagreement, its row in the table and in the engine, its fold.

    ``levels`` (n,): codes as the training set of all rows sees them.
    """

    bits: float
    row: int
    place: int
    fold: int
    levels: np.ndarray


@dataclass(frozen=True)
class Differ:
    """All records: ``rows`` whose most probable class is another one, and those of them that each side has right.

    ``bits``: mean disagreement of all records.
    """

    rows: int
    naive_right: int
    other_right: int
    bits: float


@dataclass(frozen=True)
class _Work:
    """One pass; ``recode`` (n, R): of the training set of all rows; ``number``: records wanted."""

    evaluation: Evaluation
    contrast: tuple[int, int]
    recode: np.ndarray
    number: int


def contrast_of(
    names: Sequence[str], structures: Sequence[Structure], losses: Sequence[float], recommended: int
) -> Contrast:
    """Decide what naive is compared with: the recommended structure, or the best of those with edges.

    names, structures (learnt from all rows), losses (mean log losses): of all compared.
    """
    if "naive" not in names:
        return Contrast(-1, None, "naive is not among the structures compared, so no record is told by it.")
    naive = names.index("naive")
    if structures[recommended].edges:
        return Contrast(naive, recommended, "It is the recommended structure.")
    edged = [s for s, one in enumerate(structures) if one.edges]
    if not edged:
        return Contrast(naive, None, "No structure compared has an edge, so nothing is known to be counted twice.")
    best = min(edged, key=lambda s: (losses[s], s))
    why = f"The recommended structure, {names[recommended]}, has no edges; this is the best of those with edges."
    return Contrast(naive, best, why)


def jensen_shannon(p: np.ndarray, q: np.ndarray) -> np.ndarray:
    """Measure how far the distributions of each row of p and q (N, C) lie apart: bits from 0 to 1, (N,).

    Source: Lin 1991 (Jensen-Shannon divergence, equal weights).
    """
    middle = np.maximum((p + q) / 2, np.finfo(np.float64).tiny)  # half of the smallest number is 0
    nats = (rel_entr(p, middle) + rel_entr(q, middle)).sum(axis=1) / 2
    return np.asarray(np.clip(nats / np.log(2), 0.0, 1.0))


def picked(evaluation: Evaluation, naive: int, other: int, number: int) -> tuple[list[Pick], Differ]:
    """Find the records on which two structures disagree most out of fold, the farthest apart first, ties by row.

    Of records with the same levels only the first such is taken. No more than ``number`` are kept at a time, by fold.
    """
    view = evaluation.learned(()).training.view
    work = _Work(evaluation, (naive, other), view.recode, number)
    found = evaluation.engine.map(partial(_of_cell, work), cells_of([evaluation]), "scoring folds")
    picks = _first([one for picks, _ in found for one in picks], number)
    sums = np.sum([one for _, one in found], axis=0)
    rows, naive_right, other_right = (int(one) for one in sums[:3])
    return picks, Differ(rows, naive_right, other_right, float(sums[3]) / evaluation.engine.rows)


def _of_cell(work: _Work, cell: Cell) -> tuple[list[Pick], np.ndarray]:
    """Go through one fold: its picks; rows that differ, those that each has right, and the sum of bits, (4,)."""
    evaluation, engine = work.evaluation, work.evaluation.engine
    predictors = [evaluation.predictor(cell.fold, s) for s in work.contrast]
    picks: list[Pick] = []
    sums = np.zeros(4)
    for turn, run in enumerate(evaluation.fold_rows[cell.fold]):
        rows = _rows_behind(engine, turn, cell.fold, len(evaluation.fold_rows))
        for first in range(run.start, run.stop, _ROWS):
            last = min(first + _ROWS, run.stop)
            p, q = (one.probabilities(first, last) for one in predictors)
            bits = np.round(jensen_shannon(p, q), _DIGITS)
            sums += _counted(p, q, engine.target[first:last], bits)
            least = picks[-1].bits if len(picks) == work.number else _LEAST
            own = rows[first - run.start : last - run.start]
            picks = _first([*picks, *_farthest(work, bits, own, slice(first, last), least, cell.fold)], work.number)
    return picks, sums


def _counted(p: np.ndarray, q: np.ndarray, truth: np.ndarray, bits: np.ndarray) -> np.ndarray:
    """Count rows whose most probable class under p is not that under q, by who is right; last the sum of bits, (4,)."""
    said, other = p.argmax(axis=1), q.argmax(axis=1)
    apart = said != other
    return np.array([apart.sum(), (apart & (said == truth)).sum(), (apart & (other == truth)).sum(), bits.sum()])


def _farthest(work: _Work, bits: np.ndarray, rows: np.ndarray, places: slice, least: float, fold: int) -> list[Pick]:
    """Pick among some rows of the engine those farthest apart, at least so far, each kind of record once.

    bits, rows of the table (N,): of the engine's rows ``places``.
    """
    codes, recode = work.evaluation.engine.codes, work.recode
    left = np.flatnonzero(bits >= least)
    left = left[np.lexsort((rows[left], -bits[left]))]
    found: list[Pick] = []
    while len(left) and len(found) < work.number:
        one, place = int(left[0]), int(left[0]) + places.start
        levels = np.take_along_axis(recode, codes[:, place, None].astype(np.int64), axis=1).ravel()
        found.append(Pick(float(bits[one]), int(rows[one]), place, fold, levels))
        left = np.delete(left, _alike(codes, recode, left + places.start, levels))
    return found


def _alike(codes: np.ndarray, recode: np.ndarray, places: np.ndarray, levels: np.ndarray) -> np.ndarray:
    """Tell which of some rows of the engine have these levels (n,): their numbers within ``places``."""
    same = np.arange(len(places))
    for i, level in enumerate(levels.tolist()):
        same = same[recode[i][codes[i, places[same]]] == level]
        if not len(same):
            break
    return same


def alike_by_class(evaluation: Evaluation, levels: np.ndarray) -> np.ndarray:
    """Count the records with the same levels (n,) as the training set of all rows sees them, by class (C,)."""
    engine, recode = evaluation.engine, evaluation.learned(()).training.view.recode
    counts = np.zeros(engine.classes, np.int64)
    for first in range(0, engine.rows, _ROWS):
        places = np.arange(first, min(first + _ROWS, engine.rows))
        same = places[_alike(engine.codes, recode, places, levels)]
        counts += np.bincount(engine.target[same], minlength=engine.classes)
    return counts


def _first(picks: Sequence[Pick], number: int) -> list[Pick]:
    """Keep the records farthest apart, ties by row, of those with the same levels the first."""
    kept: list[Pick] = []
    for one in sorted(picks, key=lambda pick: (-pick.bits, pick.row)):
        if len(kept) == number:
            break
        if not any(np.array_equal(one.levels, other.levels) for other in kept):
            kept.append(one)
    return kept


def _rows_behind(engine: LocalEngine, turn: int, fold: int, folds: int) -> np.ndarray:
    """List the rows of the table behind the sorted rows of a fold in one chunk, int64."""
    part = engine.blocks // folds * engine.classes
    start = turn * engine.chunk
    groups = engine.groups[start : start + engine.chunk]
    inside = np.flatnonzero((groups >= fold * part) & (groups < (fold + 1) * part))
    return np.asarray(inside[np.argsort(groups[inside], kind="stable")] + start)
