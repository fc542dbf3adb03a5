"""Tables of many attributes and classes, drawn with a seed, on which the page must still be usable."""

import csv
from pathlib import Path

import numpy as np


def write_large(path: Path, attributes: int, classes: int, rows: int, levels: int = 3, seed: int = 7) -> None:
    """Draw records: of every four attributes one follows the class and the others copy their neighbour now and then."""
    random = np.random.default_rng(seed)
    target = random.integers(0, classes, rows)
    columns: list[np.ndarray] = []
    for place in range(attributes):
        copied = target % levels if place % 4 == 0 else columns[-1]
        columns.append(np.where(random.random(rows) < 0.5, copied, random.integers(0, levels, rows)))
    with path.open("w", newline="", encoding="utf-8") as out:
        writer = csv.writer(out)
        writer.writerow([*(f"attribute_{place:03d}" for place in range(attributes)), "outcome"])
        for row, one in zip(zip(*columns, strict=True), target, strict=True):
            writer.writerow([*(f"level {code}" for code in row), f"class {one}"])
