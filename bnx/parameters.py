"""Smoothing: from the counts of a family to its table of log probabilities."""

import re
from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

from bnx.errors import SettingError
from bnx.kernels import smoothed_tables

__all__ = ["CANDIDATES", "Smoothing", "candidates", "log_tables", "parse_smoothing"]


@dataclass(frozen=True)
class Smoothing:
    """How a table is smoothed: ``laplace`` adds ``amount`` records to every cell, ``backoff`` adds ``amount`` records
    spread like the table that knows one parent less.

    Source: Friedman, Geiger & Goldszmidt 1997, section 5; Petitjean, Buntine, Webb & Zaidi 2018.
    """

    kind: str
    amount: float

    def __str__(self) -> str:
        """Write it as the option takes it."""
        return f"{self.kind}:{self.amount:g}"


CANDIDATES = (Smoothing("laplace", 1.0), *(Smoothing("backoff", amount) for amount in (0.5, 1.0, 2.0, 4.0, 8.0, 16.0)))


def parse_smoothing(text: str) -> Smoothing:
    """Read ``laplace:A`` or ``backoff:S``.

    Raises:
        SettingError: the text is neither, or the amount is not a positive number.
    """
    found = re.fullmatch(r"(laplace|backoff):(\d+\.?\d*|\.\d+)", text)
    if not found or float(found[2]) <= 0:
        raise SettingError(
            f"--smoothing: {text!r} cannot be used; give auto, laplace:A or backoff:S with a number above 0"
        )
    return Smoothing(found[1], float(found[2]))


def candidates(text: str) -> tuple[Smoothing, ...]:
    """List what a setting leaves to choose from: all candidates for ``auto``, else the one it names."""
    return CANDIDATES if text == "auto" else (parse_smoothing(text),)


def log_tables(counts: np.ndarray, sizes: Sequence[int], smoothings: Sequence[Smoothing]) -> np.ndarray:
    """Smooth the counts of one family in several ways.

    counts: (C, cells) int32, cells numbered by ``sizes`` = levels of the parents in the order taken, then the child.

    Returns:
        Log probabilities (nats) of the child's level given class and parents, (cells, V * C), column ``v * C + c``.
    """
    amounts = np.array([smoothing.amount for smoothing in smoothings])
    laplace = np.array([smoothing.kind == "laplace" for smoothing in smoothings])
    out = np.empty((counts.shape[1], len(smoothings) * counts.shape[0]))
    smoothed_tables(np.ascontiguousarray(counts), np.array(sizes, dtype=np.int64), amounts, laplace, out)
    return out
