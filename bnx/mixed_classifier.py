"""Several structures with their tables that classify together."""

from collections.abc import Sequence
from dataclasses import dataclass, replace

import numpy as np

from bnx.classifier import Classifier
from bnx.domains import Domain, codes_of, together
from bnx.mixing import mixed
from bnx.rebasing import check_known
from bnx.sharpening import sharpened

__all__ = ["MixedClassifier", "mix_words"]


@dataclass(frozen=True)
class MixedClassifier:
    """Classifiers of the same class, their ``weights``, which sum to 1, and the ``sharpness`` of what they give.

    ``other_prior`` (C,): the class prior that stands in the place of the training shares, if any does.
    """

    members: tuple[Classifier, ...]
    weights: tuple[float, ...]
    sharpness: float
    other_prior: np.ndarray | None = None

    @property
    def domains(self) -> tuple[Domain, ...]:
        """The attributes of all members, each once."""
        return together(member.domains for member in self.members)

    @property
    def target(self) -> Domain:
        """The class."""
        return self.members[0].target

    @property
    def class_counts(self) -> np.ndarray:
        """Training rows of each class, (C,)."""
        return self.members[0].class_counts

    def rebased(self, prior: np.ndarray) -> "MixedClassifier":
        """Put another class prior (C,) in the place of the training shares.

        Raises:
            SettingError: the training rows of a class are none, so nothing is known of it.
        """
        check_known(self.target.levels, self.class_counts)
        return replace(self, other_prior=prior)

    def classified(self, codes: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
        """Class probabilities (N, C) of records with codes (n, N), -1 for what was never seen, and which are rough.

        A row is rough (N,) if what it lacks could be summed out only approximately in any member.

        Source: Saerens, Latinne & Decaestecker 2002 (another prior).
        """
        domains = self.domains
        found = [member.classified(codes_of(member.domains, codes, domains)) for member in self.members]
        shares = self.class_counts / self.class_counts.sum()
        p = sharpened(mixed([p for p, _ in found], self.weights), self.sharpness, shares)
        if self.other_prior is not None:
            p = p * (self.other_prior / shares)
            p /= p.sum(axis=1, keepdims=True)
        return p, np.any([rough for _, rough in found], axis=0)

    def probabilities(self, codes: np.ndarray) -> np.ndarray:
        """Class probabilities (N, C) of records with codes (n, N), -1 for what was never seen."""
        return self.classified(codes)[0]

    def labels(self, p: np.ndarray) -> Sequence[str]:
        """Name the most probable class of each row of p (N, C)."""
        return self.members[0].labels(p)


def mix_words(names: Sequence[str], weights: Sequence[float]) -> str:
    """Say what is mixed: weights to two digits, as in ``.62 kdb2-tested + .38 tan``."""
    return " + ".join(
        f"{f'{weight:.2f}'.removeprefix('0')} {name}" for name, weight in zip(names, weights, strict=True)
    )
