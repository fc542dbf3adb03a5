"""What a table holds before anything is learnt: types, levels, blanks, what gives the class away."""

from dataclasses import asdict, dataclass
from typing import Any

import numpy as np

from bnx.cells import stretches
from bnx.coding import Coded
from bnx.domains import Domain
from bnx.text import aligned, count_of, fixed, quoted

__all__ = ["ColumnProfile", "LevelShare", "Profile", "profile"]

RARE_ROWS = 10
GIVEAWAY = 0.9


@dataclass(frozen=True)
class LevelShare:
    """A class level, its rows and its share of all rows."""

    level: str
    rows: int
    share: float


@dataclass(frozen=True)
class ColumnProfile:
    """One attribute.

    ``kind`` is ``text`` or ``numeric``; ``levels`` counts the regular levels (fine bins of a numeric column),
    ``blanks`` the blank cells, ``rare`` the text levels with fewer than 10 rows. ``most`` is the most frequent level
    and ``most_share`` its share of the cells that are not blank; ``span`` holds the outermost fine cut points of a
    numeric column. ``bits`` are those shared with the class, corrected for chance and not below 0; ``share`` is their
    part of the bits of the class itself.
    """

    name: str
    kind: str
    levels: int
    blanks: int
    rare: int
    most: str
    most_share: float
    span: tuple[float, ...]
    bits: float
    share: float

    @property
    def gives_away(self) -> bool:
        """Tell whether the column holds 90 % or more of the bits of the class."""
        return self.share >= GIVEAWAY


@dataclass(frozen=True)
class Profile:
    """A table in figures: rows, class, attributes, columns left out and why, duplicates, warnings."""

    rows: int
    rows_read: int
    duplicates: int
    target: str
    target_bits: float
    classes: tuple[LevelShare, ...]
    columns: tuple[ColumnProfile, ...]
    left_out: tuple[tuple[str, str], ...]
    warnings: tuple[str, ...]

    @property
    def giveaways(self) -> tuple[str, ...]:
        """Names of the attributes that hold nearly all bits of the class."""
        return tuple(column.name for column in self.columns if column.gives_away)

    def to_dict(self) -> dict[str, Any]:
        """Give all figures as plain values for JSON."""
        plain = asdict(self)
        plain["class"] = plain.pop("target")
        plain["class_bits"] = plain.pop("target_bits")
        plain["attributes"] = [
            {**figures, "gives_away": column.gives_away}
            for figures, column in zip(plain.pop("columns"), self.columns, strict=True)
        ]
        plain["left_out"] = [{"name": name, "reason": reason} for name, reason in self.left_out]
        return plain

    def __str__(self) -> str:
        """Lay the profile out for a terminal."""
        shares = ", ".join(f"{item.level} {100 * item.share:.3g} %" for item in self.classes)
        numeric = sum(column.kind == "numeric" for column in self.columns)
        lines = [
            f"{count_of(self.rows, 'row')}   class {self.target}: {shares}   "
            f"{count_of(len(self.columns), 'attribute')} ({numeric} numeric)",
            "",
            aligned(HEADER, [_cells(column) for column in self.columns]),
            "",
        ]
        lines += [f"left out: {name} ({reason})" for name, reason in self.left_out]
        lines += [f"warning: {warning}" for warning in self.warnings]
        if self.giveaways:
            lines.append(
                f"warning: the class is nearly given away by {quoted(self.giveaways)}; "
                "make sure that this is known before the class is"
            )
        return "\n".join(lines).rstrip()


HEADER = (
    "attribute",
    "type",
    "levels",
    "blank",
    "rare",
    "class bits",
    "share",
    "most frequent level, or outermost cuts",
)


def profile(coded: Coded) -> Profile:
    """Describe a coded table."""
    table = coded.table
    target = table.schema.target
    counts = [
        _crosstab(codes, table.target, len(domain), len(target))
        for domain, codes in zip(table.schema.attributes, table.codes, strict=True)
    ]
    classes = counts[0].sum(axis=0)
    rows = len(table.target)
    bits = _entropy(classes)
    columns = tuple(_column(domain, own, bits) for domain, own in zip(table.schema.attributes, counts, strict=True))
    return Profile(
        rows,
        coded.rows_read,
        coded.duplicates,
        target.name,
        bits,
        tuple(
            LevelShare(name, int(count), int(count) / rows) for name, count in zip(target.levels, classes, strict=True)
        ),
        columns,
        tuple((item.name, item.reason) for item in coded.left_out),
        coded.warnings,
    )


def _column(domain: Domain, counts: np.ndarray, target_bits: float) -> ColumnProfile:
    """Describe one attribute from its counts (levels, C)."""
    totals = counts.sum(axis=1)
    regular = len(domain) - domain.blank
    most = int(totals[:regular].argmax()) if regular else 0
    bits = _shared_bits(counts)
    return ColumnProfile(
        domain.name,
        "numeric" if domain.numeric else "text",
        regular,
        int(totals[regular:].sum()),
        0 if domain.numeric else int((totals[:regular] < RARE_ROWS).sum()),
        domain.levels[most],
        float(totals[most] / max(int(totals[:regular].sum()), 1)),
        (domain.cuts[0], domain.cuts[-1]) if domain.cuts else (),
        bits,
        bits / target_bits,
    )


def _crosstab(codes: np.ndarray, target: np.ndarray, levels: int, classes: int) -> np.ndarray:
    """Count rows per level and class, int64 (levels, C)."""
    counts = np.zeros(levels * classes, np.int64)
    for rows in stretches(len(codes)):
        counts += np.bincount(codes[rows].astype(np.int64) * classes + target[rows], minlength=len(counts))
    return counts.reshape(levels, classes)


def _shared_bits(counts: np.ndarray) -> float:
    """Mutual information in bits, less what chance alone is expected to show, at least 0.

    Source: Miller 1955 (the correction of degrees of freedom over 2 N).
    """
    rows = counts.sum()
    plain = _entropy(counts.sum(axis=1)) + _entropy(counts.sum(axis=0)) - _entropy(counts.ravel())
    used = [np.count_nonzero(counts.sum(axis=axis)) for axis in (0, 1)]
    return float(max(plain - (used[0] - 1) * (used[1] - 1) / (2 * rows * np.log(2)), 0.0))


def _entropy(counts: np.ndarray) -> float:
    """Entropy in bits of counts."""
    shares = counts[counts > 0] / counts.sum()
    return float(-(shares * np.log2(shares)).sum())


def _cells(column: ColumnProfile) -> tuple[str, ...]:
    """Format one line of the table."""
    return (
        column.name,
        column.kind,
        f"{column.levels:,}",
        f"{column.blanks:,}" if column.blanks else "",
        f"{column.rare:,}" if column.rare else "",
        fixed(column.bits),
        f"{100 * column.share:.0f} %",
        f"{column.span[0]:g} to {column.span[1]:g}"
        if column.span
        else f"{column.most} ({100 * column.most_share:.0f} %)",
    )
