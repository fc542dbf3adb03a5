"""Several structures with their tables that classify together."""

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

from bnx.classifier import Classifier
from bnx.domains import Domain
from bnx.mixing import mixed

__all__ = ["MixedClassifier", "mix_words"]


@dataclass(frozen=True)
class MixedClassifier:
    """Classifiers of the same attributes and class, and their ``weights``, which sum to 1."""

    members: tuple[Classifier, ...]
    weights: tuple[float, ...]

    @property
    def domains(self) -> tuple[Domain, ...]:
        """The attributes of all members."""
        return self.members[0].domains

    @property
    def target(self) -> Domain:
        """The class."""
        return self.members[0].target

    def probabilities(self, codes: np.ndarray) -> np.ndarray:
        """Class probabilities (N, C) of records with codes (n, N), -1 for what was never seen."""
        return mixed([member.probabilities(codes) for member in self.members], self.weights)

    def labels(self, p: np.ndarray) -> Sequence[str]:
        """Name the most probable class of each row of p (N, C)."""
        return self.members[0].labels(p)


def mix_words(names: Sequence[str], weights: Sequence[float]) -> str:
    """Say what is mixed: weights to two digits, as in ``.62 kdb2-tested + .38 tan``."""
    return " + ".join(
        f"{f'{weight:.2f}'.removeprefix('0')} {name}" for name, weight in zip(names, weights, strict=True)
    )
