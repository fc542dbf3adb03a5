"""A structure with its tables: from coded records to class probabilities."""

from collections.abc import Sequence
from dataclasses import dataclass
from functools import cached_property

import numpy as np

from bnx.calibrating import Calibration, apply, without_evidence
from bnx.domains import Domain
from bnx.parameters import Smoothing, log_tables
from bnx.structure import Structure
from bnx.summing_out import observed_terms

__all__ = ["Classifier"]


@dataclass(frozen=True)
class Classifier:
    """Everything needed to score a record.

    ``counts``: per attribute, training rows (C, levels of parents in the order taken..., levels of the child) int32;
    ``class_counts`` (C,) int64; ``other_prior`` (C,): shares of the classes where new records come from, None if they
    are those of the training rows; ``dropped``: names of attributes that were left out, which are none of ``domains``.
    """

    domains: tuple[Domain, ...]
    target: Domain
    structure: Structure
    counts: tuple[np.ndarray, ...]
    class_counts: np.ndarray
    smoothing: Smoothing
    calibration: Calibration
    other_prior: np.ndarray | None = None
    dropped: tuple[str, ...] = ()

    @property
    def log_prior(self) -> np.ndarray:
        """Log share of each class (nats), (C,)."""
        shares = self.class_counts / self.class_counts.sum() if self.other_prior is None else self.other_prior
        with np.errstate(divide="ignore"):
            return np.asarray(np.log(shares))

    @property
    def free_parameters(self) -> int:
        """Count the probabilities that are free to choose, those of the class included."""
        tables = sum(table.size // table.shape[-1] * (table.shape[-1] - 1) for table in self.counts)
        return int(tables) + len(self.class_counts) - 1

    def table(self, child: int) -> np.ndarray:
        """Smoothed probabilities of one attribute, shaped like its counts."""
        return np.asarray(np.exp(np.moveaxis(self.log_table(child), -1, 0)))

    @cached_property
    def _log_tables(self) -> dict[int, np.ndarray]:
        """Log tables made so far, by attribute."""
        return {}

    def log_table(self, child: int) -> np.ndarray:
        """Log of the smoothed probabilities of one attribute, (levels of its parents..., its own levels, C)."""
        if child not in self._log_tables:
            counts = self.counts[child]
            logs = log_tables(counts.reshape(len(counts), -1), counts.shape[1:], [self.smoothing])
            self._log_tables[child] = logs.reshape(*counts.shape[1:], len(counts))
        return self._log_tables[child]

    def terms(self, codes: np.ndarray, child: int) -> np.ndarray:
        """Log table terms (nats) of one attribute, (N, C), for codes (n, N) with -1 for what was not observed.

        A record in which the attribute or one of its parents was not observed has none here.
        """
        members = [*self.structure.parents[child], child]
        terms = np.zeros((codes.shape[1], len(self.class_counts)))
        known = np.flatnonzero((codes[members] >= 0).all(axis=0))
        terms[known] = self.log_table(child)[tuple(codes[members][:, known])]
        return terms

    def evidence(self, codes: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
        """Log probability (nats) of what was observed of records with codes (n, N), -1 for what was not, (N, C).

        What was not observed is summed out. Second, the records (N,) bool for which that is an approximation.
        """
        parents, sizes = dict(enumerate(self.structure.parents)), [len(domain) for domain in self.domains]
        evidence, rough = observed_terms(codes, parents, sizes, self.log_table, len(self.class_counts))
        for child in range(len(self.domains)):
            evidence += self.terms(codes, child)
        return evidence, rough

    def probabilities(self, codes: np.ndarray) -> np.ndarray:
        """Class probabilities (N, C) of records with codes (n, N), -1 for what was not observed.

        Calibration is of evidence. A record of which nothing was observed gets the class prior as it is.
        """
        return self.classified(codes)[0]

    def classified(self, codes: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
        """Class probabilities as ``probabilities`` gives them, and the records (N,) bool where they are approximate."""
        evidence, rough = self.evidence(codes)
        p = apply(self.calibration, self.log_prior, evidence)
        p[(codes < 0).all(axis=0)] = without_evidence(self.calibration, self.log_prior)
        return p, rough

    def labels(self, p: np.ndarray) -> Sequence[str]:
        """Name the most probable class of each row of p (N, C)."""
        return [self.target.levels[code] for code in np.argmax(p, axis=1)]
