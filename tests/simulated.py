"""Contingency tables drawn from known cell shares, and their statistics."""

import numpy as np

from bnx.independence import Statistics
from bnx.kernels.contingency import table_statistics


def measured(tables: np.ndarray) -> Statistics:
    """Run the kernel on tables of one shape, (P, S, h, w)."""
    number, strata, height, width = tables.shape
    counts = np.ascontiguousarray(tables.transpose(1, 0, 2, 3).reshape(strata, -1), dtype=np.int32)
    size = height * width
    offsets = np.arange(number) * size
    return Statistics.of(table_statistics(counts, offsets, np.full(number, height), np.full(number, width)))


def drawn(shares: np.ndarray, rows: int, number: int, seed: int) -> np.ndarray:
    """Draw tables of this many rows from cell shares (S, h, w): (number, S, h, w)."""
    draws = np.random.default_rng(seed).multinomial(rows, shares.ravel(), size=number)
    return draws.reshape(number, *shares.shape)


def exact_bits(shares: np.ndarray) -> float:
    """Find the bits shared given the stratum, from cell shares (S, h, w)."""
    independent = shares.sum(2, keepdims=True) * shares.sum(1, keepdims=True) / shares.sum((1, 2), keepdims=True)
    return float((shares * np.log2(shares / independent)).sum())


def nudged(strata: int, height: int, width: int, strength: float, seed: int) -> np.ndarray:
    """Make cell shares (S, h, w) that depend a little."""
    random = np.random.default_rng(seed)
    shares = (
        random.dirichlet(np.full(height, 9.0), strata)[:, :, None]
        * random.dirichlet(np.full(width, 9.0), strata)[:, None]
    )
    shares = shares * np.exp(strength * random.normal(size=shares.shape))
    return shares / shares.sum()
