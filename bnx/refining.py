"""Make the p of doubtful pairs exact: near the threshold, where the sample is too sparse for a chi-square tail."""

from collections.abc import Sequence

import numpy as np

from bnx.engines import LocalEngine
from bnx.exact import exact_tail
from bnx.families import Request, for_each_family
from bnx.independence import Statistics, Tested
from bnx.trainings import Training

__all__ = ["refined"]


def refined(
    engine: LocalEngine,
    trainings: Sequence[Training],
    requests: Sequence[Request],
    stats: Statistics,
    tested: Tested,
    low: float = 0.0,
    high: float = 0.02,
) -> Tested:
    """Replace p by moments with the exact p wherever it lies from ``low`` to ``high`` and all strata are 2 x 2.

    requests: of each of the P pairs, its training set and members, the pair last.
    """
    chosen = tested.in_doubt(stats, low, high)
    if not len(chosen):
        return tested
    wanted = [requests[k] for k in chosen.tolist()]

    def use(counts: np.ndarray, sizes: tuple[int, ...]) -> float:
        return float(exact_tail(counts.reshape(-1, sizes[-2] * sizes[-1]), sizes[-2], sizes[-1]))

    found = for_each_family(engine, trainings, wanted, use)
    return tested.made_exact(chosen, np.array([found[request] for request in wanted]))
