"""The two JSON Schemas in docs/: real documents pass, broken ones do not."""

import copy
import json
from collections.abc import Callable
from pathlib import Path
from typing import Any

import pytest
from jsonschema import Draft202012Validator
from smallrun import small_run

Document = dict[str, Any]

DOCS = Path(__file__).parent.parent / "docs"
SCHEMAS = {kind: json.loads((DOCS / f"{kind}.schema.json").read_text()) for kind in ("comparison", "structure")}


def accepts(kind: str, document: Document) -> bool:
    return bool(Draft202012Validator(SCHEMAS[kind]).is_valid(document))


@pytest.mark.parametrize("kind", SCHEMAS)
def test_the_schema_itself_is_valid(kind: str) -> None:
    Draft202012Validator.check_schema(SCHEMAS[kind])
    assert SCHEMAS[kind]["$schema"] == "https://json-schema.org/draft/2020-12/schema"


@pytest.mark.parametrize("hostile", [False, True])
def test_documents_of_a_run_pass(hostile: bool) -> None:
    run = small_run(hostile)
    for kind, documents in (("comparison", (run.comparison,)), ("structure", run.structures)):
        for document in documents:
            assert [error.message for error in Draft202012Validator(SCHEMAS[kind]).iter_errors(document)] == []


def test_scores_on_a_second_table_pass_and_must_be_whole() -> None:
    run = small_run(held_out=True)
    assert accepts("comparison", run.comparison)
    assert accepts("structure", run.structures[1])
    document = copy.deepcopy(run.comparison)
    del document["structures"][0]["holdout"]["brier"]
    assert not accepts("comparison", document)


def required_paths(schema: Document, root: Document, at: tuple[str | int, ...] = ()) -> list[tuple[str | int, ...]]:
    """List every required key of a document, inside lists at their first place, of structures at the second."""
    name = schema.get("$ref", "").rpartition("/")[2]
    if name in {"counts", "probabilities"}:
        return []
    part = root["$defs"][name] if name else schema
    paths = [(*at, key) for key in part.get("required", [])]
    for key in part.get("required", []):
        paths += required_paths(part["properties"][key], root, (*at, key))
    if isinstance(part.get("items"), dict):
        paths += required_paths(part["items"], root, (*at, int(at[-1] == "structures")))
    return paths


def holder(document: Any, path: tuple[str | int, ...]) -> Any:
    for step in path:
        document = document[step]
    return document


@pytest.mark.parametrize(
    ("kind", "path"), [(kind, path) for kind, schema in SCHEMAS.items() for path in required_paths(schema, schema)]
)
def test_a_missing_key_is_refused(kind: str, path: tuple[str | int, ...]) -> None:
    run = small_run()
    document = copy.deepcopy(run.comparison if kind == "comparison" else run.structures[1])
    if path[0] == "left_out" and len(path) > 1:
        document["left_out"] = [{"name": "id", "reason": "a different value in every row"}]
        assert accepts(kind, document)
    if path[0] == "weights" and len(path) > 1:
        document["weights"] = {"column": "n", "kind": "counts", "rows": 24, "left_out": 0, "total": 360}
        document["weights"]["effective_rows"] = 360
        assert accepts(kind, document)
    del holder(document, path[:-1])[path[-1]]
    assert not accepts(kind, document)


def put(*path: str | int, value: Any) -> Callable[[Document], None]:
    def change(document: Document) -> None:
        holder(document, path[:-1])[path[-1]] = value

    return change


@pytest.mark.parametrize(
    ("kind", "change"),
    [
        ("comparison", put("format", value="bnx-comparison/2")),
        ("comparison", put("rows", value="360")),
        ("comparison", put("rows", value=0)),
        ("comparison", put("weights", value="n")),
        ("comparison", put("unknown", value=1)),
        ("comparison", put("sha256", value="abc")),
        ("comparison", put("structures", value=[])),
        ("comparison", put("structures", 0, "accuracy", value=1.5)),
        ("comparison", put("structures", 0, "temperature", value=0)),
        ("comparison", put("structures", 0, "smoothing", value="some")),
        ("comparison", put("structures", 0, "by_fold", 0, "rows", value=2.5)),
        ("comparison", put("structures", 1, "edges", 0, "verdict", value="helps")),
        ("comparison", put("structures", 1, "edges", 0, "gate_p", value=-0.1)),
        ("comparison", put("structures", 1, "against_baseline", "interval", value=[0.1])),
        ("comparison", put("pairs", 0, "p_value", value=2)),
        ("comparison", put("pairs", 0, "method", value="guess")),
        ("comparison", put("pairs", 0, "sample_carries_it", value="yes")),
        ("comparison", put("attributes", value=["a", "a"])),
        ("comparison", put("attributes_counted", value=-1)),
        ("comparison", put("schema", 0, "counted", value={})),
        ("comparison", put("schema", 0, "counted", "rows", 0, value=[1.5, 2])),
        ("comparison", put("schema", 0, "counted", "speaks_for", 0, value="few")),
        ("comparison", put("schema", 0, "counted", "blanks", value={"level": "(blank)"})),
        ("comparison", put("schema", 0, "counted", "pooled", value={"level": "(other)", "values": 3})),
        ("comparison", put("schema", -1, "counted", "distribution", "edges", value=[1.0])),
        ("comparison", put("class_levels", value=["one"])),
        ("comparison", put("records", "rows", 0, "disagreement", value=1.5)),
        ("comparison", put("records", "rows", 0, "naive", "temperature", value=0)),
        ("comparison", put("records", "rows", 0, "attributes", 0, "naive_bits", value=None)),
        ("structure", put("format", value="bnx-comparison/1")),
        ("structure", put("attributes", 0, "counts", 0, value=[-1.5])),
        ("structure", put("attributes", 0, "counts", 0, value="1")),
        ("structure", put("attributes", 0, "probabilities", 0, value=[1.2])),
        ("structure", put("attributes", 0, "parents", value=["x", "x"])),
        ("structure", put("class", "prior", value=[2.0, -1.0])),
        ("structure", put("settings", "alpha", value="small")),
        ("structure", put("unknown", value=1)),
    ],
)
def test_a_wrong_value_is_refused(kind: str, change: Callable[[Document], None]) -> None:
    run = small_run()
    document = copy.deepcopy(run.comparison if kind == "comparison" else run.structures[1])
    assert accepts(kind, document)
    change(document)
    assert not accepts(kind, document)


def test_figures_that_may_be_missing_may_be_null() -> None:
    document = copy.deepcopy(small_run().comparison)
    document["structures"][0] |= {"log_loss": None, "log_loss_se": None, "auc": None, "calibration_slope": None}
    document["structures"][1]["edges"][0] |= {"stability": None, "gate_p": None}
    document["pairs"][0] |= dict.fromkeys(("statistic", "p_value", "adjusted_p", "cramers_v", "detectable_bits"))
    document["records"]["rows"][0]["attributes"][0] |= {"level": None, "structure_bits": None, "twice_bits": None}
    document["records"]["rows"][0] |= {"prior_bits": None}
    assert accepts("comparison", document)
    assert accepts("comparison", document | {"records": None})
    document["structures"][0]["brier"] = None
    assert not accepts("comparison", document)
