"""The folds of all repeats, one after the other."""

from collections.abc import Sequence
from dataclasses import dataclass

from bnx.evaluation import Evaluation

__all__ = ["Cell", "cells_of"]


@dataclass(frozen=True)
class Cell:
    """One fold of one repeat that holds rows.

    ``runs``: its rows where those of all repeats lie one after the other, from ``shift`` on those of its own.
    """

    repeat: int
    fold: int
    rows: int
    runs: tuple[slice, ...]
    shift: int


def cells_of(evaluations: Sequence[Evaluation]) -> list[Cell]:
    """List the folds that hold rows, repeat by repeat."""
    cells, shift = [], 0
    for repeat, one in enumerate(evaluations):
        for fold, (runs, rows) in enumerate(zip(one.fold_rows, one.rows_by_fold, strict=True)):
            if rows:
                moved = tuple(slice(run.start + shift, run.stop + shift) for run in runs)
                cells.append(Cell(repeat, fold, rows, moved, shift))
        shift += one.engine.rows
    return cells
