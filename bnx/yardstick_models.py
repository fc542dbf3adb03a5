"""Two classifiers of scikit-learn, fitted to what naive Bayes sees of a training set."""

from collections.abc import Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np
from scipy.sparse import csr_matrix

from bnx.engines import LocalEngine
from bnx.errors import SettingError
from bnx.trainings import Training

__all__ = [
    "BOOSTING",
    "LOGISTIC",
    "MODELS",
    "MOST_LEVELS",
    "Fitted",
    "Seen",
    "check_installed",
    "fit_model",
    "limited",
    "seen_by",
]

LOGISTIC, BOOSTING = "logistic regression", "gradient boosting"
MODELS = (LOGISTIC, BOOSTING)
MOST_LEVELS = 255
"""Levels of an attribute that gradient boosting takes."""
_STEPS = 5_000  # of logistic regression, at most
_FLOOR = 0.5  # records by which the class shares are mixed in
_SEEDS = 2**32


def check_installed(wanted: bool) -> None:
    """Refuse to go on without scikit-learn if it is wanted.

    Raises:
        SettingError: it cannot be imported.
    """
    if not wanted:
        return
    try:
        _classes()
    except ImportError:
        raise SettingError(
            "--yardstick fits models of scikit-learn, which is not installed here; install bnx[yardstick], or leave "
            "the option out"
        ) from None


def _classes() -> tuple[Any, Any]:
    """Import the two classifiers, which take a second and are optional."""
    from sklearn.ensemble import HistGradientBoostingClassifier  # noqa: PLC0415  optional
    from sklearn.linear_model import LogisticRegression  # noqa: PLC0415  optional

    return LogisticRegression, HistGradientBoostingClassifier


def limited(only: str | None = None) -> Any:
    """Hold linear algebra (``blas``) or loops of threads (``openmp``) to one thread, so that sums keep their order."""
    from threadpoolctl import threadpool_limits  # noqa: PLC0415  comes with scikit-learn

    return threadpool_limits(1, user_api=only)


@dataclass(frozen=True)
class Seen:
    """How one training set sees the stored codes, as these models take it.

    ``levels`` (n, R) int64: the level that each stored code stands for, -1 for cells not observed and levels that the
    training rows lack; ``sizes`` (n,): levels; ``ordered`` (n,) bool: intervals of numbers; ``blanks`` (n,): the level
    of blank cells among them, -1 if there is none.
    """

    levels: np.ndarray
    sizes: np.ndarray
    ordered: np.ndarray
    blanks: np.ndarray

    def one_hot(self, codes: np.ndarray, runs: Sequence[slice]) -> csr_matrix:
        """Give some rows of codes (n, N) as 0 and 1, a column per level, (rows, levels); nothing where unknown."""
        starts = np.cumsum(self.sizes) - self.sizes
        places = np.where(self.levels < 0, -1, self.levels + starts[:, None]).astype(np.int32)
        wide = _looked_up(places, codes, runs)
        known = wide >= 0
        ends = np.concatenate([[0], np.cumsum(known.sum(axis=1))])
        columns = wide[known]
        return csr_matrix((np.ones(len(columns)), columns, ends), shape=(len(wide), int(self.sizes.sum())))

    def numbers(self, codes: np.ndarray, runs: Sequence[slice]) -> np.ndarray:
        """Give some rows of codes (n, N) as numbers of levels, (rows, n); not a number where unknown, or no number."""
        unknown = (self.levels < 0) | (self.ordered[:, None] & (self.levels == self.blanks[:, None]))
        return _looked_up(np.where(unknown, np.nan, self.levels), codes, runs)

    def narrowed(self, codes: np.ndarray, runs: Sequence[slice], most: int) -> "Seen":
        """Pool the levels without order that are beyond the ``most`` - 1 most frequent ones of some rows."""
        levels, sizes = self.levels.copy(), self.sizes.copy()
        for i in np.flatnonzero(~self.ordered & (self.sizes > most)).tolist():
            rows = np.sum([np.bincount(codes[i, run], minlength=levels.shape[1]) for run in runs], axis=0)
            known = levels[i] >= 0
            counts = np.bincount(levels[i][known], rows[known], int(sizes[i]))
            kept = np.sort(np.argsort(-counts, kind="stable")[: most - 1])
            number = np.full(len(counts), most - 1)
            number[kept] = np.arange(most - 1)
            levels[i] = np.where(known, number[levels[i]], -1)
            sizes[i] = most
        return Seen(levels, sizes, self.ordered, self.blanks)


def _looked_up(table: np.ndarray, codes: np.ndarray, runs: Sequence[slice]) -> np.ndarray:
    """Look codes (n, N) of some rows up in a table (n, R), (rows, n)."""
    ends = np.cumsum([run.stop - run.start for run in runs]).tolist()
    out = np.empty((ends[-1], len(codes)), table.dtype)
    for run, end in zip(runs, ends, strict=True):
        for i, own in enumerate(table):
            out[end - (run.stop - run.start) : end, i] = own[codes[i, run]]
    return out


def seen_by(training: Training) -> Seen:
    """Take the levels of a training set as naive Bayes uses them there."""
    view = training.view
    levels = np.where(view.recode < view.sizes[:, None], view.recode, -1).astype(np.int64)
    if view.unknown is not None:
        levels[:, : view.unknown.shape[1]][view.unknown] = -1
    ordered = np.array([domain.numeric for domain in view.domains])
    blanks = np.array([len(domain) - 1 if domain.blank else -1 for domain in view.domains])
    return Seen(levels, view.sizes, ordered, blanks)


@dataclass(frozen=True)
class Fitted:
    """One model fitted without one fold; it predicts that fold's rows.

    ``model``: None where the training rows are of one class; ``known``: the classes that it knows; ``shares`` (C,) of
    the classes, which replace the share ``floor`` of every probability; ``settled``: whether the fit converged.
    """

    name: str
    codes: np.ndarray
    seen: Seen
    model: Any
    known: np.ndarray
    shares: np.ndarray
    floor: float
    settled: bool

    def probabilities(self, first: int, last: int) -> np.ndarray:
        """Predict rows ``first:last`` of the engine, (last - first, C)."""
        p, rows = np.zeros((last - first, len(self.shares))), [slice(first, last)]
        cells = _design(self.name, self.seen, self.codes, rows)
        p[:, self.known] = 1.0 if self.model is None else self.model.predict_proba(cells)
        return np.asarray((1 - self.floor) * p + self.floor * self.shares)


def _design(name: str, seen: Seen, codes: np.ndarray, runs: Sequence[slice]) -> Any:
    return seen.one_hot(codes, runs) if name == LOGISTIC else seen.numbers(codes, runs)


def fit_model(name: str, engine: LocalEngine, training: Training, runs: Sequence[slice], seed: int) -> Fitted:
    """Fit one of the models to the rows of a training set, given as runs of the engine's rows, on one thread.

    Logistic regression takes a column of 0 and 1 per level and the penalty sum w^2 / 2 (C = 1). Gradient boosting takes
    levels as such, those of numeric columns in their order; attributes of more than 255 levels keep the 254 most
    frequent. Rows count as they weigh. Every probability then gives way to the class shares by half a record, so that
    none is 0.
    """
    counts, seen, weighed = training.class_mass, seen_by(training), engine.weighed
    known, rows = np.flatnonzero(counts), float(counts.sum())
    if name == BOOSTING:
        seen = seen.narrowed(engine.codes, runs, MOST_LEVELS)
    model = _estimator(name, seen, seed) if len(known) > 1 else None
    if model is not None:
        truth = np.concatenate([engine.target[run] for run in runs])
        weights = np.concatenate([weighed.of_rows[run] for run in runs]) if weighed else None
        with limited("openmp"):
            model.fit(_design(name, seen, engine.codes, runs), truth, sample_weight=weights)
    settled = model is None or name == BOOSTING or bool(np.max(model.n_iter_) < _STEPS)
    shares = (counts + 1 / len(counts)) / (rows + 1)
    return Fitted(name, engine.codes, seen, model, known, shares, min(_FLOOR / rows, 1.0), settled)


def _estimator(name: str, seen: Seen, seed: int) -> Any:
    logistic, boosting = _classes()
    if name == LOGISTIC:
        return logistic(C=1, max_iter=_STEPS)
    return boosting(
        l2_regularization=1, early_stopping=False, categorical_features=~seen.ordered, random_state=seed % _SEEDS
    )
