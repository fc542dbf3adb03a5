"""Compare the charts of the page with the same charts by matplotlib: ``python tests/speed/charts.py COMPARISON``.

COMPARISON: a comparison.json. Both draw the folds of every structure by every metric, and reliability before and after
calibration; matplotlib once for each theme, text as text, as inline SVG needs it.
"""

import io
import json
import re
import sys
import time
from dataclasses import dataclass
from pathlib import Path
from typing import Any

import matplotlib as mpl
from matplotlib.figure import Figure

from bnx.metric_charts import metric_charts
from bnx.palette import PALETTES
from bnx.report import report_html

CHART = re.compile(r'<svg class="chart(?: folds)?" .*?</svg>', re.DOTALL)
THEMES = ("light", "dark")


def drawn(figure: Figure) -> str:
    out = io.StringIO()
    figure.savefig(out, format="svg", metadata={"Date": None})
    return out.getvalue()


def folds(document: dict[str, Any], key: str, theme: str) -> str:
    """Draw differences to the baseline, fold by fold, with their mean and interval."""
    colours = PALETTES[theme]
    baseline = document["settings"]["baseline"]
    base = next(one for one in document["structures"] if one["name"] == baseline)
    figure = Figure(figsize=(7.2, 5), facecolor=colours["background"])
    axes = figure.subplots()
    others = [one for one in [*document["structures"], *filter(None, [document["mix"]])] if one is not base]
    for place, one in enumerate(others):
        apart = [a[key] - b[key] for a, b in zip(one["by_fold"], base["by_fold"], strict=True)]
        told = one["against_baseline"]["by_metric"][key]
        axes.plot(apart, [place + 0.2] * len(apart), "o", color=colours["undecided"])
        axes.plot(told["interval"], [place, place], color=colours["text"])
        axes.plot([told["difference"]], [place], "o", markerfacecolor=colours["background"], color=colours["text"])
    axes.set_yticks(range(len(others)), [one.get("name", "mix") for one in others])
    return drawn(figure)


def reliability(one: dict[str, Any], theme: str) -> str:
    colours = PALETTES[theme]
    figure = Figure(figsize=(3.3, 3.1), facecolor=colours["background"])
    axes = figure.subplots()
    axes.plot([0, 1], [0, 1], color=colours["text"])
    for side, style in (("before", "s--"), ("after", "o-")):
        bins = (one[side] or {}).get("bins", [])
        said, right = ([row[key] for row in bins] for key in ("mean_probability", "share_right"))
        ends = [[abs(row["share_right"] - row["interval"][end]) for row in bins] for end in (0, 1)]
        axes.errorbar(said, right, yerr=ends, fmt=style, color=colours["gain"])
    return drawn(figure)


@dataclass(frozen=True)
class Measured:
    """Charts on the page and by matplotlib: seconds (of the page, all of it), numbers and bytes."""

    seconds: tuple[float, float]
    numbers: tuple[int, int]
    bytes: tuple[int, int]


def measured(document: dict[str, Any]) -> Measured:
    mpl.rcParams["svg.fonttype"] = "none"
    report_html(document, {})
    start = time.perf_counter()
    page = report_html(document, {})
    ours = time.perf_counter() - start
    own = CHART.findall(page)
    start = time.perf_counter()
    rival = [
        *(folds(document, chart.metric.key, theme) for chart in metric_charts(document) for theme in THEMES),
        *(reliability(one, theme) for one in document["reliability"].values() for theme in THEMES),
    ]
    theirs = time.perf_counter() - start
    sizes = [sum(len(one.encode()) for one in every) for every in (own, rival)]
    return Measured((ours, theirs), (len(own), len(rival)), (sizes[0], sizes[1]))


def main(document: dict[str, Any]) -> None:
    one = measured(document)
    (ours, theirs), (own, rival), (small, large) = one.seconds, one.numbers, one.bytes
    print(f"the whole page by templates: {ours:.2f} s, its {own} charts {small:,} bytes")
    print(f"{rival} charts by matplotlib: {theirs:.2f} s, {large:,} bytes")
    print(f"matplotlib to templates: {theirs / ours:.1f} times the time, {large / small:.1f} times the bytes")


if __name__ == "__main__":
    main(json.loads(Path(sys.argv[1]).read_text(encoding="utf-8")))
