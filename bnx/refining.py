"""Make the p of doubtful pairs exact: near the threshold, where the sample is too sparse for a chi-square tail."""

from collections.abc import Sequence
from typing import NamedTuple

import numpy as np

from bnx.engines import LocalEngine
from bnx.exact import exact_tail
from bnx.families import Request, for_each_family
from bnx.independence import Statistics, Tested, p_values
from bnx.trainings import Training

__all__ = ["REPORTED", "Doubt", "refined"]


class Doubt(NamedTuple):
    """The p-values by moments that are worth an exact test."""

    low: float
    high: float


REPORTED = Doubt(0.0, 0.02)  # above, the two agree within a quarter


def refined(
    engine: LocalEngine,
    trainings: Sequence[Training],
    requests: Sequence[Request],
    stats: Statistics,
    test: str,
    unsure: Doubt,
) -> Tested:
    """Test P pairs; replace p by moments with the exact p wherever it is in doubt and all strata are 2 x 2.

    requests: of each of the P pairs, its training set and members, the pair last.
    """
    tested = p_values(stats, test)
    chosen = tested.in_doubt(stats, unsure.low, unsure.high)
    if not len(chosen):
        return tested
    wanted = [requests[k] for k in chosen.tolist()]

    def use(counts: np.ndarray, sizes: tuple[int, ...]) -> float:
        return float(exact_tail(counts.reshape(-1, sizes[-2] * sizes[-1]), sizes[-2], sizes[-1]))

    found = for_each_family(engine, trainings, wanted, use)
    return tested.made_exact(chosen, np.array([found[request] for request in wanted]))
