"""How loops are compiled, once for each machine and user.

A loop that calls one of numpy's own functions compiles that function too, with all that it may raise: a sort, a
``where`` or a sum along an axis takes seconds, where a plain loop takes a tenth. Hence the plain loops.
"""

from collections.abc import Callable, Mapping
from typing import Any, TypeVar

from numba import njit

__all__ = ["inlined", "kernel", "part"]

Loop = TypeVar("Loop", bound=Callable[..., Any])

_BOTH: Mapping[str, Any] = {"nogil": True, "error_model": "numpy", "no_cfunc_wrapper": True}


def kernel(loop: Loop) -> Loop:
    """Compile what Python calls; it is kept on disk. Dividing by zero gives infinity or NaN, as numpy does."""
    return _compiled(loop, {**_BOTH, "cache": True})


def part(loop: Loop) -> Loop:
    """Compile what only kernels call: it becomes part of each of them, and Python cannot reach it."""
    return _compiled(loop, {**_BOTH, "no_cpython_wrapper": True})


def inlined(loop: Loop) -> Loop:
    """Compile a part anew wherever it is called, which is quicker for a few lines in a small kernel."""
    return _compiled(loop, {**_BOTH, "inline": "always"})


def _compiled(loop: Loop, options: Mapping[str, Any]) -> Loop:
    compile_it: Callable[..., Any] = njit
    compiled: Loop = compile_it(**options)(loop)
    return compiled
