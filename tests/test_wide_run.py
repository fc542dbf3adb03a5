"""A whole run over very many binary attributes, with the width lowered: the same answer as from matrices."""

import json

import numpy as np
import pandas as pd
import pytest
from builders import compared, recipe_of
from test_wide import rare_table

from bnx.comparison import Comparison
from bnx.documents import comparison_document
from bnx.gating import Bounds
from bnx.learners import learner
from bnx.wide_learning import takes_wide_road

STRUCTURES = ("naive", "tan", "tan-tested")


def frame(seed: int = 2) -> pd.DataFrame:
    table = rare_table(seed, 400, 24, 2)
    columns = {f"a{i}": np.where(row, "yes", "no") for i, row in enumerate(table.codes) if row.any()}
    return pd.DataFrame(columns | {"kind": np.array(["one", "two"])[table.target]})


def run(monkeypatch: pytest.MonkeyPatch, most: int, jobs: int = 1) -> Comparison:
    monkeypatch.setattr("bnx.wide_learning.MOST_IN_MATRIX", most)
    monkeypatch.setattr("bnx.comparison.MOST_JUDGED", 60)
    return compared(frame(), "kind", jobs, structures=STRUCTURES, folds=4, resamples=10)


def test_a_wide_run_finds_what_a_run_with_matrices_finds(monkeypatch):
    wide = comparison_document(run(monkeypatch, 10))
    dense = comparison_document(run(monkeypatch, 10**9))
    assert wide["structures"] == dense["structures"]
    assert wide["recommended"] == dense["recommended"]
    assert (wide["pairs_total"], wide["pairs_rejected"]) == (dense["pairs_total"], dense["pairs_rejected"])
    assert wide["pairs_judged"] == len(wide["pairs"]) == 60 < dense["pairs_judged"]
    known = {(pair["a"], pair["b"]): pair for pair in dense["pairs"]}
    assert all(known[pair["a"], pair["b"]] == pair for pair in wide["pairs"])
    assert sum(wide["pairs_verdicts"].values()) == sum(wide["pairs_outcomes"].values()) == 60
    assert any("only the 60 pairs drawn or with most bits" in warning for warning in wide["warnings"])


def test_threads_change_no_byte_of_a_wide_run(monkeypatch):
    one, two = (json.dumps(comparison_document(run(monkeypatch, 10, jobs))) for jobs in (1, 2))
    assert one == two


def test_which_tables_take_the_wide_road(monkeypatch):
    monkeypatch.setattr("bnx.wide_learning.MOST_IN_MATRIX", 10)
    run_ = compared(frame(), "kind", structures=("naive",), folds=4)
    engine, training = run_.evaluations[0].engine, run_.evaluations[0].learned(()).training
    trees, names = [learner(name) for name in STRUCTURES], run_.names
    plain = recipe_of("kind", structures=STRUCTURES)

    def takes(**more: object) -> bool:
        asked = {"learners": trees, "bounds": Bounds(names), "recipe": plain, **more}
        return takes_wide_road(engine, [training], **asked)

    assert takes()
    assert not takes(learners=[*trees, learner("kdb2")])
    assert not takes(bounds=Bounds(names, required=((0, 1),)))
    assert takes(bounds=Bounds(names, forbidden=((0, 1),)))
    assert not takes(recipe=recipe_of("kind", structures=STRUCTURES, test="g"))
