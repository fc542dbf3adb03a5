"""Three classifiers of scikit-learn, cross-validated on folds that are given."""

from collections.abc import Callable
from dataclasses import dataclass

import numpy as np
import pandas as pd
from sklearn.ensemble import HistGradientBoostingClassifier
from sklearn.linear_model import LogisticRegression
from sklearn.naive_bayes import CategoricalNB
from sklearn.preprocessing import OneHotEncoder
from threadpoolctl import threadpool_limits

__all__ = ["BOOSTING", "LOGISTIC", "NAIVE", "RIVALS", "Coded", "code", "out_of_fold"]

NAIVE, LOGISTIC, BOOSTING = "CategoricalNB", "logistic regression", "gradient boosting"
BINS = 5  # of equal frequency, for the models that take no numbers
_STEPS = 5_000  # enough for logistic regression to converge on every table


@dataclass(frozen=True)
class Coded:
    """Attributes as numbers.

    ``values`` (N, n) float: a number, not a number where it is blank, or the code of a level; ``numeric`` (n,) bool;
    ``levels`` (n,): how many, blanks being a level of their own, 0 for a numeric column.
    """

    values: np.ndarray
    numeric: np.ndarray
    levels: np.ndarray


Predict = Callable[[Coded, np.ndarray, np.ndarray, np.ndarray], np.ndarray]


def code(attributes: pd.DataFrame) -> Coded:
    """Code columns of text by their levels in the whole table, and keep numbers."""
    numeric = np.array([attributes[name].dtype == np.float64 for name in attributes])
    columns = [
        attributes[name].to_numpy(float) if number else pd.factorize(attributes[name].fillna(""), sort=True)[0]
        for name, number in zip(attributes, numeric, strict=True)
    ]
    values = np.column_stack(columns).astype(float)
    levels = np.where(numeric, 0, np.nan_to_num(values).max(axis=0) + 1).astype(int)
    return Coded(values, numeric, levels)


def out_of_fold(coded: Coded, truth: np.ndarray, folds: np.ndarray, predict: Predict) -> np.ndarray:
    """Predict every row by a model of the other folds, on one thread: probabilities (N, C).

    truth (N,) class codes; folds (N,).
    """
    p = np.zeros((len(truth), int(truth.max()) + 1))
    with threadpool_limits(1):
        for fold in np.unique(folds):
            test = folds == fold
            p[test] = predict(coded, truth, ~test, test)
    return p


def _binned(coded: Coded, train: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
    """Cut numeric columns at the training rows' quantiles: codes (N, n) and the number of levels of each column."""
    codes, levels = np.zeros(coded.values.shape, int), coded.levels.copy()
    for k, column in enumerate(coded.values.T):
        if not coded.numeric[k]:
            codes[:, k] = column
            continue
        cuts = np.unique(np.nanquantile(column[train], np.arange(1, BINS) / BINS))
        blank = np.isnan(column)
        codes[:, k] = np.where(blank, len(cuts) + 1, np.searchsorted(cuts, column, side="left"))
        levels[k] = len(cuts) + 1 + int(blank.any())
    return codes, levels


def _all_classes(p: np.ndarray, known: np.ndarray, classes: int) -> np.ndarray:
    """Spread probabilities of the classes that a model knows over all of them."""
    out = np.zeros((len(p), classes))
    out[:, known] = p
    return out


def _naive(coded: Coded, truth: np.ndarray, train: np.ndarray, test: np.ndarray) -> np.ndarray:
    codes, levels = _binned(coded, train)
    model = CategoricalNB(alpha=1, min_categories=levels).fit(codes[train], truth[train])
    return _all_classes(model.predict_proba(codes[test]), model.classes_, int(truth.max()) + 1)


def _logistic(coded: Coded, truth: np.ndarray, train: np.ndarray, test: np.ndarray) -> np.ndarray:
    codes, levels = _binned(coded, train)
    one_hot = OneHotEncoder(categories=[np.arange(count) for count in levels]).fit(codes[:1])
    model = LogisticRegression(C=1, max_iter=_STEPS).fit(one_hot.transform(codes[train]), truth[train])
    p = model.predict_proba(one_hot.transform(codes[test]))
    return _all_classes(p, model.classes_, int(truth.max()) + 1)


def _boosting(coded: Coded, truth: np.ndarray, train: np.ndarray, test: np.ndarray) -> np.ndarray:
    model = HistGradientBoostingClassifier(
        l2_regularization=1, early_stopping=False, categorical_features=~coded.numeric, random_state=0
    ).fit(coded.values[train], truth[train])
    return _all_classes(model.predict_proba(coded.values[test]), model.classes_, int(truth.max()) + 1)


RIVALS: dict[str, Predict] = {NAIVE: _naive, LOGISTIC: _logistic, BOOSTING: _boosting}
