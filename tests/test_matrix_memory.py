"""What is said of very many pairs that are held in a matrix, before the long part begins."""

from typing import Any

import numpy as np
import pytest
from builders import coded, compared, recipe_of
from test_wide_run import frame

from bnx.comparison import compare
from bnx.errors import DataError
from bnx.learners import learner
from bnx.learning import make_bounds
from bnx.matrix_memory import matrix_notes

TREES = ("naive", "tan", "tan-tested")


def notes(sizes: tuple[int, ...] = (2, 2, 2), structures: tuple[str, ...] = TREES, **settings: Any) -> list[str]:
    schema = coded(np.zeros((len(sizes), 4), int), np.array([0, 1, 0, 1]), sizes).schema
    recipe = recipe_of("class", structures=structures, **settings)
    return matrix_notes(schema, [learner(name) for name in structures], make_bounds(recipe, schema.names), recipe)


@pytest.fixture
def few(monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr("bnx.matrix_memory.MOST_IN_MATRIX", 2)


@pytest.mark.usefixtures("few")
def test_every_barrier_is_named_and_nothing_else():
    assert notes() == []
    for more, named in (
        ({"sizes": (2, 3, 2)}, "because of attributes that are cut or have other than two levels (such as a1);"),
        ({"structures": (*TREES, "kdb2", "kdb3-tested")}, "because of --structures kdb2,kdb3-tested;"),
        ({"test": "chi2"}, "because of --test chi2;"),
        ({"require": ("a0:a1",)}, "because of --require;"),
        ({"sizes": (2, 2, 3), "test": "g"}, "(such as a2) and --test g;"),
    ):
        (note,) = notes(**more)
        assert note.startswith("3 pairs are held in a matrix, which takes about 0.0 GB, ")
        assert named in note


def test_tables_that_are_not_so_wide_say_nothing():
    assert notes((2, 3, 2), test="chi2") == []


@pytest.mark.usefixtures("few")
def test_a_matrix_that_memory_cannot_hold_is_refused(monkeypatch):
    monkeypatch.setattr("bnx.matrix_memory.available_memory", lambda: 3_749)
    with pytest.raises(DataError, match=r"^3 pairs would be held in a matrix of about 0.0 GB, but 0.0 GB of memory"):
        notes(test="chi2")
    assert notes() == []
    monkeypatch.setattr("bnx.matrix_memory.available_memory", lambda: None)
    assert notes(test="chi2")


@pytest.mark.usefixtures("few")
def test_it_is_said_before_anything_is_measured_and_stands_in_the_results(monkeypatch):
    told: list[str] = []

    def watched(*args: Any) -> Any:
        stages: list[str] = []
        return compare(
            *args[:3], lambda stage, *_: stages.append(stage), warn=lambda note: told.extend([note, *stages])
        )

    monkeypatch.setattr("builders.compare", watched)
    found = compared(frame(), "kind", structures=("naive", "kdb1"), folds=3)
    assert told == [found.warnings[0], "reading"]
    assert "are held in a matrix" in told[0]
