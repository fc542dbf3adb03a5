"""Structures that leave attributes out, where they meet others: mixes, tables that took no part, notes."""

from pathlib import Path

import numpy as np
import pytest
from builders import compared, silent
from test_kdb_chosen import planted

from bnx.comparison import Comparison, compare
from bnx.documents import structure_document
from bnx.domains import codes_of, together
from bnx.formats.mix_json import mixed_document, mixed_of
from bnx.mixed_classifier import MixedClassifier
from bnx.reading import open_source
from bnx.recipe import Recipe


def run() -> Comparison:
    return compared(planted(500, seed=3, noise=4), "kind", structures=("naive", "kdb2", "kdb-trimmed"))


def test_a_mix_gives_each_member_its_own_attributes() -> None:
    """The mix is the weighed geometric mean of what each member says of its own columns."""
    found = run()
    trimmed, every = found.classifiers[2], found.classifiers[1]
    assert len(trimmed.domains) < len(every.domains)
    mix = MixedClassifier((trimmed, every), (0.25, 0.75), 0.0)
    assert {one.name for one in mix.domains} == set(found.names)
    rng = np.random.default_rng(1)
    codes = np.array([rng.integers(0, len(one), 40) for one in mix.domains])
    own = [one.probabilities(codes_of(one.domains, codes, mix.domains)) for one in (trimmed, every)]
    expected = own[0] ** 0.25 * own[1] ** 0.75
    assert mix.probabilities(codes) == pytest.approx(expected / expected.sum(axis=1, keepdims=True), abs=1e-12)
    alone = MixedClassifier((trimmed,), (1.0,), 0.0)
    assert alone.domains == trimmed.domains
    members = [structure_document(found, s) for s in (2, 1)]
    read = mixed_of(mixed_document(members, (0.25, 0.75), 0.0), "mix.json")
    assert np.array_equal(read.probabilities(codes), mix.probabilities(codes))


def test_each_column_is_listed_once() -> None:
    found = run()
    names = [one.name for one in together(classifier.domains for classifier in found.classifiers)]
    assert names == list(found.names)


def test_a_table_that_took_no_part_is_scored_by_the_attributes_of_each(tmp_path: Path) -> None:
    """Scored on the rows it was learnt from, a structure's log loss is that of its own probabilities of them."""
    frame = planted(500, seed=3, noise=4)
    path = tmp_path / "table.csv"
    frame.to_csv(path, index=False)
    source = open_source(str(path))
    recipe = Recipe("kind", structures=("naive", "kdb-trimmed"), resamples=0)
    found = compare(source, recipe, 1, silent, holdout=open_source(str(path)))
    classifier = found.classifiers[1]
    codes = np.array([[one.levels.index(value) for value in frame[one.name]] for one in classifier.domains])
    p = classifier.probabilities(codes)
    truth = [classifier.target.levels.index(value) for value in frame["kind"]]
    assert classifier.dropped
    assert found.held_out[1].log_loss == pytest.approx(-np.log2(p[np.arange(500), truth]).mean(), rel=1e-12)


def test_where_there_is_no_room_for_more_parents_it_is_said() -> None:
    rng = np.random.default_rng(8)
    frame = planted(1_000, seed=2, noise=0)
    for name in ("wide", "wider"):
        frame.insert(0, name, [f"v{level}" for level in rng.integers(0, 45, 1_000)])
    found = compared(frame, "kind", structures=("naive", "kdb"))
    depth = found.structures[1].depth
    assert depth is not None
    assert depth >= 2  # 45 x 45 cells are 2,025; with one more parent of 2 levels they are 4,050
    short = [own for own in found.warnings if "has no room" in own]
    assert len(short) == 1
    assert short[0].startswith(f"kdb has no room for {depth} parents of wide")
    assert short[0].endswith("the table of an attribute may have 4,000 cells here")
    assert not [own for own in run().warnings if "has no room" in own]
