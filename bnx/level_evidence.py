"""What each level says about the class: the class it speaks for, if chance is no explanation."""

from dataclasses import dataclass

import numpy as np

from bnx.effects import expected_and_residuals

__all__ = ["BEYOND_CHANCE", "LEAST_EXPECTED", "Spoken", "evidence_of"]

BEYOND_CHANCE = 3.0
"""Adjusted residual above which a level speaks for a class."""
LEAST_EXPECTED = 5
"""Records of a class that a level must be expected to hold, lest one of a rare class stands out by chance."""


@dataclass(frozen=True)
class Spoken:
    """The class (its code) that a level speaks for, the weight of evidence in bits, and the adjusted residual."""

    target: int
    bits: float
    residual: float


def evidence_of(rows: np.ndarray, masses: np.ndarray) -> list[Spoken | None]:
    """Tell for each of L levels which class it speaks for most; None where no class has clearly more rows than usual.

    rows (L, C) of each level and class decide by their adjusted residuals, where enough are expected. ``masses`` (L,
    C), what the rows weigh, give the weight of evidence of a level for a class: the log of its share in the class over
    its share in all other classes, half a record added to each of the four counts, so that it is finite.

    Source: Good 1950 (weight of evidence; from memory); Haldane 1956 (half a record; from memory);
    Cochran 1954 (five expected; from memory).
    """
    expected, residuals = (np.nan_to_num(one[0], nan=0.0) for one in expected_and_residuals(rows[None]))
    of_class, every = masses.sum(axis=0), masses.sum()
    rest, others = masses.sum(axis=1, keepdims=True) - masses, every - of_class
    bits = np.log2((masses + 0.5) / (of_class + 1.0)) - np.log2((rest + 0.5) / (others + 1.0))
    bits = np.where((residuals > BEYOND_CHANCE) & (expected >= LEAST_EXPECTED), bits, -np.inf)
    best = bits.argmax(axis=1)
    return [
        Spoken(target, float(bits[level, target]), float(residuals[level, target])) if bits[level, target] > 0 else None
        for level, target in enumerate(best.tolist())
    ]
