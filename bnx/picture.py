"""What a drawing shows of a structure: chips for attributes, arrows between them, and the evidence on each."""

import math
from collections.abc import Sequence
from dataclasses import dataclass
from typing import Literal, get_args

from bnx.errors import StructureError

__all__ = ["MANY_ARROWS", "MANY_CHIPS", "Arrow", "Chip", "Picture", "Showing", "Verdict", "showing"]

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

    ``bits``: shared by the two given the class. ``gain``, ``gain_interval``: held-out bits per row this one edge is
    worth, and its 95 % interval; None where no folds were scored. ``by_blanks``: most of the bits come from blank
    cells.

    Raises:
        StructureError: the bits are not a finite number, or the verdict is unknown.
    """

    parent: int
    child: int
    bits: float
    verdict: Verdict = "not judged"
    gain: float | None = None
    gain_interval: tuple[float, float] | None = None
    by_blanks: bool = False

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
MANY_CHIPS = 150
"""Of more attributes than this only those of the strongest arrows are drawn, unless everything is asked for."""


@dataclass(frozen=True)
class Showing:
    """Which arrows and chips of a picture are drawn, and sentences on those that are not (empty when all are)."""

    arrows: tuple[Arrow, ...]
    chips: tuple[int, ...]
    left_out: str
    chips_left_out: str


def showing(
    picture: Picture, least_bits: float = 0.0, everything: bool = False, least_gain: float | None = None
) -> Showing:
    """Choose what to draw: arrows of at least ``least_bits`` bits and, among very many, only the clear gains.

    With ``least_gain``, arrows of less held-out gain (bits per row) are left out, and so are those whose gain is not
    known, since nothing says that they reach it.

    Where none of many is a clear gain, the strongest are drawn, since a frame without arrows would claim independence.
    Among very many attributes those are drawn that the strongest arrows join, clear gains before others; without
    arrows, those that share most bits with the class.
    """
    strong, reasons = _strong(picture.arrows, least_bits, least_gain)
    crowded = not everything and len(picture.chips) > MANY_CHIPS
    drawn = strong
    if crowded:
        drawn = _strongest(strong)
        reasons += ["weaker ones"] if len(drawn) < len(strong) else []
    elif not everything and len(strong) > MANY_ARROWS:
        drawn = tuple(arrow for arrow in strong if arrow.verdict == "gains") or _strongest(strong)
        kind = "those that are not a clear gain" if drawn and drawn[0].verdict == "gains" else "weaker ones"
        reasons += [kind] if len(drawn) < len(strong) else []
    chips = _joined(picture, drawn) if crowded else tuple(range(len(picture.chips)))
    number = f"{len(drawn):,} of {len(picture.arrows):,} arrows drawn"
    return Showing(
        drawn,
        chips,
        f"{number}; left out: {_series(reasons)}" if reasons else "",
        _sentence(picture, drawn, chips) if crowded else "",
    )


def _strong(
    arrows: tuple[Arrow, ...], least_bits: float, least_gain: float | None
) -> tuple[tuple[Arrow, ...], list[str]]:
    """Take the arrows of enough bits and of enough held-out gain, and say which are left out."""
    strong = tuple(arrow for arrow in arrows if arrow.bits >= least_bits)
    reasons = [f"those under {least_bits:g} bits"] if len(strong) < len(arrows) else []
    if least_gain is None:
        return strong, reasons
    helpful = tuple(arrow for arrow in strong if arrow.gain is not None and arrow.gain >= least_gain)
    if any(arrow.gain is not None and arrow.gain < least_gain for arrow in strong):
        reasons.append(f"those that gain less than {least_gain:g} bits on held-out rows")
    if any(arrow.gain is None for arrow in strong):
        reasons.append("those not judged on held-out rows")
    return helpful, reasons


def _strongest(arrows: Sequence[Arrow]) -> tuple[Arrow, ...]:
    """Take all clear gains, filled up with others to 40 arrows, while they join few enough attributes; keep the order.

    Clear gains go first, then arrows of most bits.
    """
    ranked = sorted(range(len(arrows)), key=lambda number: (arrows[number].verdict != "gains", -arrows[number].bits))
    most = max(MANY_ARROWS, sum(arrow.verdict == "gains" for arrow in arrows))
    ends: set[int] = set()
    taken = set()
    for number in ranked[:most]:
        more = ends | {arrows[number].parent, arrows[number].child}
        if len(more) > MANY_CHIPS:
            break
        ends = more
        taken.add(number)
    return tuple(arrow for number, arrow in enumerate(arrows) if number in taken)


def _series(reasons: Sequence[str]) -> str:
    return " and ".join(filter(None, (", ".join(reasons[:-1]), reasons[-1])))


def _joined(picture: Picture, arrows: Sequence[Arrow]) -> tuple[int, ...]:
    """List the chips that arrows join; without arrows those that share most bits with the class."""
    if arrows:
        return tuple(sorted({end for arrow in arrows for end in (arrow.parent, arrow.child)}))
    strongest = sorted(range(len(picture.chips)), key=lambda place: -picture.chips[place].bits)
    return tuple(sorted(strongest[:MANY_CHIPS]))


def _sentence(picture: Picture, arrows: Sequence[Arrow], chips: Sequence[int]) -> str:
    which = "those that these arrows join" if arrows else f"those that share most bits with {picture.target}"
    return f"{len(chips):,} of {len(picture.chips):,} attributes drawn: {which}"
