"""P-values of many stratified tables of one shape, by the test that the program would choose and by plain tails."""

import numpy as np

from bnx.independence import Statistics, p_values
from bnx.kernels.contingency import table_statistics
from bnx.refining import Rigour, gated, reported, visit_arrays

__all__ = ["auto_p", "gate_p", "plain_p", "statistics_of"]


def statistics_of(counts: np.ndarray, height: int, width: int) -> Statistics:
    """Run the kernel on tables of one shape, counts (P, S, height * width)."""
    number, strata, size = counts.shape
    flat = np.ascontiguousarray(counts.transpose(1, 0, 2).reshape(strata, -1), dtype=np.int32)
    shape = (np.full(number, height), np.full(number, width))
    return Statistics.of(table_statistics(flat, np.arange(number) * size, *shape))


def auto_p(counts: np.ndarray, height: int, width: int, alpha: float, seed: int) -> tuple[np.ndarray, np.ndarray]:
    """Test tables (P, S, height * width) at the level ``alpha``: p, NaN where nothing is tested, and methods, (P,).

    The methods index ``bnx.independence.METHODS``. Tables are judged one by one, without an adjustment.
    """
    stats = statistics_of(counts, height, width)
    tested = reported(visit_arrays(counts, height, width), stats, "auto", "none", alpha, seed).tested
    return tested.p, tested.method


def gate_p(counts: np.ndarray, height: int, width: int, alpha: float) -> np.ndarray:
    """Test tables as the gate of a structure does around the level ``alpha``: p (P,)."""
    stats = statistics_of(counts, height, width)
    return gated(visit_arrays(counts, height, width), stats, Rigour("auto", alpha / 1000, 5 * alpha, 1)).p


def plain_p(counts: np.ndarray, height: int, width: int, test: str) -> np.ndarray:
    """Take the chi-square tail of X2 (``chi2``) or G (``g``) of every table, (P,)."""
    return p_values(statistics_of(counts, height, width), test).p
