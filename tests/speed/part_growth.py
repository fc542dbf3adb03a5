"""How time grows with rows and with attributes: counting pairs, and the whole command."""

from collections.abc import Callable
from functools import partial
from pathlib import Path

import numpy as np
from child import learn_compiled
from counting import engine_of, layout_of, plane_words
from make_table import BenchTable
from make_tall import BLOCK, make_tall, write_tall
from make_wide import make_wide, write_wide
from setting import Setting
from timing import Figures, side_by_side

__all__ = ["COMMANDS", "STEPS"]

ROWS = (10_000, 100_000, 1_000_000, 10_000_000)
ATTRIBUTES = (20, 200, 2_000)
NOTES = 10_000  # rows of the tables whose attributes grow
COMMANDS = {
    "bnx learn": (),
    "bnx learn --structures naive,tan,tan-tested": ("--structures", "naive,tan,tan-tested"),
    "bnx learn --structures naive": ("--structures", "naive"),
}
MOST = 200  # attributes for which seven structures are learnt here


def rows_counting(setting: Setting) -> Figures:
    """Count all pairs of 20 attributes as rows grow."""
    return _counting(setting, [_tall(setting.rows(rows)) for rows in ROWS])


def attributes_counting(setting: Setting) -> Figures:
    """Count all pairs of binary attributes as there are more of them."""
    return _counting(setting, [make_wide(NOTES, words) for words in _attributes(setting)])


def rows_command(setting: Setting) -> Figures:
    """Run the whole command on 20 attributes as rows grow."""
    tables = {}
    for rows in map(setting.rows, ROWS):
        tables[rows] = setting.folder / f"tall{rows}"
        write_tall(tables[rows], rows, min(BLOCK, rows))
    return _commands(setting, tables, lambda _: True)


def attributes_command(setting: Setting) -> Figures:
    """Run the whole command on 10,000 rows as there are more binary attributes; all structures only up to ``MOST``."""
    tables = {}
    for words in _attributes(setting):
        tables[words] = setting.folder / f"words{NOTES}x{words}.parquet"
        if not tables[words].exists():
            write_wide(make_wide(NOTES, words), tables[words])
    return _commands(setting, tables, lambda words: words <= MOST)


def _attributes(setting: Setting) -> list[int]:
    return [max(5, round(words * min(1.0, 10 * setting.scale))) for words in ATTRIBUTES]


def _tall(rows: int) -> BenchTable:
    """Draw the rows that ``write_tall`` writes."""
    blocks = [make_tall(min(BLOCK, rows - first), number) for number, first in enumerate(range(0, rows, BLOCK))]
    codes = np.concatenate([block.codes for block in blocks], axis=1)
    return BenchTable(codes, blocks[0].sizes, np.concatenate([block.target for block in blocks]))


def _counting(setting: Setting, tables: list[BenchTable]) -> Figures:
    points = []
    for table in tables:
        engine, layout, rows = engine_of(table, 2), layout_of(table), len(table.target)
        engine.pair_counts(layout)
        times = side_by_side({"": partial(engine.pair_counts, layout)}, setting.runs)[""]
        size = {"rows": rows, "attributes": len(table.sizes), "classes": table.classes, "pairs": len(layout.left)}
        bytes_read = {"code_bytes": table.codes.nbytes, "plane_bytes": int((table.sizes - 1).sum()) * rows / 8}
        points.append({**size, **bytes_read, "plane_words": plane_words(table.sizes, rows), **times})
    return {"points": points}


def _commands(setting: Setting, tables: dict[int, Path], whole: Callable[[int], bool]) -> Figures:
    """Run every command once on every table: these times are minutes, so noise is small beside them."""
    curves: dict[str, list[Figures]] = {name: [] for name in COMMANDS}
    for name, options in COMMANDS.items():
        for size, path in tables.items():
            if options or whole(size):
                found = learn_compiled(path, setting.folder / "results", "--timings", *options)
                curves[name].append({"size": size, **found.figures()})
    return {"curves": curves}


STEPS = {
    "rows_counting": rows_counting,
    "attributes_counting": attributes_counting,
    "rows_command": rows_command,
    "attributes_command": attributes_command,
}
