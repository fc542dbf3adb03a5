"""Clocks: several tasks side by side in one run, and what a figure is made of."""

import os
import platform
import resource
import time
from collections.abc import Callable, Mapping, Sequence
from importlib.metadata import version
from pathlib import Path
from statistics import median
from typing import Any

__all__ = ["Figures", "machine", "processors", "side_by_side", "spread"]

Figures = dict[str, Any]
PACKAGES = ("numpy", "numba", "pyarrow", "scipy", "pandas", "scikit-learn")
NOTABLE = {"avx2": "AVX2", "avx512_vpopcntdq": "AVX-512 with population count"}


def side_by_side(tasks: Mapping[str, Callable[[], object]], runs: int) -> dict[str, Figures]:
    """Run every task once per round, so that what else the machine does falls on all of them alike."""
    found: dict[str, list[tuple[float, float]]] = {name: [] for name in tasks}
    for _ in range(runs):
        for name, task in tasks.items():
            wall, processor = time.perf_counter(), _processor()
            task()
            found[name].append((time.perf_counter() - wall, _processor() - processor))
    return {name: spread([row[0] for row in rows], [row[1] for row in rows]) for name, rows in found.items()}


def spread(wall: Sequence[float], processor: Sequence[float], times: float = 1.0) -> Figures:
    """Give the median, the least and the most seconds, and the median over all processors, each ``times`` as long."""
    return {
        "seconds": times * median(wall),
        "least": times * min(wall),
        "most": times * max(wall),
        "processor": times * median(processor),
        "runs": len(wall),
    }


def _processor() -> float:
    own, children = resource.getrusage(resource.RUSAGE_SELF), resource.getrusage(resource.RUSAGE_CHILDREN)
    return own.ru_utime + own.ru_stime + children.ru_utime + children.ru_stime


def processors() -> int:
    """Count the processors that this process may use."""
    return len(os.sched_getaffinity(0)) if hasattr(os, "sched_getaffinity") else os.cpu_count() or 1


def machine() -> str:
    """Name the processor and what runs on it, in one line."""
    packages = ", ".join(f"{name} {version(name)}" for name in PACKAGES)
    return (
        f"{_processor_name()}, {processors()} processors, {memory() / 2**30:.0f} GiB, {platform.system()}, Python "
        f"{platform.python_version()}, {packages}"
    )


def memory() -> int:
    """Give the bytes of memory that the machine has."""
    return os.sysconf("SC_PAGE_SIZE") * os.sysconf("SC_PHYS_PAGES")


def _processor_name() -> str:
    information = Path("/proc/cpuinfo")
    lines = information.read_text(encoding="utf-8").splitlines() if information.exists() else []
    parts = [line.partition(":") for line in lines]
    fields = {name.strip(): value.strip() for name, _, value in parts}
    notable = ", ".join(words for flag, words in NOTABLE.items() if flag in fields.get("flags", "").split())
    name = fields.get("model name", platform.processor() or "unknown processor")
    return f"{name} {platform.machine()}" + (f" ({notable})" if notable else "")
