"""A table whose names and levels are hostile to pages, scripts and templates, learnt from once."""

import csv
import json
from pathlib import Path
from typing import Any

import numpy as np

from bnx.comparison import compare
from bnx.documents import comparison_document, dot_of, structure_document
from bnx.drawing import render
from bnx.reading import open_source
from bnx.recipe import Recipe

TARGET = "</title></style><script>window.hacked=1</script>"
NAMES = (
    "<script>window.hacked=2</script>",
    "\"quote' & ]]> --> <img src=x onerror=window.hacked=3>",
    "\u202eשלום <b>",
    "long " + "x" * 295,
    "many words " * 27 + "end",
    "__proto__",
    "constructor",
    "{bits} {{ 7*7 }} ${hacked} $& %s",
    "🚚❄️ 👩‍🔧",
    "null",
    "bell \x07 and line \u2028 separator",
)
LEVELS = (
    "</script><script>window.hacked=4</script>",
    "]]>\"'",
    "\u202eمرحبا",
    "__proto__",
    "x" * 300,
)
CLASSES = ("<b>sound</b>", "constructor", '\u202eלא & "so"')
STRUCTURES = ("naive", "tan", "kdb2-tested")


def shown(text: str) -> str:
    """Give a name as a page can show it: control characters become a sign that can be seen."""
    return "".join("\ufffd" if ord(sign) < 32 or 127 <= ord(sign) < 160 else sign for sign in text)


def write_hostile(path: Path, rows: int = 400, seed: int = 11) -> None:
    """Draw records: neighbours among the attributes copy one another, a third follow the class."""
    random = np.random.default_rng(seed)
    target = random.integers(0, len(CLASSES), rows)
    columns = []
    for place in range(len(NAMES)):
        own = random.integers(0, len(LEVELS), rows)
        copied = columns[-1] if place % 3 and columns else target
        columns.append(np.where(random.random(rows) < 0.6, copied, own))
    with path.open("w", newline="", encoding="utf-8") as out:
        writer = csv.writer(out)
        writer.writerow([*NAMES, TARGET])
        for row, one in zip(zip(*columns, strict=True), target, strict=True):
            writer.writerow([*(LEVELS[code] for code in row), CLASSES[one]])


def learnt(path: Path, target: str, structures: tuple[str, ...] = STRUCTURES) -> tuple[dict[str, Any], dict[str, str]]:
    """Learn from a table; give the comparison and the drawing of every structure."""
    recipe = Recipe(target, structures=structures, folds=4, resamples=5)
    comparison = compare(open_source(str(path)), recipe, 1, lambda *_: None, None)
    document = json.loads(json.dumps(comparison_document(comparison), allow_nan=False))
    entries = [json.loads(json.dumps(structure_document(comparison, s))) for s in range(len(structures))]
    return document, {one["name"]: render(dot_of(one), "svg").decode() for one in entries}
