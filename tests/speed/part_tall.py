"""Tall tables: a folder of Parquet files with 100 million rows, one with a tenth of them, and one with very few."""

from child import learn_compiled
from counting import plane_words
from make_tall import BLOCK, ROWS, SIZES, write_tall
from setting import Setting
from timing import Figures

__all__ = ["STEPS"]

STRUCTURES = "naive,tan,kdb2-tested"
FEW = 10_000


def few(setting: Setting) -> Figures:
    """Learn from so few rows that nearly all the time is what the command takes without any."""
    return _learnt(setting, setting.rows(FEW))


def tenth(setting: Setting) -> Figures:
    """Learn from a tenth of the rows."""
    return _learnt(setting, setting.rows(ROWS) // 10)


def whole(setting: Setting) -> Figures:
    """Learn from all rows."""
    return _learnt(setting, setting.rows(ROWS))


def _learnt(setting: Setting, rows: int) -> Figures:
    tables, spill = setting.folder / f"tall{rows}", setting.folder / "spill"
    size = write_tall(tables, rows, min(BLOCK, rows, setting.rows(ROWS) // 10))
    spill.mkdir(exist_ok=True)
    options = ("--spill", str(spill), "--structures", STRUCTURES, "--timings")
    found = learn_compiled(tables, setting.folder / "results", *options)
    return {
        "rows": rows,
        "attributes": len(SIZES),
        "file_bytes": size,
        "plane_words": plane_words(SIZES, rows),
        "code_bytes": rows * (len(SIZES) + 1),
        "options": f"--spill DIR --structures {STRUCTURES}",
        **found.figures(),
    }


STEPS = {"few": few, "tenth": tenth, "whole": whole}
