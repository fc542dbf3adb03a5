"""Evidence of rows for each class: the sum of the log table terms of all families."""

from collections.abc import Mapping, Sequence
from dataclasses import dataclass

import numpy as np

from bnx.kernels import add_terms
from bnx.parameters import Smoothing, log_tables
from bnx.structure import Structure
from bnx.views import View

__all__ = ["Members", "Terms", "evidence", "families", "family_terms", "terms_of"]

Members = tuple[int, ...]  # parents in the order taken, then the child
_LANES = 4  # terms are added four at a time


@dataclass(frozen=True)
class Terms:
    """The log table terms of families, and who holds them.

    ``members``, ``sizes`` (F, M), of which the first ``depths`` (F,) count; ``plain`` (F,) bool: attributes used as
    stored; ``starts`` (F,): first cell of each family in ``table`` (cells, T) nats; ``users``, from ``user_starts``
    (F + 1,) on: the holders of each family, numbered; ``holder`` (structures,): the number of each structure, the same
    for structures that differ only in name; ``width``: columns in use, the rest of T is padding.
    """

    members: np.ndarray
    sizes: np.ndarray
    depths: np.ndarray
    plain: np.ndarray
    starts: np.ndarray
    table: np.ndarray
    user_starts: np.ndarray
    users: np.ndarray
    holder: tuple[int, ...]
    recode: np.ndarray
    width: int

    def add(self, codes: np.ndarray, first: int, last: int, out: np.ndarray) -> None:
        """Add the terms of rows ``first:last`` of codes (n, N) to out (holders, last - first, T)."""
        add_terms(
            codes,
            self.recode,
            self.plain,
            self.members,
            self.sizes,
            self.depths,
            self.starts,
            self.table,
            self.user_starts,
            self.users,
            first,
            last,
            out,
        )

    def empty(self, rows: int) -> np.ndarray:
        """Make evidence of nothing, (holders, rows, T) zeros."""
        return np.zeros((max(self.holder) + 1, rows, self.table.shape[1]))


def families(structure: Structure) -> tuple[Members, ...]:
    """List the members of every family of a structure, child by child."""
    return tuple((*parents, child) for child, parents in enumerate(structure.parents))


def terms_of(
    view: View,
    structures: Sequence[Structure],
    smoothings: Sequence[Sequence[Smoothing]],
    counts: Mapping[Members, np.ndarray],
) -> Terms:
    """Smooth every family of the structures, each structure's under each of its smoothings.

    counts: of every family, (C, cells) int32. A family that several structures share is smoothed once.
    """
    wanted = [(structure.parents, tuple(options)) for structure, options in zip(structures, smoothings, strict=True)]
    number = {key: k for k, key in enumerate(dict.fromkeys(wanted))}
    sharing: dict[tuple[Members, tuple[Smoothing, ...]], list[int]] = {}
    for child in range(len(structures[0].parents)):
        for (parents, options), k in number.items():
            sharing.setdefault(((*parents[child], child), options), []).append(k)
    tables = [log_tables(counts[members], view.sizes_of(members), options) for members, options in sharing]
    return family_terms(
        view, [members for members, _ in sharing], tables, list(sharing.values()), tuple(number[key] for key in wanted)
    )


def family_terms(
    view: View,
    families_: Sequence[Members],
    tables: Sequence[np.ndarray],
    users: Sequence[Sequence[int]],
    holder: tuple[int, ...],
) -> Terms:
    """Lay out tables (cells, T) of families for a pass over rows; users: the holders of each family."""
    most = max(map(len, families_))
    sizes = [view.sizes_of(members) for members in families_]
    width = tables[0].shape[1]
    ends = np.cumsum([len(table) for table in tables])
    laid = np.zeros((int(ends[-1]), -(-width // _LANES) * _LANES))
    np.concatenate(tables, out=laid[:, :width])
    return Terms(
        np.array([(*members, *(0,) * (most - len(members))) for members in families_]),
        np.array([(*own, *(1,) * (most - len(own))) for own in sizes]),
        np.array([len(members) for members in families_]),
        np.array([view.all_plain(members) for members in families_]),
        np.concatenate([[0], ends[:-1]]),
        laid,
        np.concatenate([[0], np.cumsum([len(own) for own in users])]),
        np.concatenate([np.array(own) for own in users]),
        holder,
        view.recode,
        width,
    )


def evidence(
    codes: np.ndarray,
    rows: slice,
    view: View,
    structures: Sequence[Structure],
    smoothings: Sequence[Sequence[Smoothing]],
    counts: Mapping[Members, np.ndarray],
) -> list[np.ndarray]:
    """Sum the log table terms (nats) of a run of rows, for each structure under each of its smoothings.

    codes: (n, N) as stored; every structure has as many smoothings, V. Structures that are the same but for their name
    share one array.

    Returns:
        For each structure (rows, V * C), column ``v * C + c``; terms are added child by child.
    """
    terms = terms_of(view, structures, smoothings, counts)
    out = terms.empty(rows.stop - rows.start)
    terms.add(codes, rows.start, rows.stop, out)
    shared = [one[:, : terms.width] for one in out]
    return [shared[k] for k in terms.holder]
