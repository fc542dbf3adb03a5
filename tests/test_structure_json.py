"""A structure file scores exactly like the classifier it was written from, and a tampered one is refused."""

import copy
import json
from collections.abc import Callable
from functools import cache
from pathlib import Path
from typing import Any

import numpy as np
import pandas as pd
import pytest
from builders import compared

from bnx.comparison import Comparison
from bnx.documents import structure_document
from bnx.errors import BnxError, DataError, FormatError
from bnx.formats.structure_json import classifier_document, classifier_of, read_structure

NAMES = ("naive", "tan", "kdb2", "kdb2-tested")


@cache
def learnt() -> Comparison:
    """Learn four structures from a table with numbers, blanks and pooled levels."""
    random = np.random.default_rng(3)
    target = random.integers(0, 3, 300)
    a = (target + random.integers(0, 3, 300)) % 3
    frame = pd.DataFrame(
        {
            "a": [f"v{k}" for k in a],
            "b": [f"v{k}" for k in (a + random.integers(0, 2, 300)) % 3],
            "c": np.round(random.normal(size=300) + target, 2),
            "d": [["x", "y", ""][k] for k in random.integers(0, 3, 300)],
            "town": [f"t{k:02d}" for k in np.minimum(random.geometric(0.08, 300), 30)],
        }
    ).assign(kind=np.array(["p", "q", "r"])[target])
    return compared(frame, "kind", folds=4, structures=NAMES, max_levels=6)


def written(s: int) -> dict[str, Any]:
    """Write a structure as JSON text and read it again."""
    document = json.loads(json.dumps(structure_document(learnt(), s), allow_nan=False))
    assert isinstance(document, dict)
    return document


def records() -> np.ndarray:
    """Draw records, unknown levels among them, (n, 500)."""
    random = np.random.default_rng(4)
    return np.array([random.integers(-1, len(domain), 500) for domain in learnt().classifiers[0].domains])


@pytest.mark.parametrize("s", range(len(NAMES)), ids=NAMES)
def test_a_loaded_structure_scores_bit_for_bit_alike(s: int) -> None:
    before, after = learnt().classifiers[s], classifier_of(written(s), "x.json")
    assert np.array_equal(before.probabilities(records()), after.probabilities(records()))
    assert (after.domains, after.structure) == (before.domains, before.structure)
    assert after.target.levels == before.target.levels
    assert (after.smoothing, after.free_parameters) == (before.smoothing, before.free_parameters)
    assert structure_again(s) == structure_again(s, twice=True)


def structure_again(s: int, twice: bool = False) -> dict[str, Any]:
    """Describe the classifier of a document; twice: of a document of a document."""
    document = classifier_document(classifier_of(written(s), "x.json"))
    return classifier_document(classifier_of(document, "x.json")) if twice else document


def test_a_file_holds_what_scoring_by_hand_needs() -> None:
    """Score one record from the JSON alone: prior, tables, temperature, offsets, floor."""
    document = written(2)
    classifier = learnt().classifiers[2]
    codes = np.array([[1] for _ in document["attributes"]])
    names = [one["name"] for one in document["attributes"]]
    levels = document["class"]["levels"]
    weights = []
    for c, level in enumerate(levels):
        terms = 0.0
        for one in document["attributes"]:
            table = one["probabilities"][c]
            for parent in one["parents"]:
                table = table[codes[names.index(parent), 0]]
            terms += np.log(table[codes[names.index(one["name"]), 0]])
        prior = np.log(document["class"]["prior"][c])
        weights.append(np.exp(prior + document["temperature"] * terms + document["class_offsets"][level]))
    shares = np.array([document["floor_shares"][level] for level in levels])
    p = (1 - document["floor"]) * np.array(weights) / sum(weights) + document["floor"] * shares
    assert classifier.probabilities(codes)[0] == pytest.approx(p, abs=1e-12)


def drop(*keys: str) -> Callable[[dict[str, Any]], None]:
    def change(document: dict[str, Any]) -> None:
        for key in keys[:-1]:
            document = document[int(key) if key.isdigit() else key]
        del document[keys[-1]]

    return change


def put(value: Any, *keys: str) -> Callable[[dict[str, Any]], None]:
    def change(document: Any) -> None:
        for key in keys[:-1]:
            document = document[int(key) if key.isdigit() else key]
        document[int(keys[-1]) if keys[-1].isdigit() else keys[-1]] = value

    return change


TAMPERED = {
    "probability": put(0.999, "attributes", "0", "probabilities", "0", "0"),
    "one cell of a probability": put(0.123456, "attributes", "3", "probabilities", "1", "0"),
    "count": put(77, "attributes", "0", "counts", "0", "0"),
    "negative count": put(-1, "attributes", "0", "counts", "0", "0"),
    "fractional count": put(0.5, "attributes", "0", "counts", "0", "0"),
    "count as text": put("many", "attributes", "0", "counts", "0", "0"),
    "shape of counts": put([[1, 2]], "attributes", "0", "counts"),
    "unknown parent": put(["nobody"], "attributes", "0", "parents"),
    "own parent": put(["a"], "attributes", "0", "parents"),
    "missing attributes": drop("attributes"),
    "missing levels": drop("attributes", "1", "levels"),
    "missing prior rows": drop("class", "rows"),
    "missing temperature": drop("temperature"),
    "temperature as text": put("warm", "temperature"),
    "temperature not a number": put(None, "temperature"),
    "negative temperature": put(-1.0, "temperature"),
    "smoothing": put("laplace:2.5", "smoothing"),
    "unknown smoothing": put("magic:1", "smoothing"),
    "rows of one class missing": put([10, 20], "class", "rows"),
    "negative rows of a class": put([-5, 10, 20], "class", "rows"),
    "offset of a class missing": drop("class_offsets", "p"),
    "share of a class missing": drop("floor_shares", "p"),
    "floor above one": put(1.5, "floor"),
    "temperature that is no number": put(float("nan"), "temperature"),
    "offset without end": put(float("inf"), "class_offsets", "p"),
    "share below zero": put(-0.5, "floor_shares", "p"),
    "prior that does not follow from its rows": put(0.9, "class", "prior", "0"),
    "one level twice": put("v0", "attributes", "0", "levels", "1"),
    "one attribute twice": put("b", "attributes", "0", "name"),
    "cuts out of step with levels": put([0.0], "attributes", "2", "cuts"),
    "attributes as a number": put(3, "attributes"),
}


@pytest.mark.parametrize("what", TAMPERED)
def test_a_tampered_document_is_refused_in_one_sentence(what: str) -> None:
    document = copy.deepcopy(written(0))
    TAMPERED[what](document)
    with pytest.raises(FormatError, match=r"^x\.json") as caught:
        classifier_of(document, "x.json")
    assert "\n" not in str(caught.value)


@pytest.mark.parametrize(
    ("content", "words"),
    [
        (b"", "is not JSON"),
        (b"{", "is not JSON"),
        (b"[1]", "has the format no JSON object"),
        (b'{"format": "bnx-comparison/1"}', "has the format 'bnx-comparison/1', not 'bnx-structure/1'"),
        (b"\xff\xfe\x00", "is not text in UTF-8"),
    ],
)
def test_a_file_of_another_kind_is_refused(content: bytes, words: str, tmp_path: Path) -> None:
    path = tmp_path / "x.json"
    path.write_bytes(content)
    with pytest.raises(FormatError) as caught:
        read_structure(str(path))
    assert words in str(caught.value)
    assert str(path) in str(caught.value)


def test_a_file_that_is_not_there_is_named(tmp_path: Path) -> None:
    with pytest.raises(DataError, match="there is no file"):
        read_structure(str(tmp_path / "nothing.json"))
    with pytest.raises(BnxError):
        read_structure(str(tmp_path))
