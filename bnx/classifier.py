"""A structure with its tables: from coded records to class probabilities."""

from collections.abc import Sequence
from dataclasses import dataclass
from functools import cached_property

import numpy as np

from bnx.calibrating import Calibration, apply
from bnx.domains import Domain
from bnx.parameters import Smoothing, log_tables
from bnx.structure import Structure

__all__ = ["Classifier"]


@dataclass(frozen=True)
class Classifier:
    """Everything needed to score a record.

    ``counts``: per attribute, training rows (C, levels of parents in the order taken..., levels of the child) int32;
    ``class_counts`` (C,) int64.
    """

    domains: tuple[Domain, ...]
    target: Domain
    structure: Structure
    counts: tuple[np.ndarray, ...]
    class_counts: np.ndarray
    smoothing: Smoothing
    calibration: Calibration

    @property
    def log_prior(self) -> np.ndarray:
        """Log share of each class (nats), (C,)."""
        with np.errstate(divide="ignore"):
            return np.asarray(np.log(self.class_counts / self.class_counts.sum()))

    @property
    def free_parameters(self) -> int:
        """Count the probabilities that are free to choose, those of the class included."""
        tables = sum(table.size // table.shape[-1] * (table.shape[-1] - 1) for table in self.counts)
        return int(tables) + len(self.class_counts) - 1

    def table(self, child: int) -> np.ndarray:
        """Smoothed probabilities of one attribute, shaped like its counts."""
        counts = self.counts[child]
        logs = log_tables(counts.reshape(len(counts), -1), counts.shape[1:], [self.smoothing])
        return np.asarray(np.exp(logs.T).reshape(counts.shape))

    @cached_property
    def _log_tables(self) -> dict[tuple[int, tuple[int, ...]], np.ndarray]:
        """Log tables made so far, by attribute and the parents left out."""
        return {}

    def _log_table(self, child: int, left_out: tuple[int, ...]) -> np.ndarray:
        """Smooth the family of an attribute without some of its parents (their axes in the counts), (cells, C)."""
        key = (child, left_out)
        if key not in self._log_tables:
            counts = self.counts[child].sum(axis=left_out, dtype=np.int32)
            self._log_tables[key] = log_tables(counts.reshape(len(counts), -1), counts.shape[1:], [self.smoothing])
        return self._log_tables[key]

    def terms(self, codes: np.ndarray, child: int) -> np.ndarray:
        """Log table terms (nats) of one attribute, (N, C), for codes (n, N) with -1 for what was never seen.

        A record whose own level is unknown gets no term. A parent whose level is unknown is left out of the family.
        """
        parents = np.array(self.structure.parents[child], dtype=np.int64)
        terms = np.zeros((codes.shape[1], len(self.class_counts)))
        known = codes[child] >= 0
        patterns = (codes[parents] >= 0).T @ (1 << np.arange(len(parents))) if len(parents) else np.zeros(len(known))
        for pattern in np.unique(patterns[known]).astype(np.int64).tolist():
            rows = np.flatnonzero(known & (patterns == pattern))
            seen = [k for k in range(len(parents)) if pattern >> k & 1]
            unseen = tuple(k + 1 for k in range(len(parents)) if not pattern >> k & 1)
            members = [*parents[seen].tolist(), child]
            sizes = tuple(len(self.domains[member]) for member in members)
            table = self._log_table(child, unseen)
            terms[rows] = table[np.ravel_multi_index(tuple(codes[members][:, rows]), sizes)]
        return terms

    def probabilities(self, codes: np.ndarray) -> np.ndarray:
        """Class probabilities (N, C) of records with codes (n, N), -1 for what was never seen."""
        evidence = np.zeros((codes.shape[1], len(self.class_counts)))
        for child in range(len(self.domains)):
            evidence += self.terms(codes, child)
        return apply(self.calibration, self.log_prior, evidence)

    def labels(self, p: np.ndarray) -> Sequence[str]:
        """Name the most probable class of each row of p (N, C)."""
        return [self.target.levels[code] for code in np.argmax(p, axis=1)]
