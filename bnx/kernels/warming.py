"""Loops that a first run needs late, compiled ahead by a process of its own while the run begins.

A compiler of loops works on one at a time in a process. What another process has compiled is found on disk.
``python -m bnx.kernels.warming`` compiles; it ends at once where everything is on disk already.
"""

import os
from collections.abc import Callable
from pathlib import Path
from typing import Any

import numba
from numba import boolean, float64, int32, int64, uint8

from bnx import KERNELS
from bnx.kernels.chance import expected_nats
from bnx.kernels.counting import count_cells
from bnx.kernels.montecarlo import monte_carlo_tail
from bnx.kernels.ranking import rank_sums, sort_whole
from bnx.kernels.scoring import add_terms, calibrated_loss, smoothed_tables, tempered_losses

__all__ = ["DONE", "LATE", "compile_late"]

DONE = Path(os.environ["NUMBA_CACHE_DIR"], f"late-{KERNELS}-{numba.__version__}")
"""A file that says that all is compiled."""

_WHOLE, _REAL, _TRUE = int64[::1], float64[::1], boolean[::1]
_CODES, _COUNTS, _REALS = uint8[:, ::1], int32[:, ::1], float64[:, ::1]
_SCORED = (_REAL, float64, float64, _REAL, uint8[::1], _REAL)

LATE: tuple[tuple[Callable[..., Any], tuple[Any, ...]], ...] = (
    (smoothed_tables, (_COUNTS, _WHOLE, _REAL, _TRUE, _REALS)),
    (tempered_losses, (_REALS, _REAL, uint8[::1], _REAL, _REALS)),
    (
        add_terms,
        (
            *(_CODES, _COUNTS, _TRUE, int64[:, ::1], int64[:, ::1], _WHOLE, _WHOLE),
            *(_REALS, _WHOLE, _WHOLE, int64, int64, float64[:, :, ::1]),
        ),
    ),
    (count_cells, (_CODES, _COUNTS, boolean, _WHOLE, _WHOLE, _WHOLE, _WHOLE, _COUNTS)),
    (calibrated_loss, (_REALS, *_SCORED)),
    (calibrated_loss, (float64[:, :], *_SCORED)),
    (sort_whole, (_WHOLE,)),
    (rank_sums, (_WHOLE, _REAL, _REAL, _REAL)),
    (expected_nats, (_COUNTS, int64, int64)),
    (monte_carlo_tail, (_COUNTS, int64, int64, _REAL, int64, int64)),
)
"""Loops and the types that a run on up to 256 levels calls them with, in the order to compile them in."""


def compile_late() -> None:
    """Compile everything that is not on disk, and note that it is."""
    for loop, types in LATE:
        loop.compile(types)  # type: ignore[attr-defined]  # a compiled loop, not a plain function
    DONE.touch()


if __name__ == "__main__":
    compile_late()
