"""Deal the rows of a table to folds and blocks, as the settings say."""

from concurrent.futures import ThreadPoolExecutor

import numpy as np

from bnx.coding import Coded, SideColumn
from bnx.errors import DataError
from bnx.folds import STRETCH_ROWS, assign_blocks, assign_given, assign_grouped, sub_blocks
from bnx.recipe import MOST_FOLDS, Recipe
from bnx.storing import Store
from bnx.text import count_of

__all__ = ["deal"]


def deal(coded: Coded, recipe: Recipe, repeat: int, jobs: int, store: Store) -> tuple[np.ndarray, int]:
    """Give each row its block, unsigned (N,), and the number of folds.

    Raises:
        DataError: the rows cannot be dealt as the settings say.
    """
    table = coded.table
    if recipe.fold_column:
        codes, folds = _given_folds(coded.extra[recipe.fold_column])
        return assign_given(codes, table.target, table.lines.numbers(), recipe.seed), folds
    if table.lines.count < recipe.folds:
        raise DataError(
            f"the table has {count_of(table.lines.count, 'usable row')} for {recipe.folds} folds; give fewer --folds"
        )
    if recipe.group:
        groups = coded.extra[recipe.group].codes
        return assign_grouped(groups, table.target, recipe.seed, recipe.folds, repeat), recipe.folds
    blocks = store.empty((table.lines.count,), np.min_scalar_type(recipe.folds * sub_blocks(recipe.folds)))

    def fill(part: tuple[slice, slice]) -> None:
        lines, rows = part
        numbers = table.lines.numbers(lines)
        blocks[rows] = assign_blocks(table.target[rows], numbers, recipe.seed, recipe.folds, repeat)

    with ThreadPoolExecutor(jobs) as pool:
        list(pool.map(fill, table.lines.parts(STRETCH_ROWS)))
    return blocks, recipe.folds


def _given_folds(column: SideColumn) -> tuple[np.ndarray, int]:
    """Number the folds that a column holds; give the fold of each row and the number of folds."""
    used, codes = np.unique(column.codes, return_inverse=True)
    if len(used) < 3:
        raise DataError(
            f"--fold-column {column.name} holds {count_of(len(used), 'different value')}, but at least 3 folds are "
            "needed to choose inside each training fold; take a column with more values or drop the option"
        )
    if len(used) > MOST_FOLDS:
        raise DataError(
            f"--fold-column {column.name} holds {len(used):,} different values, but nested choices take at most "
            f"{MOST_FOLDS} folds; take a coarser column, or --group {column.name} to keep its rows together"
        )
    return codes, len(used)
