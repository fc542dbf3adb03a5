"""Smoothing: from the counts of a family to its table of log probabilities."""

import re
from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

from bnx.errors import SettingError
from bnx.kernels import smoothed_tables

__all__ = ["CANDIDATES", "Smoothing", "amounts_of", "candidates", "log_tables", "parse_smoothing"]


@dataclass(frozen=True)
class Smoothing:
    """How a table is smoothed: ``laplace`` adds ``amount`` records to every cell, ``backoff`` adds ``amount`` records
    spread like the table that knows one parent less; where that knows the class too, ``deeper`` records if given.

    Source: Friedman, Geiger & Goldszmidt 1997, section 5; Petitjean, Buntine, Webb & Zaidi 2018.
    """

    kind: str
    amount: float
    deeper: float | None = None

    def __str__(self) -> str:
        """Write it as the option takes it."""
        return f"{self.kind}:{self.amount:g}" + ("" if self.deeper is None else f",{self.deeper:g}")


CANDIDATES = (
    Smoothing("laplace", 1.0),
    *(Smoothing("backoff", amount) for amount in (0.5, 2.0, 8.0)),
    *(Smoothing("backoff", 2.0, deeper) for deeper in (32.0, 256.0)),
    *(Smoothing("backoff", 16.0, deeper) for deeper in (64.0, 512.0)),
)


def parse_smoothing(text: str) -> Smoothing:
    """Read ``laplace:A``, ``backoff:S`` or ``backoff:S,D``.

    Raises:
        SettingError: the text is none of them, or an amount is not a positive number.
    """
    number = r"(\d+\.?\d*|\.\d+)"
    found = re.fullmatch(f"laplace:{number}|backoff:{number}(?:,{number})?", text)
    amounts = [float(group) for group in found.groups() if group] if found else []
    if not amounts or min(amounts) <= 0:
        raise SettingError(
            f"--smoothing: {text!r} cannot be used; give auto, laplace:A, backoff:S or backoff:S,D with numbers above 0"
        )
    return Smoothing(text.partition(":")[0], *amounts)


def candidates(text: str) -> tuple[Smoothing, ...]:
    """List what a setting leaves to choose from: all candidates for ``auto``, else the one it names."""
    return CANDIDATES if text == "auto" else (parse_smoothing(text),)


def log_tables(counts: np.ndarray, sizes: Sequence[int], smoothings: Sequence[Smoothing]) -> np.ndarray:
    """Smooth the counts of one family in several ways.

    counts: (C, cells) int32, cells numbered by ``sizes`` = levels of the parents in the order taken, then the child.

    Returns:
        Log probabilities (nats) of the child's level given class and parents, (cells, V * C), column ``v * C + c``.
    """
    amounts, laplace = amounts_of(smoothings)
    out = np.empty((counts.shape[1], len(smoothings) * counts.shape[0]))
    smoothed_tables(np.ascontiguousarray(counts), np.array(sizes, dtype=np.int64), amounts, laplace, out)
    return out


def amounts_of(smoothings: Sequence[Smoothing]) -> tuple[np.ndarray, np.ndarray]:
    """Lay smoothings out for loops: records given the class alone and given parents too (V, 2), laplace (V,) bool."""
    amounts = [(one.amount, one.amount if one.deeper is None else one.deeper) for one in smoothings]
    return np.array(amounts), np.array([one.kind == "laplace" for one in smoothings])
