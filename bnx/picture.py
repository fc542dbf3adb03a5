"""What a drawing shows of a structure: chips for attributes, arrows between them, and the evidence on each."""

import math
from dataclasses import dataclass
from typing import Literal, get_args

from bnx.errors import StructureError

__all__ = ["MANY_ARROWS", "Arrow", "Chip", "Picture", "Showing", "Verdict", "showing"]

Verdict = Literal["gains", "undecided", "loses", "not judged"]


@dataclass(frozen=True)
class Chip:
    """One attribute: its name, how many levels it has, and the bits it shares with the class.

    Raises:
        StructureError: the bits are not a finite number.
    """

    name: str
    levels: int
    bits: float

    def __post_init__(self) -> None:
        """Refuse bits that cannot be drawn."""
        if not math.isfinite(self.bits):
            raise StructureError(
                f"attribute {self.name!r} shares {self.bits} bits with the class; a finite number is needed"
            )


@dataclass(frozen=True)
class Arrow:
    """One dependence between attributes, given by their places among the chips.

    ``bits``: shared by the two given the class. ``gain``, ``gain_se``: held-out bits per row this one edge is worth,
    with its standard error; None where no folds were scored.

    Raises:
        StructureError: the bits are not a finite number, or the verdict is unknown.
    """

    parent: int
    child: int
    bits: float
    verdict: Verdict = "not judged"
    gain: float | None = None
    gain_se: float | None = None

    def __post_init__(self) -> None:
        """Refuse what cannot be drawn."""
        where = f"arrow {self.parent} to {self.child}"
        if not math.isfinite(self.bits):
            raise StructureError(f"{where} carries {self.bits} bits; a finite number is needed")
        if self.verdict not in get_args(Verdict):
            raise StructureError(f"{where} has the verdict {self.verdict!r}; known: {', '.join(get_args(Verdict))}")


@dataclass(frozen=True)
class Picture:
    """Everything one drawing shows; the class is a parent of every chip and has no arrow of its own.

    Raises:
        StructureError: there are no chips, or an arrow does not join two different ones, or comes twice.
    """

    title: str
    target: str
    chips: tuple[Chip, ...]
    arrows: tuple[Arrow, ...] = ()
    subtitle: str = ""

    def __post_init__(self) -> None:
        """Refuse arrows that lead nowhere."""
        if not self.chips:
            raise StructureError(f"the picture {self.title!r} has no attributes; at least one is needed")
        seen = set()
        for arrow in self.arrows:
            ends = (arrow.parent, arrow.child)
            if not all(0 <= end < len(self.chips) for end in ends) or arrow.parent == arrow.child or ends in seen:
                raise StructureError(
                    f"arrow {arrow.parent} to {arrow.child} of {self.title!r} must join two different ones of"
                    f" {len(self.chips)} attributes, once"
                )
            seen.add(ends)


MANY_ARROWS = 40
"""Above so many arrows only the clear gains are drawn, unless everything is asked for."""


@dataclass(frozen=True)
class Showing:
    """Which arrows of a picture are drawn, and a sentence on those that are not (empty when none is left out)."""

    arrows: tuple[Arrow, ...]
    left_out: str


def showing(picture: Picture, least_bits: float = 0.0, everything: bool = False) -> Showing:
    """Choose the arrows to draw: those of at least ``least_bits`` bits and, among very many, only the clear gains."""
    strong = tuple(arrow for arrow in picture.arrows if arrow.bits >= least_bits)
    thin = not everything and len(strong) > MANY_ARROWS
    drawn = tuple(arrow for arrow in strong if arrow.verdict == "gains") if thin else strong
    reasons = [f"those under {least_bits:g} bits"] if len(strong) < len(picture.arrows) else []
    reasons += ["those that are not a clear gain"] if len(drawn) < len(strong) else []
    if not reasons:
        return Showing(drawn, "")
    return Showing(drawn, f"{len(drawn):,} of {len(picture.arrows):,} arrows drawn; left out: {' and '.join(reasons)}")
