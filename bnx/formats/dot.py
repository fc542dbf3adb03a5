"""A picture as DOT text: the class plugged into a frame, a chip per attribute, an arrow per dependence."""

import math
from collections.abc import Iterable, Mapping, Sequence
from dataclasses import dataclass
from itertools import pairwise

from bnx.dot_text import cell, cut, hint, lines_of, width_of
from bnx.layers import layers, parents_first, rows
from bnx.palette import PALETTES, Theme
from bnx.picture import Arrow, Chip, Picture, Showing, Verdict, showing
from bnx.text import bracketed, count_of

__all__ = ["dot_source", "pen_width"]

MOST_NUMBERED = 60
"""Above so many arrows they carry no numbers."""
LARGEST_FAN = 15
"""Up to so many attributes without arrows are a fan; more are a grid."""

_CLEARANCE = '<TD WIDTH="5"></TD>'  # right of a number, where a thick line may pass
_STYLES: Mapping[Verdict, tuple[str, str, str]] = {
    "gains": ("solid", "gain", "gain"),
    "undecided": ("dashed", "undecided", "small-text"),
    "loses": ("dotted", "loss", "loss-text"),
    "not judged": ("solid", "unjudged", "unjudged"),
}
_WORDS: Mapping[Verdict, str] = {
    "gains": "blue solid: gains on held-out rows",
    "undecided": "grey dashed: undecided",
    "loses": "orange dotted: loses on held-out rows",
    "not judged": "solid, without colour: not judged on held-out rows",
}


@dataclass(frozen=True)
class _Sheet:
    """What every part of one drawing needs to know: the picture, its colours, and the chips that are drawn.

    ``chip_width`` in points; ``most_bits``: of any chip drawn; ``chips``: how many are.
    """

    picture: Picture
    colours: Mapping[str, str]
    chip_width: int
    most_bits: float
    chips: int

    @property
    def target(self) -> str:
        """The name of the class, cut to fit a sentence."""
        return cut(self.picture.target, 30)


def dot_source(
    picture: Picture,
    theme: Theme = "light",
    least_bits: float = 0.0,
    everything: bool = False,
    least_gain: float | None = None,
) -> str:
    """Write a picture as DOT.

    Arrows under ``least_bits`` bits are left out, with ``least_gain`` also those that are not known to gain so many
    held-out bits per row; among more than 40, all but the clear gains are too, and of more than
    150 attributes all but those of the strongest arrows, unless ``everything`` is asked for. What is left out is said
    under the title.
    """
    shown = showing(picture, least_bits, everything, least_gain)
    chips = [picture.chips[place] for place in shown.chips]
    widest = max(width_of(cut(chip.name), 12) for chip in chips)
    sheet = _Sheet(picture, PALETTES[theme], max(96, widest), max(chip.bits for chip in chips), len(chips))
    few = not picture.arrows and len(chips) <= LARGEST_FAN
    body = _fan(sheet) if few else _plug_and_frame(sheet, shown)
    return "\n".join(["digraph bnx {", *_defaults(sheet, shown), *body, "}", ""])


def pen_width(bits: float) -> float:
    """Turn bits given the class into the width of an arrow in pixels."""
    return min(9.0, 0.8 + 26 * max(0.0, bits))


def _defaults(sheet: _Sheet, shown: Showing) -> list[str]:
    colours = sheet.colours
    return [
        f'  graph [bgcolor="{colours["background"]}", fontname="Helvetica", fontcolor="{colours["text"]}", pad=0.25,'
        f" outputorder=edgesfirst, splines=true, nodesep=0.28, ranksep=0.2, labelloc=t, labeljust=l,",
        f"    label={_heading(sheet, shown)}]",
        f'  node [shape=box, fixedsize=true, style="filled,rounded", penwidth=0.8, color="{colours["chip-edge"]}",'
        f' fillcolor="{colours["chip"]}", fontname="Helvetica", fontcolor="{colours["text"]}", label=""]',
        f'  edge [fontname="Helvetica", fontsize=9, fontcolor="{colours["text"]}"]',
    ]


def _heading(sheet: _Sheet, shown: Showing) -> str:
    picture, text = sheet.picture, sheet.colours["text"]
    lines: list[tuple[float, list[tuple[str, str]]]] = [(15, [(cut(picture.title, 72), text)])]
    said = (picture.subtitle, shown.left_out, shown.chips_left_out)
    lines += [(11, [(cut(words, 120), text)]) for words in said if words]
    lines += [(10, phrases) for phrases in lines_of(_legend(sheet, shown))]
    widths = [
        [width_of(words, points, 0.66 if points > 12 else 0.56) + round(points) for words, _ in phrases]
        for points, phrases in lines
    ]
    whole = max(sum(line) for line in widths)
    table_rows = "".join(
        f"<TR><TD>{_heading_line(points, phrases, line, whole)}</TD></TR>"
        for (points, phrases), line in zip(lines, widths, strict=True)
    )
    return f'<<TABLE BORDER="0" CELLSPACING="0" CELLPADDING="0">{table_rows}<TR><TD HEIGHT="9"></TD></TR></TABLE>>'


def _heading_line(points: float, phrases: list[tuple[str, str]], widths: list[int], whole: int) -> str:
    """Write phrases side by side and fill the line up to the common width, so that nothing is spread out."""
    height = round(points * 1.45)
    cells = [
        cell(words, points, colour, width, height, bold=points > 12)
        for (words, colour), width in zip(phrases, widths, strict=True)
    ]
    rest = whole - sum(widths)
    return _table("".join(cells) + (f'<TD FIXEDSIZE="TRUE" WIDTH="{rest}" HEIGHT="{height}"></TD>' if rest else ""))


def _legend(sheet: _Sheet, shown: Showing) -> Iterable[tuple[str, str]]:
    small = sheet.colours["small-text"]
    if shown.arrows:
        number = " and number" if len(shown.arrows) <= MOST_NUMBERED else ""
        yield f"arrow width{number}: bits two attributes share given {sheet.target}", small
        for verdict, words in _WORDS.items():
            if any(arrow.verdict == verdict for arrow in shown.arrows):
                yield words, sheet.colours[_STYLES[verdict][2]]
        if any(arrow.by_blanks for arrow in shown.arrows):
            yield "ring at the tail: carried by blank cells", small
    elif not sheet.picture.arrows:
        yield f"takes every two attributes as independent given {sheet.target}", small
    yield f"bar: bits shared with {sheet.target}", small


def _table(cells: str) -> str:
    return f'<TABLE BORDER="0" CELLBORDER="0" CELLSPACING="0" CELLPADDING="0"><TR>{cells}</TR></TABLE>'


def _stacked(cells: Iterable[str]) -> str:
    rows_of_cells = "".join(f"<TR>{one}</TR>" for one in cells)
    return f'<TABLE BORDER="0" CELLBORDER="0" CELLSPACING="0" CELLPADDING="0">{rows_of_cells}</TABLE>'


def _class_node(sheet: _Sheet, caption: str = "") -> str:
    """Write the plug: the class, and inside it what it is plugged into, so that no words stand beside the frame."""
    colours, name = sheet.colours, sheet.target
    lines = [(name, 14, 18), *([(caption, 10, 14)] if caption else [])]
    width = max(80, *(width_of(words, points, 0.58) for words, points, _ in lines))
    label = _stacked(cell(words, points, colours["class-text"], width, high) for words, points, high in lines)
    return (
        f'class [id="class", class="class", style=filled, penwidth=0, fillcolor="{colours["class"]}",'
        f" width={(width + 24) / 72:.3f}, height={0.62 if caption else 0.44},"
        f" label=<{label}>, tooltip={hint(sheet.picture.target + ': the class')}]"
    )


def _chip_node(sheet: _Sheet, place: int) -> str:
    chip = sheet.picture.chips[place]
    colours, width = sheet.colours, sheet.chip_width
    tooltip = f"{chip.name}: {count_of(chip.levels, 'level')}, {chip.bits:.3f} bits shared with {sheet.picture.target}"
    name = cell(cut(chip.name), 12, colours["text"], width, 17)
    return (
        f'n{place} [id="n{place}", class="chip", width={(width + 16) / 72:.3f}, height=0.54, tooltip={hint(tooltip)},'
        f' label=<<TABLE BORDER="0" CELLBORDER="0" CELLSPACING="0" CELLPADDING="0"><TR>{name}</TR>'
        f"<TR><TD>{_bar(sheet, chip)}</TD></TR></TABLE>>]"
    )


def _bar(sheet: _Sheet, chip: Chip) -> str:
    length = sheet.chip_width - 34
    share = max(0.0, chip.bits) / sheet.most_bits if sheet.most_bits > 0 else 0.0
    filled = max(1, round(length * share)) if chip.bits > 0 else 0
    parts = ((filled, sheet.colours["bar"]), (length - filled, sheet.colours["bar-track"]))
    pieces = "".join(
        f'<TD FIXEDSIZE="TRUE" WIDTH="{width}" HEIGHT="5" BGCOLOR="{colour}"></TD>' for width, colour in parts if width
    )
    number = cell(_hundredths(chip.bits), 9, sheet.colours["small-text"], 30, 12)
    return _table(f'<TD>{_table(pieces)}</TD><TD WIDTH="4"></TD>{number}')


def _arrow_edge(sheet: _Sheet, arrow: Arrow, numbered: bool) -> str:
    dash, line, words = (sheet.colours.get(style, style) for style in _STYLES[arrow.verdict])
    width = pen_width(arrow.bits)
    label = f", label={_number(sheet, arrow, words)}" if numbered else ""
    ring = ", dir=both, arrowtail=odot" if arrow.by_blanks else ""
    return (
        f'n{arrow.parent} -> n{arrow.child} [id="e{arrow.parent}-{arrow.child}",'
        f' class="arrow {arrow.verdict.replace(" ", "-")}", style={dash}, color="{line}", penwidth={width:.2f},'
        f" arrowsize={0.5 + 0.025 * width:.2f}, minlen=2, tooltip={hint(_evidence(sheet, arrow))}{ring}{label}]"
    )


def _hundredths(bits: float) -> str:
    return "<0.01" if 0 < bits < 0.005 else f"{bits:.2f}"


def _number(sheet: _Sheet, arrow: Arrow, colour: str) -> str:
    """Write the number beside its arrow on a patch of the frame's colour, so that other lines stay off it."""
    text = _hundredths(arrow.bits)
    words = _table(cell(text, 9, colour, width_of(text, 9), 12))
    gap = f'<TD WIDTH="{3 + round(0.75 * pen_width(arrow.bits))}"></TD>'
    patch = f'<TD BGCOLOR="{sheet.colours["frame"]}">{words}</TD>'
    return f"<{_table(gap + patch + _CLEARANCE)}>"


def _evidence(sheet: _Sheet, arrow: Arrow) -> str:
    parent, child = (sheet.picture.chips[end].name for end in (arrow.parent, arrow.child))
    gain = (
        "" if arrow.gain is None else f", held-out gain {arrow.gain:+.3f} bits per row {bracketed(arrow.gain_interval)}"
    )
    verdict = f"{arrow.verdict}; carried by blank cells" if arrow.by_blanks else arrow.verdict
    return f"{parent} to {child}: {arrow.bits:.3f} bits given {sheet.picture.target}{gain.rstrip()}; {verdict}"


def _fan(sheet: _Sheet) -> list[str]:
    chips = sheet.picture.chips
    order = sorted(range(len(chips)), key=lambda place: (-chips[place].bits, place))
    line = f'color="{sheet.colours["fan"]}", penwidth=1, arrowhead=none, tailport=e, headport=w'
    return [
        "  graph [rankdir=LR, splines=line, nodesep=0.12, ranksep=1.5]",
        f"  {_class_node(sheet)}",
        *(f"  {_chip_node(sheet, place)}" for place in order),
        *([f"  {{ rank=same; {_chain(order)} [style=invis] }}"] if len(order) > 1 else []),
        *(f'  class -> n{place} [id="c{place}", class="fan", {line}]' for place in order),
    ]


def _plug_and_frame(sheet: _Sheet, shown: Showing) -> list[str]:
    chips = sheet.picture.chips
    joined = {end for arrow in shown.arrows for end in (arrow.parent, arrow.child)}
    lone = sorted(set(shown.chips) - joined, key=lambda place: (-chips[place].bits, place))
    standing = _standing(chips, shown.arrows, joined)
    grid = rows(lone, max((len(layer) for layer in standing), default=1))
    numbered = len(shown.arrows) <= MOST_NUMBERED
    return [
        f"  {_class_node(sheet, _everyone(sheet).removeprefix(f'{sheet.target}: '))}",
        "  subgraph cluster_frame {",
        f'    graph [id="frame", class="frame", style="filled,rounded", penwidth=1.6, margin=14, label="",'
        f' color="{sheet.colours["frame-edge"]}", fillcolor="{sheet.colours["frame"]}",'
        f" tooltip={hint(_everyone(sheet))}]",
        f"    {_socket(sheet)}",
        *(f"    {_chip_node(sheet, place)}" for layer in standing for place in layer),
        *(f"    {line}" for line in _ranks(standing, shown.arrows)),
        *_lone_block(sheet, grid),
        "  }",
        f"  {_cable(sheet)}",
        *(f"  {line}" for line in _holds(standing, grid, shown.arrows)),
        *(f"  {_arrow_edge(sheet, arrow, numbered)}" for arrow in _by_column(shown.arrows, standing)),
    ]


def _standing(chips: Sequence[Chip], arrows: Sequence[Arrow], joined: set[int]) -> list[list[int]]:
    parents: dict[int, list[int]] = {}
    for arrow in arrows:
        parents.setdefault(arrow.child, []).append(arrow.parent)
    strongest_first = sorted(joined, key=lambda place: (-chips[place].bits, place))
    capacity = max(6, math.ceil(1.3 * math.sqrt(len(joined))))
    return layers(parents, parents_first(parents, strongest_first), capacity)


def _by_column(arrows: Sequence[Arrow], standing: list[list[int]]) -> list[Arrow]:
    """Sort arrows by their child's place in its layer: layouts start from this order, so lines fall between chips."""
    place = {one: (column, row) for row, layer in enumerate(standing) for column, one in enumerate(layer)}
    return sorted(arrows, key=lambda arrow: (place[arrow.child], place[arrow.parent]))


def _everyone(sheet: _Sheet) -> str:
    count = len(sheet.picture.chips)
    those = "the one attribute" if count == 1 else f"all {count:,} attributes"
    shown = f", of which {sheet.chips:,} are" if sheet.chips < count else ""
    return f"{sheet.target}: parent of {those}{shown} in the frame"


def _socket(sheet: _Sheet) -> str:
    colours = sheet.colours
    return (
        f'socket [id="socket", class="socket", shape=circle, width=0.15, height=0.15, style=filled, label="",'
        f' penwidth=2.2, color="{colours["cable"]}", fillcolor="{colours["background"]}",'
        f" tooltip={hint(_everyone(sheet))}]"
    )


def _cable(sheet: _Sheet) -> str:
    return (
        f'class -> socket [id="cable", class="cable", color="{sheet.colours["cable"]}", penwidth=4, arrowhead=none,'
        f" weight=20, tooltip={hint(_everyone(sheet))}, minlen=2]"
    )


def _ranks(standing: list[list[int]], arrows: Sequence[Arrow]) -> list[str]:
    """Hold every layer level, the layers apart, and a chip that found no room above under one of those that did."""
    joined = {(arrow.parent, arrow.child) for arrow in arrows}
    same = [f"{{ rank=same; {'; '.join(f'n{place}' for place in layer)} }}" for layer in standing]
    steps = []
    for above, below in pairwise(standing):
        steps.append(f"n{above[0]} -> n{below[0]} [style=invis, minlen=2, weight=0]")
        late = [one for one in below if not any((parent, one) in joined for parent in above)]
        steps += [
            f"n{over} -> n{under} [style=invis, minlen=2, weight=3]" for over, under in zip(above, late, strict=False)
        ]
    return same + steps


def _lone_block(sheet: _Sheet, grid: list[list[int]]) -> list[str]:
    inside = [_chip_node(sheet, place) for row in grid for place in row]
    inside += [f"{{ rank=same; {_chain(row)} [style=invis, minlen=0] }}" for row in grid if len(row) > 1]
    inside += [
        f"n{above} -> n{below} [style=invis, weight=8]"
        for upper, lower in pairwise(grid)
        for above, below in zip(upper, lower, strict=False)
    ]
    opening = '    subgraph cluster_lone { graph [id="lone", style=invis, margin=0, label=""]'
    return [opening, *(f"      {line}" for line in inside), "    }"] if grid else []


def _chain(places: Sequence[int]) -> str:
    return " -> ".join(f"n{place}" for place in places)


def _holds(standing: list[list[int]], grid: list[list[int]], arrows: Sequence[Arrow]) -> list[str]:
    children = {arrow.child for arrow in arrows}
    roots = [place for layer in standing for place in layer if place not in children]
    held = [f"socket -> n{place} [style=invis, weight=2]" for place in roots or (grid[0] if grid else [])]
    if standing and grid:
        held.append(f"n{standing[-1][0]} -> n{grid[0][len(grid[0]) // 2]} [style=invis, weight=0, minlen=2]")
    return held
