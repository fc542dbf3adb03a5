"""Rows of attributes that interact."""

import numpy as np

__all__ = ["drawn"]


def drawn(rows: int = 90, classes: int = 3, seed: int = 1) -> tuple[np.ndarray, np.ndarray]:
    """Draw four attributes of 2, 3, 2 and 3 levels, the last two with interactions, and the class."""
    rng = np.random.default_rng(seed)
    target = np.sort(rng.integers(0, classes, rows))
    rng.shuffle(target)
    a, b = rng.integers(0, 2, rows), rng.integers(0, 3, rows)
    c = np.where(rng.random(rows) < 0.8, (a + target) % 2, a)
    d = np.where(rng.random(rows) < 0.7, (a + b + target) % 3, b)
    return np.array([a, b, c, d]), target
