"""Evidence of rows for each class: the sum of the log table terms of all families."""

from collections.abc import Mapping, Sequence

import numpy as np

from bnx.kernels import add_terms
from bnx.parameters import Smoothing, log_tables
from bnx.structure import Structure
from bnx.views import View

__all__ = ["Members", "add_family", "evidence", "families"]

Members = tuple[int, ...]  # parents in the order taken, then the child


def families(structure: Structure) -> tuple[Members, ...]:
    """List the members of every family of a structure, child by child."""
    return tuple((*parents, child) for child, parents in enumerate(structure.parents))


def add_family(
    codes: np.ndarray, rows: slice, view: View, members: Members, table: np.ndarray, into: Sequence[np.ndarray]
) -> None:
    """Add a family's table (cells, T) to evidence arrays (rows, T)."""
    sizes = np.array(view.sizes_of(members), dtype=np.int64)
    plain = view.all_plain(members)
    for out in into:
        add_terms(codes, view.recode, plain, np.array(members), sizes, rows.start, rows.stop, table, out)


def evidence(
    codes: np.ndarray,
    rows: slice,
    view: View,
    structures: Sequence[Structure],
    smoothings: Sequence[Sequence[Smoothing]],
    counts: Mapping[Members, np.ndarray],
) -> list[np.ndarray]:
    """Sum the log table terms (nats) of a run of rows, for each structure under each of its smoothings.

    codes: (n, N) as stored; counts: of every family, (C, cells) int32. A family that several structures share is
    smoothed once, and structures that are the same but for their name share one array.

    Returns:
        For each structure (rows, V * C), column ``v * C + c``; terms are added child by child.
    """
    classes = next(iter(counts.values())).shape[0]
    wanted = [(structure.parents, tuple(options)) for structure, options in zip(structures, smoothings, strict=True)]
    results = {key: np.zeros((rows.stop - rows.start, len(key[1]) * classes)) for key in wanted}
    for child in range(len(structures[0].parents)):
        sharing: dict[tuple[Members, tuple[Smoothing, ...]], list[np.ndarray]] = {}
        for (parents, options), result in results.items():
            sharing.setdefault(((*parents[child], child), options), []).append(result)
        for (members, options), into in sharing.items():
            table = log_tables(counts[members], view.sizes_of(members), options)
            add_family(codes, rows, view, members, table, into)
    return [results[key] for key in wanted]
