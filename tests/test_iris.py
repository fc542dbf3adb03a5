"""Naive Bayes on Fisher's iris data, each row predicted without itself, against published counts of right ones."""

from dataclasses import replace

import numpy as np
import pandas as pd
import pytest
from builders import recipe_of, silent
from sklearn.datasets import load_iris
from sklearn.naive_bayes import CategoricalNB

from bnx.choosing import make_trial
from bnx.coding import code_table
from bnx.engines import LocalEngine, start_local
from bnx.learners import learner
from bnx.learning import learn, make_bounds
from bnx.parameters import candidates
from bnx.reading import open_source
from bnx.scoring import terms_of
from bnx.storing import MEMORY
from bnx.trainings import Training, make_trainings

ROWS = 150


@pytest.fixture(scope="module")
def flowers(tmp_path_factory) -> tuple[LocalEngine, Training, list[Training]]:
    """Learn MDL cut points from all rows, and without every single one."""
    measurements, species = load_iris(return_X_y=True)
    frame = pd.DataFrame(measurements, columns=["sepal_l", "sepal_w", "petal_l", "petal_w"])
    path = tmp_path_factory.mktemp("iris") / "iris.csv"
    frame.assign(species=[f"s{k}" for k in species]).to_csv(path, index=False)
    table = code_table(open_source(str(path)), "species").table
    engine = start_local(table, np.arange(ROWS, dtype=np.uint8), ROWS, 1, silent, MEMORY)
    masks = {(): np.ones(ROWS, bool)} | {(row,): np.arange(ROWS) != row for row in range(ROWS)}
    whole, *others = make_trainings(engine, table.schema, masks, "mdl", 50)
    return engine, whole, others


def right(engine: LocalEngine, trainings: list[Training]) -> int:
    """Count the rows that are predicted right without themselves, by Laplace's rule."""
    recipe = recipe_of("species")
    bounds = make_bounds(recipe, [domain.name for domain in trainings[0].view.domains])
    trial = make_trial(engine, "mdl", learn(engine, trainings, [learner("naive")], bounds, recipe))
    found = 0
    for row in range(ROWS):
        counted = trial.counts[(row,)]
        place = int(np.flatnonzero(engine.order == row)[0])
        terms = terms_of(counted, counted.families.of[0], candidates("laplace:1"))
        evidence = terms.evidence(engine.codes, place, place + 1)
        against_first = np.append(0.0, evidence[0])
        found += int((against_first + trial.learned[(row,)].training.log_prior).argmax() == engine.target[place])
    return found


def by_second_library(trainings: list[Training]) -> int:
    """Count the rows that scikit-learn predicts right without themselves, in the levels of each training set."""
    measurements, species = load_iris(return_X_y=True)
    found = 0
    for row, training in enumerate(trainings):
        domains = training.view.domains
        levels = [np.searchsorted(own.cuts, values) for own, values in zip(domains, measurements.T, strict=True)]
        codes, kept = np.column_stack(levels), np.arange(ROWS) != row
        rival = CategoricalNB(alpha=1, min_categories=[len(own) for own in domains]).fit(codes[kept], species[kept])
        found += int(rival.predict(codes[[row]])[0] == species[row])
    return found


def test_cut_points_of_all_rows(flowers):
    # As in test_discretising.py, here through a file.
    _, whole, _ = flowers
    cuts = [list(domain.cuts) for domain in whole.view.domains]
    assert cuts == [pytest.approx(own) for own in ([5.55, 6.15], [2.95, 3.35], [2.45, 4.75], [0.80, 1.75])]


def test_leaving_one_out_with_cut_points_of_all_rows(flowers):
    # Robles et al. 2003: 142 of 150 are right; the row left out has a say in the cut points.
    engine, whole, others = flowers
    assert right(engine, [replace(one, view=whole.view) for one in others]) == 142


def test_leaving_one_out_with_cut_points_learnt_without_the_row(flowers):
    # Without that leak fewer are right, as a second library counts too.
    engine, _, others = flowers
    assert right(engine, others) == by_second_library(others) == 138
    assert len({tuple(domain.cuts for domain in one.view.domains) for one in others}) > 1
