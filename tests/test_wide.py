"""Trees over binary attributes grown pair by pair: the same as from a matrix of all pairs."""

import numpy as np
import pytest
from builders import coded, started
from hypothesis import given, settings
from hypothesis import strategies as st

from bnx.engines import LocalEngine
from bnx.learners import learner
from bnx.learning import learn, make_bounds, rigour_of
from bnx.recipe import Recipe
from bnx.tables import CodedTable
from bnx.trainings import Training
from bnx.views import View, make_view
from bnx.wide import grow_forests
from bnx.wide_forests import Asked, Edges

BLOCKS = 6
LEARNERS = [learner("tan"), learner("tan-tested")]


def rare_table(seed: int, rows: int, attributes: int, classes: int) -> CodedTable:
    """Make columns of all shares, some copied with noise, some constant, many equal: full of ties."""
    random = np.random.default_rng(seed)
    target = random.integers(0, classes, rows).astype(np.uint8)
    target[:classes] = np.arange(classes)
    codes = np.zeros((attributes, rows), np.uint8)
    for j in range(attributes):
        share = random.choice([0.0, 1.5 / rows, 0.05, 0.2, 0.5, 0.9])
        codes[j] = random.random(rows) < share * np.where(target == 0, 1.0, random.uniform(0.3, 1.0))
        if j and random.random() < 0.6:
            other = codes[random.integers(j)]
            codes[j] = np.where(random.random(rows) < random.choice([0.2, 0.5, 0.9, 1.0]), other, codes[j])
    return coded(codes, target, [2] * attributes, classes)


def sets_of(engine: LocalEngine, view: View, seed: int, number: int) -> list[Training]:
    """Draw training sets of some blocks, the first of all."""
    random = np.random.default_rng(seed)
    masks = [np.ones(BLOCKS, bool), *(random.random(BLOCKS) < 0.6 for _ in range(number))]
    return [Training((), mask, view, engine.class_counts[mask].sum(axis=0)) for mask in masks if mask.any()]


def edges_of(edges: Edges) -> set[tuple[int, int]]:
    return set(zip(edges.left.tolist(), edges.right.tolist(), strict=True))


def check(seed: int, rows: int, attributes: int, classes: int, jobs: int = 1, **more: object) -> None:
    table = rare_table(seed, rows, attributes, classes)
    places = np.random.default_rng(seed).integers(0, BLOCKS, rows)
    engine = started(table, places, BLOCKS, jobs)
    trainings = sets_of(engine, make_view(table.schema, {}), seed, 3)
    recipe = Recipe("class", structures=("naive",), **more)  # type: ignore[arg-type]
    bounds = make_bounds(recipe, table.schema.names)
    rigour = rigour_of(LEARNERS, attributes, recipe)
    asked = Asked(recipe.alpha, rigour, True, frozenset((min(p), max(p)) for p in bounds.forbidden))
    for grown, learned in zip(
        grow_forests(engine, trainings, asked), learn(engine, trainings, LEARNERS, bounds, recipe), strict=True
    ):
        for edges, structure in zip((grown.forest, grown.sure), learned.structures, strict=True):
            assert edges_of(edges) == {(min(edge), max(edge)) for edge in structure.edges}, structure.name


@settings(max_examples=25, deadline=None)
@given(
    st.integers(0, 2**32),
    st.integers(12, 400),
    st.integers(2, 40),
    st.integers(1, 3),
    st.sampled_from([0.01, 0.05, 0.3]),
)
def test_the_same_trees_as_from_a_matrix_of_all_pairs(seed, rows, attributes, classes, alpha):
    check(seed, rows, attributes, min(classes + 1, rows), alpha=alpha)


def test_threads_change_nothing_in_a_forest():
    table = rare_table(5, 500, 200, 2)
    places = np.random.default_rng(5).integers(0, BLOCKS, 500)
    found = []
    for jobs in (1, 2, 3):
        engine = started(table, places, BLOCKS, jobs)
        trainings = sets_of(engine, make_view(table.schema, {}), 5, 40)
        asked = Asked(0.05, rigour_of(LEARNERS, 200, Recipe("class")), True, frozenset())
        found.append(grow_forests(engine, trainings, asked))
    for one, two, three in zip(*found, strict=True):
        for edges in (lambda grown: grown.forest, lambda grown: grown.sure):
            assert edges_of(edges(one)) == edges_of(edges(two)) == edges_of(edges(three))
            assert np.array_equal(np.sort(edges(one).bits), np.sort(edges(two).bits))


@pytest.mark.parametrize("sets", [1, 8, 9, 57, 70])
def test_groups_of_sets_and_pairs_to_begin_with_change_nothing(sets):
    table = rare_table(7, 400, 60, 2)
    engine = started(table, np.random.default_rng(7).integers(0, BLOCKS, 400), BLOCKS, 2)
    trainings = (sets_of(engine, make_view(table.schema, {}), 7, 100) * 2)[:sets]
    recipe = Recipe("class")
    bounds = make_bounds(recipe, table.schema.names)
    asked = Asked(0.05, rigour_of(LEARNERS, 60, recipe), True, frozenset())
    known = Edges.of(*np.triu_indices(60, 40))
    for seeds in (None, known, Edges.none()):
        grown = grow_forests(engine, trainings, asked, seeds)
        for one, learned in zip(grown, learn(engine, trainings, LEARNERS, bounds, recipe), strict=True):
            for edges, structure in zip((one.forest, one.sure), learned.structures, strict=True):
                assert edges_of(edges) == {(min(edge), max(edge)) for edge in structure.edges}


@settings(max_examples=12, deadline=None)
@given(st.integers(0, 2**32), st.integers(2, 30), st.integers(0, 60))
def test_forbidden_pairs_take_no_part(seed, attributes, forbidden):
    random = np.random.default_rng(seed)
    ends = {tuple(sorted(random.choice(attributes, 2, replace=False).tolist())) for _ in range(forbidden)}
    check(seed, 150, attributes, 2, forbid=tuple(f"a{i}:a{j}" for i, j in ends))


def test_buffers_that_overflow_change_nothing(monkeypatch):
    monkeypatch.setattr("bnx.wide._CAPACITY", 130)
    monkeypatch.setattr("bnx.wide._RUN", 16)
    check(3, 300, 150, 2)
