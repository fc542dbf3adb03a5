"""Loops that a first run needs late, compiled ahead by a process of its own while the run begins.

A compiler of loops works on one at a time in a process. What another process has compiled is found on disk.
``python -m bnx.kernels.warming DONE`` compiles what is not on disk yet, and then makes the file DONE.
"""

import gc
import sys
from collections.abc import Callable
from pathlib import Path
from typing import Any

from numba import boolean, float64, int32, int64, uint8

from bnx.kernels.chance import expected_nats
from bnx.kernels.held_tables import held_tables
from bnx.kernels.misfits import misfits
from bnx.kernels.montecarlo import monte_carlo_tail
from bnx.kernels.posterior import calibrated_loss, calibration_sums, posteriors, slope_sums
from bnx.kernels.ranking import pack_scores, rank_sums, sort_whole
from bnx.kernels.replacing import held_weights, present_loss, replace_family, replaced_savings
from bnx.kernels.scoring import add_terms, tempered_losses
from bnx.kernels.smoothing import drop_parent, ratio_tables, smoothed_tables
from bnx.kernels.tallying import tally

__all__ = ["LATE", "compile_late"]

_WHOLE, _REAL, _TRUE, _CLASSES = int64[::1], float64[::1], boolean[::1], uint8[::1]
_CODES, _COUNTS, _WHOLES, _REALS = uint8[:, ::1], int32[:, ::1], int64[:, ::1], float64[:, ::1]

LATE: tuple[tuple[Callable[..., Any], tuple[Any, ...]], ...] = (
    (
        held_tables,
        (_CODES, _WHOLE, int64, _WHOLES, _WHOLES, _WHOLES, _WHOLE, float64, _WHOLE, _WHOLE, _REAL),
    ),
    (held_weights, (_CODES, _WHOLE, _WHOLE, _WHOLES, _WHOLES, _WHOLE, _WHOLE, _REAL, _REALS, _REALS)),
    (present_loss, (_WHOLE, _REALS, _REAL, _REAL)),
    (
        replaced_savings,
        (_CODES, _WHOLE, _WHOLE, _WHOLES, _WHOLES, _WHOLE, _WHOLE, _REAL, _REALS, _REAL, _REAL, _WHOLE, float64, _REAL),
    ),
    (replace_family, (_CODES, _WHOLE, _WHOLE, _WHOLES, _WHOLES, _WHOLE, _WHOLE, _REAL, _REALS)),
    (misfits, (_CODES, _WHOLE, _WHOLE, _REALS, _WHOLES, _WHOLES, _REAL)),
    (ratio_tables, (_COUNTS, _WHOLE, _WHOLES, _WHOLE, _WHOLE, _REALS, _TRUE, _WHOLE, _REALS)),
    (
        add_terms,
        (_CODES, _COUNTS, _TRUE, _WHOLES, _WHOLES, _WHOLE, _WHOLE, _WHOLE, _REALS, int64, int64, _REALS),
    ),
    (tempered_losses, (_REALS, _REAL, _CLASSES, _REAL, _REALS)),
    (calibration_sums, (_REALS, _REALS, _CLASSES, _REAL, float64, _REAL, _REALS)),
    (calibrated_loss, (_REALS, _REALS, float64, float64, _REAL, _CLASSES, _REAL)),
    (drop_parent, (_COUNTS, _WHOLE, _WHOLES, _WHOLE, _WHOLE, _WHOLE, _WHOLE, _COUNTS)),
    (posteriors, (_REALS, _REALS, float64, float64, _REAL, _REALS)),
    (tally, (_REALS, int64, int64, _CLASSES, _WHOLES, _REAL)),
    (slope_sums, (_REALS, int64, int64, _CLASSES, float64, _REAL)),
    (pack_scores, (_REALS, int64, int64, _CLASSES, int64, _WHOLE)),
    (sort_whole, (_WHOLE,)),
    (rank_sums, (_WHOLE, _REAL, _REAL)),
    (expected_nats, (_COUNTS, int64, int64)),
    (monte_carlo_tail, (_COUNTS, int64, int64, _REAL, int64, int64)),
    (smoothed_tables, (_COUNTS, _WHOLE, _REALS, _TRUE, _REALS)),
)
"""Loops and the types that a run on up to 256 levels calls them with, in the order to compile them in."""


def compile_late(done: Path) -> None:
    """Compile everything that is not on disk, and note in the file ``done`` that it is."""
    for loop, types in LATE:
        loop.compile(types)  # type: ignore[attr-defined]  # a compiled loop, not a plain function
    done.touch()


if __name__ == "__main__":
    gc.disable()  # a process this short leaves nothing worth looking for
    compile_late(Path(sys.argv[1]))
