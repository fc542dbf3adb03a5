"""The margins of three-way tables: as columns of a model, and all tables that share them."""

from collections.abc import Iterator

import numpy as np
from scipy.special import gammaln


def design(shape: tuple[int, ...], classes: list[int] | None = None) -> np.ndarray:
    """Mark the margins of every cell: rows x strata, columns x strata, and rows x columns (in each class)."""
    s, i, j = (index.ravel() for index in np.indices(shape))
    height, width = shape[1:]
    group = s * 0 if classes is None else np.asarray(classes)[s]
    keys = (s * height + i, s * width + j, (group * height + i) * width + j)
    return np.hstack([np.eye(key.max() + 1)[key] for key in keys])


def fibre(counts: np.ndarray) -> np.ndarray:
    """Enumerate the tables with the same three margins."""
    pairs, down, across = counts.sum(0), counts.sum(2), counts.sum(1)
    table, last = np.zeros_like(counts), np.array(counts.shape) - 1

    def grown(cell: int) -> Iterator[np.ndarray]:
        if cell == counts.size:
            yield table.copy()
            return
        s, i, j = np.unravel_index(cell, counts.shape)
        left = (
            pairs[i, j] - table[:s, i, j].sum(),
            down[s, i] - table[s, i, :j].sum(),
            across[s, j] - table[s, :i, j].sum(),
        )
        forced = [left[k] for k, place in enumerate((s == last[0], j == last[2], i == last[1])) if place]
        for value in range(min(left) + 1):
            if all(value == must for must in forced):
                table[s, i, j] = value
                yield from grown(cell + 1)
        table[s, i, j] = 0

    return np.array(list(grown(0)))


def chances(tables: np.ndarray) -> np.ndarray:
    logs = -gammaln(tables + 1.0).sum((1, 2, 3))
    weights = np.exp(logs - logs.max())
    return np.asarray(weights / weights.sum())
