"""Which of several structures to take: the fewest edges among those that are not credibly worse than the best."""

from collections.abc import Sequence

import numpy as np

from bnx.paired import Chances, bayesian_t
from bnx.structure import Structure

__all__ = ["LIKELY", "apart", "chances_of", "pick", "region_of"]

LIKELY = 0.5


def region_of(losses: Sequence[float]) -> float:
    """Width in bits of the region of practical equivalence: .01, or 5 % of the best log loss if that is less."""
    return min(0.01, 0.05 * min(losses))


def apart(losses: np.ndarray, others: np.ndarray) -> np.ndarray:
    """Subtract fold means; infinite minus infinite is no difference that could be judged."""
    with np.errstate(invalid="ignore"):
        return np.asarray(losses - others)


def pick(
    losses: np.ndarray, structures: Sequence[Structure], means: Sequence[float], folds: int
) -> tuple[int, int, Chances]:
    """Pick the structure with fewest edges whose chance of being worse than the best by the region is below .5.

    Of structures that are the same but for their name, the first one asked for stands for all.
    losses: (structures, folds) mean log losses in bits; means: of each structure.

    Returns:
        The best, the pick, and the chances of the pick against the best.
    """
    best = int(np.argmin(means))
    region = region_of(means)
    chances = [chances_of(row, losses[best], folds, region) for row in losses]
    able = [s for s in range(len(structures)) if s == best or chances[s].worse < LIKELY]
    first = {structures[s].what_it_says: s for s in reversed(able)}
    chosen = min(first.values(), key=lambda s: (len(structures[s].edges), means[s], s))
    return best, chosen, chances[chosen]


def chances_of(losses: np.ndarray, others: np.ndarray, folds: int, region: float) -> Chances:
    """Give the chances that fold losses are better, equivalent or worse than others; infinite ones are worse."""
    differences = apart(losses, others)
    if not np.isfinite(differences).all():
        return Chances(0.0, 0.0, 1.0)
    return bayesian_t(differences, folds, region)
