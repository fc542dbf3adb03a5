"""Out-of-fold scores of every structure: predicted, summed up fold by fold, and joined."""

from collections.abc import Sequence
from dataclasses import dataclass
from functools import partial

import numpy as np

from bnx.calibrating import FEWEST_ERRORS, steepness
from bnx.engines import LocalEngine
from bnx.evaluation import Evaluation, Predicts, write
from bnx.fold_cells import Cell, cells_of
from bnx.kernels import slope_sums
from bnx.losses import Histograms, Ranking, Scores, Tally, ranking, scores_of
from bnx.weighed_losses import weighed_ranking, weighed_slope, weighed_tally

__all__ = [
    "EXACT_ROWS",
    "SLOPE_ROWS",
    "FoldScore",
    "StructureScore",
    "rows_ranked",
    "score",
    "score_of",
]

EXACT_ROWS = 5_000_000  # beyond, rankings come from histograms and slopes from some rows
SLOPE_ROWS = 200_000
_BLOCK = 65_536  # rows predicted at a time where they are not kept


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
class _Run:
    """All that is scored: ``truth`` (rows,) of all repeats; ``exact``: whether rows are kept and ranked one by one.

    ``weights`` (rows,): of the rows, None where all count alike; ``others``: what predicts each cell in the place of
    the evaluations, None where these do.
    """

    evaluations: Sequence[Evaluation]
    cells: Sequence[Cell]
    truth: np.ndarray
    exact: bool
    weights: np.ndarray | None
    others: Sequence[Predicts] | None = None

    @classmethod
    def of(cls, evaluations: Sequence[Evaluation], others: Sequence[Predicts] | None = None) -> "_Run":
        """Lay the rows of all repeats one after the other."""
        truth = [one.engine.target for one in evaluations]
        rows = sum(one.engine.rows for one in evaluations)
        every = truth[0] if len(truth) == 1 else np.concatenate(truth)
        return cls(evaluations, cells_of(evaluations), every, *rows_ranked(evaluations, rows), others)

    def room(self) -> np.ndarray:
        """Make room for the probabilities of all rows, of none where they are not kept."""
        return np.empty((len(self.truth) if self.exact else 0, self.classes))

    def predictor(self, k: int, s: int) -> Predicts:
        """Give what predicts the rows of a cell."""
        cell = self.cells[k]
        return self.others[k] if self.others else self.evaluations[cell.repeat].predictor_of(cell.fold, s)

    @property
    def engine(self) -> LocalEngine:
        """The engine whose threads work."""
        return self.evaluations[0].engine

    @property
    def classes(self) -> int:
        """Number of classes."""
        return self.engine.classes


@dataclass(frozen=True)
class _Part:
    """What one fold adds: its sums, its rankings, and rows for the calibration slope (``p`` (rows, C), ``truth``).

    ``histograms`` are empty where rows are ranked one by one.
    """

    whole: Tally
    rankings: Sequence[Ranking]
    histograms: Sequence[Histograms]
    p: np.ndarray
    truth: np.ndarray
    runs: tuple[slice, ...]
    weights: np.ndarray | None = None


def score(
    evaluations: Sequence[Evaluation], choices: Sequence[Sequence[int]]
) -> tuple[list[StructureScore], list[Scores]]:
    """Score every structure, and last their mix if there is one, on all out-of-fold rows, and what changes by fold.

    choices: each says, for each of ``cells_of``, what predicts its rows. Up to 5 million rows are ranked one by one; of
    more, areas and calibration errors come from histograms of the scores and calibration slopes from 200,000 rows,
    evenly spread, so that memory does not grow with the rows. Structures that predict alike are scored once.

    Returns:
        The scores of every structure and of the mix, and those of every choice.
    """
    run = _Run.of(evaluations)
    alike = _alike(run)
    rooms = [_Changing.empty(run, [alike[pick] for pick in picks]) for picks in choices]
    p = run.room()
    found: dict[int, StructureScore] = {}
    for s in sorted(set(alike)):
        parts = _parts(run, s, p)
        found[s] = _joined(run, parts, p)
        for room in rooms:
            room.take(run, s, parts, p)
    every = [found[s] for s in alike]
    return every, [every[room.wanted[0]].pooled if room.same else room.joined(run) for room in rooms]


def score_of(evaluations: Sequence[Evaluation], predictors: Sequence[Predicts]) -> StructureScore:
    """Score what predicts the rows of each of ``cells_of``, as the structures are scored."""
    run = _Run.of(evaluations, predictors)
    p = run.room()
    return _joined(run, _parts(run, 0, p), p)


def _parts(run: _Run, s: int, p: np.ndarray) -> list[_Part]:
    """Predict and sum up all folds."""
    return run.engine.map(partial(_part, run, s, p), range(len(run.cells)), "scoring folds")


@dataclass(frozen=True)
class _Changing:
    """A choice that may change from fold to fold: ``wanted`` by cell, and its sums as they come in.

    ``p`` (rows, C) where rows are ranked one by one, else ``histograms``; both empty where nothing changes.
    """

    wanted: Sequence[int]
    p: np.ndarray
    histograms: Sequence[Histograms]
    wholes: dict[int, Tally]

    @classmethod
    def empty(cls, run: _Run, wanted: Sequence[int]) -> "_Changing":
        """Start with no rows."""
        changes = len(set(wanted)) > 1
        room = np.empty((len(run.truth) if run.exact and changes else 0, run.classes))
        return cls(wanted, room, [] if run.exact else [Histograms.empty(run.classes)], {})

    @property
    def same(self) -> bool:
        """Whether it is the same in every fold."""
        return len(set(self.wanted)) == 1

    def take(self, run: _Run, s: int, parts: Sequence[_Part], p: np.ndarray) -> None:
        """Take the cells that structure ``s`` is wanted for."""
        for k in [k for k, want in enumerate(self.wanted) if want == s and not self.same]:
            self.wholes[k] = parts[k].whole
            _merge(self.histograms, parts[k].histograms)
            for rows in run.cells[k].runs if run.exact else ():
                self.p[rows] = p[rows]

    def joined(self, run: _Run) -> Scores:
        """Join the cells."""
        whole = Tally.merged([self.wholes[k] for k in range(len(run.cells))])
        return scores_of(whole, _rankings(run, self.p, self.histograms))


def rows_ranked(evaluations: Sequence[Evaluation], rows: int) -> tuple[bool, np.ndarray | None]:
    """Tell whether rows are ranked one by one, as they always are where they have weights; and the weights."""
    weighed = [one.engine.weighed.of_rows for one in evaluations if one.engine.weighed]
    return (True, np.concatenate(weighed)) if weighed else (rows <= EXACT_ROWS, None)


def _alike(run: _Run) -> list[int]:
    """Find for every structure the first that has the same parents, smoothing and calibration in every fold."""
    choices = [(run.evaluations[cell.repeat].choices[(cell.fold,)], cell.fold) for cell in run.cells]
    first: dict[tuple[object, ...], int] = {}
    found = []
    for s in range(len(choices[0][0].smoothings)):
        key = tuple(
            (one.trial.counts[(fold,)].families.holder[s], one.smoothings[s], id(one.calibrations[s]))
            for one, fold in choices
        )
        found.append(first.setdefault(key, s))
    return [*found, len(found)] if any(one.mixes for one in run.evaluations) else found


def _part(run: _Run, s: int, p: np.ndarray, k: int) -> _Part:
    """Predict one fold's rows and sum them up; p (all rows, C) takes the probabilities where they are kept."""
    cell = run.cells[k]
    if not run.exact:
        return _streamed(run, k, s)
    evaluation, whole = run.evaluations[cell.repeat], Tally.empty(run.classes)
    own = evaluation.fold_rows[cell.fold]
    write(run.predictor(k, s), own, p[cell.shift : cell.shift + evaluation.engine.rows])
    if run.weights is not None:
        whole = weighed_tally(p, cell.runs, run.truth, run.weights)
    else:
        for rows in cell.runs:
            whole.add(p, rows, run.truth)
    rankings = [_ranking(run, p, cell.runs, column) for column in range(run.classes + 1)]
    return _Part(whole, rankings, [], p, run.truth, cell.runs, run.weights)


def _ranking(run: _Run, p: np.ndarray, parts: Sequence[slice], column: int) -> Ranking:
    """Rank some rows by the probability of a class or by the largest."""
    if run.weights is None:
        return ranking(p, parts, run.truth, column)
    return weighed_ranking(p, parts, run.truth, run.weights, column)


def _streamed(run: _Run, k: int, s: int) -> _Part:
    """Predict one fold's rows a few at a time, keeping nothing but sums and every so manieth row."""
    cell, whole, histograms = run.cells[k], Tally.empty(run.classes), Histograms.empty(run.classes)
    evaluation, predictor = run.evaluations[cell.repeat], run.predictor(k, s)
    every, seen = -(-len(run.truth) // SLOPE_ROWS), 0
    kept, truths = [], []
    for rows in evaluation.fold_rows[cell.fold]:
        for first in range(rows.start, rows.stop, _BLOCK):
            last = min(first + _BLOCK, rows.stop)
            p, truth = predictor.probabilities(first, last), evaluation.engine.target[first:last]
            whole.add(p, slice(0, len(p)), truth)
            histograms.add(p, truth)
            kept.append(p[-seen % every :: every])
            truths.append(truth[-seen % every :: every])
            seen += len(p)
    sampled = np.concatenate(kept)
    return _Part(whole, histograms.rankings(), [histograms], sampled, np.concatenate(truths), (slice(0, len(sampled)),))


def _joined(run: _Run, parts: Sequence[_Part], p: np.ndarray) -> StructureScore:
    """Join the folds of one structure; p (all rows, C) where they are kept."""
    histograms = [] if run.exact else [Histograms.empty(run.classes)]
    for part in parts:
        _merge(histograms, part.histograms)
    whole = Tally.merged([part.whole for part in parts])
    slopes = run.engine.map(_slope, parts)
    by_fold = tuple(
        FoldScore(cell.repeat, cell.fold, cell.rows, scores_of(part.whole, part.rankings), slope)
        for cell, part, slope in zip(run.cells, parts, slopes, strict=True)
    )
    with np.errstate(invalid="ignore"):
        error = whole.loss_deviation / np.sqrt(whole.effective_rows / len(run.evaluations))
    known = [slope for slope in slopes if slope is not None]
    return StructureScore(
        scores_of(whole, _rankings(run, p, histograms)), float(error), _pooled_slope(run, parts, known), by_fold
    )


def _merge(into: Sequence[Histograms], others: Sequence[Histograms]) -> None:
    for one, other in zip(into, others, strict=True):
        one.merge(other)


def _rankings(run: _Run, p: np.ndarray, histograms: Sequence[Histograms]) -> list[Ranking]:
    """Rank all rows, one by one or from their histograms."""
    if histograms:
        return histograms[0].rankings()
    every = [slice(0, len(p))]
    return run.engine.map(lambda column: _ranking(run, p, every, column), range(run.classes + 1))


def _derivatives(part: _Part, t: float) -> np.ndarray:
    if part.weights is not None:
        return weighed_slope(part.p, part.runs, part.truth, part.weights, t)
    sums = np.zeros(2)
    for rows in part.runs:
        slope_sums(part.p, rows.start, rows.stop, part.truth, t, sums)
    return sums


def _errors(part: _Part) -> int:
    """Count the wrong labels among the rows that the slope is found from."""
    if not part.histograms:
        return part.whole.errors
    return int((np.argmax(part.p, axis=1) != part.truth).sum())


def _slope(part: _Part) -> float | None:
    """Find the calibration slope of one fold."""
    return None if _errors(part) < FEWEST_ERRORS else steepness(partial(_derivatives, part))


def _pooled_slope(run: _Run, parts: Sequence[_Part], by_fold: Sequence[float]) -> float | None:
    """Find the calibration slope of all folds, from the mean of theirs on."""
    if sum(_errors(part) for part in parts) < FEWEST_ERRORS:
        return None

    def derivatives(t: float) -> np.ndarray:
        return np.asarray(np.sum(run.engine.map(lambda part: _derivatives(part, t), parts), axis=0))

    return steepness(derivatives, sum(by_fold) / len(by_fold) if by_fold else 1.0)
