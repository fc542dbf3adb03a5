"""A few hundred records drawn for tests, the whole pipeline run on them, and its documents and pictures."""

import csv
import json
from dataclasses import dataclass
from functools import cache
from pathlib import Path
from tempfile import TemporaryDirectory
from typing import Any

import numpy as np

from bnx.comparison import compare
from bnx.documents import comparison_document, dot_of, structure_document
from bnx.drawing import render
from bnx.reading import open_source
from bnx.recipe import Recipe

PLAIN_NAMES = ("dock", "alarm", "lane", "rain", "grade")
HOSTILE_NAMES = (
    "<script>window.hacked=1</script>",
    "\"quote' & ]]> </style></title><img src=x onerror=window.hacked=1>",
    "\u202eשלום <b>",
    "long " + "x" * 295,
    "{{ 7*7 }}",
)
HOSTILE_LEVELS = ("<script>window.hacked=2</script>", "]]>\"'", "\u202eمرحبا")


@dataclass(frozen=True)
class SmallRun:
    comparison: dict[str, Any]
    structures: tuple[dict[str, Any], ...]
    pictures: dict[str, str]


def rows(count: int, seed: int) -> np.ndarray:
    """Draw codes (count, 5), the class last; the first two attributes copy one another given the class."""
    random = np.random.default_rng(seed)
    target = random.integers(0, 3, count)
    first = np.where(random.random(count) < 0.6, target, random.integers(0, 3, count))
    second = np.where(random.random(count) < 0.8, first, random.integers(0, 3, count))
    third = np.where(random.random(count) < 0.5, target, random.integers(0, 3, count))
    fourth = random.integers(0, 3, count)
    return np.column_stack([first, second, third, fourth, target])


def write_table(path: Path, names: tuple[str, ...], levels: tuple[str, ...]) -> None:
    with path.open("w", newline="", encoding="utf-8") as out:
        writer = csv.writer(out)
        writer.writerow([*names[:-1], "level", names[-1]])
        for number, row in enumerate(rows(360, 5)):
            words = [levels[code] for code in row]
            numeric = f"{row[-1] * 0.7 + (number * 37 % 101) / 40:.2f}"
            writer.writerow([*words[:-1], numeric, words[-1]])


@cache
def small_run(
    hostile: bool = False, structures: tuple[str, ...] = ("naive", "tan", "kdb2-tested"), held_out: bool = False
) -> SmallRun:
    """Run everything once on a small table; ``held_out`` scores the same table once more, to show where scores go."""
    names = HOSTILE_NAMES if hostile else PLAIN_NAMES
    levels = HOSTILE_LEVELS if hostile else ("few", "some", "many")
    with TemporaryDirectory() as folder:
        path = Path(folder) / "small.csv"
        write_table(path, names, levels)
        recipe = Recipe(names[-1], structures=structures, folds=5, resamples=10)
        second = open_source(str(path)) if held_out else None
        comparison = compare(open_source(str(path)), recipe, 1, lambda *_: None, second)
        document = json.loads(json.dumps(comparison_document(comparison), allow_nan=False))
        each = tuple(
            json.loads(json.dumps(structure_document(comparison, s), allow_nan=False)) for s in range(len(structures))
        )
    pictures = {one["name"]: render(dot_of(one), "svg").decode() for one in each}
    return SmallRun(document, each, pictures)
