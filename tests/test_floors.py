"""The house stands: imports point down the floors, walls hold, and no file or habit grows out of bounds."""

import ast
from collections.abc import Iterator
from pathlib import Path

import pytest

ROOT = Path(__file__).parent.parent
PACKAGE = ROOT / "bnx"

# A module imports from lower floors, and on its own floor from modules to its left. A package counts as one module.
FLOORS = (
    "bnx errors text palette plain unfinished",
    "kernels calibrating simplex counts tiles discretising domains dot_text embedding files storing cells "
    "folds layers losses branching multiplicity paired picture structure picking sharpening mixing svg effects ordered "
    "loglinear fibre homogeneity masked unobserved summing_out weighed_losses reliability double_counting "
    "distributions level_evidence",
    "tables views blocks columns columnar delimited malformed repeating reading weighing levelling screening "
    "duplicates level_order",
    "coarsening gathering passes coding encoding pair_counting engines",
    "parameters trainings room dependence families class_tables profiling level_counts",
    "tails wide_tables independence classifier rebasing mixed_classifier intervals refining sampling scoring "
    "tabulating verdicts explaining pair_details",
    "gating doubts drawing formats showing",
    "learners",
    "recipe wide_forests wide wide_learning matrix_memory heldout leaving_out learning pair_judging many_tests "
    "wide_testing wide_judging pair_table",
    "choosing cut_trials evaluation gains fold_cells rating before_after disagreement "
    "weight_of_evidence resampling pair_tests",
    "dealing judging metric_differences mix_judging ledger observing held_out cut_notes run_notes yardstick_models "
    "yardstick learning_curve comparison",
    "marks lettering residual_panels residual_chip residual_key residual_cells residual_picture",
    "chosen score_entries mix_documents yardstick_documents curve_documents listed_pairs pair_table_entries "
    "level_entries record_entries documents "
    "ticks reliability_words sureness counted_twice findings metric_charts printed "
    "record_bars score_tables setting_words level_charts attribute_rows "
    "method_words reliability_chart report_data report_page pair_columns pair_rows triangle edge_words "
    "pair_figures pair_tables_page structure_rows report results tested_text tested_picture",
    "cli",
)
PLACES = {name: (floor, place) for floor, names in enumerate(FLOORS) for place, name in enumerate(names.split())}

WITHOUT_DATA = ("gating", "independence", "learners")
PLAIN = (
    *("kernels", "multiplicity", "folds", "losses", "discretising", "calibrating", "paired"),
    *("effects", "ordered", "loglinear", "weighed_losses", "reliability"),
    *("distributions", "level_evidence"),
)
LENT = {  # a plain module -> plain modules that it goes on from
    **{"weighed_losses": {"losses"}, "reliability": {"losses"}},
    "level_evidence": {"effects"},
}
ONLY_IN = {
    "typer": {"cli"},
    "rich": {"cli"},
    "click": {"cli"},
    "graphviz": {"drawing", "dot_text"},  # dot_text quotes and escapes by it
    "pygraphviz": set(),  # run as a program of its own, never imported
    # documents names its version
    "numba": {"kernels", "documents"},
    "matplotlib": {"lettering"},
    "sklearn": {"yardstick_models"},
    "threadpoolctl": {"yardstick_models"},
    "statsmodels": set(),
}
LAZY = {  # module -> what it may import inside a function
    "cli": {"bnx.tested_picture"},
    "yardstick_models": {"sklearn.ensemble", "sklearn.linear_model", "threadpoolctl"},  # optional
}
LONGEST = 330

FILES = sorted(PACKAGE.rglob("*.py"))
Import = ast.Import | ast.ImportFrom


def module_of(path: Path) -> str:
    """Name the module or package directly under bnx that a file belongs to."""
    parts = path.relative_to(PACKAGE).with_suffix("").parts
    return "bnx" if parts == ("__init__",) else parts[0]


def imports(tree: ast.AST) -> Iterator[tuple[Import, str]]:
    """Find every import, wherever it stands, with the full name of what it imports from."""
    for node in ast.walk(tree):
        if isinstance(node, ast.Import):
            yield from ((node, alias.name) for alias in node.names)
        elif isinstance(node, ast.ImportFrom):
            assert node.level == 0, "imports are written in full"
            if node.module == "bnx":
                names = (alias.name for alias in node.names)
                yield from ((node, "bnx" if name.startswith("__") else f"bnx.{name}") for name in names)
            else:
                yield node, str(node.module)


def own(name: str) -> str | None:
    """Name the module of bnx that an import reaches; None for other libraries."""
    parts = name.split(".")
    if parts[0] != "bnx":
        return None
    return parts[1] if len(parts) > 1 else "bnx"


def parsed(path: Path) -> ast.Module:
    return ast.parse(path.read_text(encoding="utf-8"))


def test_every_module_stands_on_one_floor_and_no_floor_holds_a_ghost() -> None:
    standing = [name for names in FLOORS for name in names.split()]
    assert len(standing) == len(set(standing))
    assert set(standing) == {module_of(path) for path in FILES}


@pytest.mark.parametrize("path", FILES, ids=lambda path: str(path.relative_to(ROOT)))
def test_imports_point_down(path: Path) -> None:
    here = module_of(path)
    for _, name in imports(parsed(path)):
        reached = own(name)
        if reached is not None and reached != here:
            assert PLACES[reached] < PLACES[here], f"{here} may not import {name}"


@pytest.mark.parametrize("path", FILES, ids=lambda path: str(path.relative_to(ROOT)))
def test_walls_hold(path: Path) -> None:
    here = module_of(path)
    for _, name in imports(parsed(path)):
        library, reached = name.split(".")[0], own(name)
        assert here in ONLY_IN.get(library, {here}), f"{here} may not import {name}"
        if here in WITHOUT_DATA:
            assert reached not in {"tables", "coding", "reading", "engines"}
            assert library not in {"pandas", "pyarrow"}
        if here in PLAIN:
            assert reached in {None, "errors", "kernels", "skewness", here} | LENT.get(here, set()), (
                f"{here} may not import {name}"
            )


@pytest.mark.parametrize("path", FILES, ids=lambda path: str(path.relative_to(ROOT)))
def test_imports_stand_at_the_top(path: Path) -> None:
    tree = parsed(path)
    top = {id(node) for node in tree.body}
    for node, name in imports(tree):
        lazy = name in LAZY.get(module_of(path), set())
        assert id(node) in top or lazy, f"line {node.lineno} of {path.name} imports {name} inside"
    assert "TYPE_CHECKING" not in path.read_text(encoding="utf-8")
    assert "import_module" not in path.read_text(encoding="utf-8") or module_of(path) == "cli"


@pytest.mark.parametrize("path", FILES, ids=lambda path: str(path.relative_to(ROOT)))
def test_nobody_prints_but_the_command_line(path: Path) -> None:
    if module_of(path) == "cli":
        return
    for node in ast.walk(parsed(path)):
        if isinstance(node, ast.Call) and isinstance(node.func, ast.Name):
            assert node.func.id != "print", f"line {node.lineno} of {path.name} prints"


@pytest.mark.parametrize("path", FILES, ids=lambda path: str(path.relative_to(ROOT)))
def test_no_global_randomness_and_no_reordered_sums(path: Path) -> None:
    text = path.read_text(encoding="utf-8")
    for word in ("np.random", "import random", "fastmath", "parallel=True", "default_rng("):
        assert word not in text, f"{path.name} holds {word}"


def test_no_file_is_too_long() -> None:
    every = [path for folder in ("bnx", "tests", "datasets") for path in sorted((ROOT / folder).rglob("*.py"))]
    lengths = {path.name: len(path.read_text(encoding="utf-8").splitlines()) for path in every}
    assert {name: length for name, length in lengths.items() if length > LONGEST} == {}


def test_no_function_is_too_long() -> None:
    for path in FILES:
        for node in ast.walk(parsed(path)):
            if isinstance(node, ast.FunctionDef):
                length = (node.end_lineno or 0) - node.body[0].lineno + 1  # a command's options are its signature
                assert length <= 55, f"{node.name} in {path.name} has {length} lines"


def test_no_utils() -> None:
    assert not [path for path in FILES if {"utils", "helpers", "common", "misc"} & set(path.stem.split("_"))]
