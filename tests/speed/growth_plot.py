"""Growth curves as a picture: seconds against rows and against attributes, both scales logarithmic."""

from pathlib import Path

import matplotlib as mpl
from matplotlib.axes import Axes
from matplotlib.backends.backend_svg import FigureCanvasSVG
from matplotlib.figure import Figure
from timing import Figures

from bnx.palette import PALETTES

__all__ = ["curves_of", "draw_growth"]

COLOURS = PALETTES["light"]
COUNTING = "counting all pairs"
STYLES = {
    COUNTING: ("gain", "o", "-"),
    "bnx learn --structures naive": ("undecided", "s", "-"),
    "bnx learn --structures naive,tan,tan-tested": ("bar", "D", "-"),
    "bnx learn": ("loss", "^", "-"),
}
Points = list[tuple[float, float]]


def curves_of(figures: Figures, grows: str) -> dict[str, Points]:
    """List (size, seconds) of every curve along which ``grows``: rows or attributes."""
    counted = figures.get(f"{grows}_counting", {}).get("points", [])
    curves = {COUNTING: [(one[grows], one["seconds"]) for one in counted]} if counted else {}
    commands = figures.get(f"{grows}_command", {}).get("curves", {})
    return curves | {name: [(one["size"], one["seconds"]) for one in points] for name, points in commands.items()}


def draw_growth(figures: Figures, path: Path) -> None:
    """Draw both panels as SVG, letters as paths, the same bytes for the same figures."""
    with mpl.rc_context({"svg.fonttype": "path", "svg.hashsalt": "growth", "font.size": 9}):
        figure = Figure(figsize=(9.6, 4.6), facecolor=COLOURS["background"], layout="constrained")
        FigureCanvasSVG(figure)
        left, right = figure.subplots(1, 2, sharey=True)
        _panel(left, curves_of(figures, "rows"), "rows (20 attributes)", 1)
        _panel(right, curves_of(figures, "attributes"), "attributes (10,000 rows)", 2)
        left.set_ylabel("seconds", color=COLOURS["text"])
        legends = [panel.get_legend_handles_labels() for panel in (left, right)]
        handles = {label: line for lines, labels in legends for line, label in zip(lines, labels, strict=True)}
        figure.legend(
            list(handles.values()),
            list(handles),
            loc="outside lower center",
            ncols=2,
            frameon=False,
            labelcolor=COLOURS["text"],
        )
        figure.savefig(path, format="svg", metadata={"Date": None})


def _panel(panel: Axes, curves: dict[str, Points], label: str, power: int) -> None:
    """Draw curves, and a dotted line along which time grows by a power of the size."""
    panel.set_facecolor(COLOURS["chip"])
    panel.set(xscale="log", yscale="log")
    sizes = sorted({size for points in curves.values() for size, _ in points})
    panel.set_xticks(sizes, [f"{size:,}" for size in sizes])
    panel.set_xticks([], minor=True)
    panel.yaxis.set_major_formatter(lambda seconds, _: f"{seconds:g}")
    panel.set_xlabel(label, color=COLOURS["text"])
    panel.tick_params(colors=COLOURS["small-text"], which="both")
    panel.grid(color=COLOURS["bar-track"], linewidth=0.8)
    for spine in panel.spines.values():
        spine.set_color(COLOURS["chip-edge"])
    for name, points in curves.items():
        colour, marker, line = STYLES[name]
        panel.plot(*zip(*points, strict=True), line, marker=marker, color=COLOURS[colour], label=name, markersize=5)
    if COUNTING in curves:
        size, seconds = curves[COUNTING][-1]
        sizes = [point[0] for point in curves[COUNTING]]
        guide = [seconds * (one / size) ** power for one in sizes]
        words = "as rows grow" if power == 1 else "as the square of attributes grows"
        panel.plot(sizes, guide, ":", color=COLOURS["unjudged"], label=words, linewidth=1.2)
