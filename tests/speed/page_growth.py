"""What the page says about growth and about the limit of the machine, all computed from stored figures."""

import math

from growth_plot import Points, curves_of
from setting import number
from timing import Figures

__all__ = ["PICTURE", "limit_page", "page"]

PICTURE = "pictures/growth.svg"


def page(figures: Figures) -> list[str]:
    """Write the section on growth."""
    if not figures:
        return []
    lines = [
        "## Growth",
        "",
        f"![Seconds against rows and against attributes; both scales are logarithmic.]({PICTURE})",
        "",
    ]
    for grows, constant in (("rows", "20 attributes of 2 to 8 levels"), ("attributes", "10,000 rows, binary")):
        curves = curves_of(figures, grows)
        if curves:
            lines += [*_table(curves, f"{grows} ({constant})"), ""]
    return [
        *lines,
        "Seconds, and in brackets the power of the size by which time grew since the column before: 1 means ten times "
        "the time for ten times the size. Counting is on two threads and in memory, median of some runs; commands are "
        "one run each of the whole program, two threads. What does not depend on the size (starting, the drawings, the "
        "report) hides growth on the left. Pairs grow by the square of the attributes.",
        "",
    ]


def _table(curves: dict[str, Points], heading: str) -> list[str]:
    sizes = sorted({size for points in curves.values() for size, _ in points})
    rows = [f"| {name} | {' | '.join(_cells(points, sizes))} |" for name, points in curves.items()]
    columns = " | ".join(f"{size:,}" for size in sizes)
    return [f"| {heading} | {columns} |", "|---|" + "---|" * len(sizes), *rows]


def _cells(points: Points, sizes: list[float]) -> list[str]:
    """Write the seconds of every size, with the power by which they grew."""
    cells, before = [], None
    known = dict(points)
    for size in sizes:
        seconds = known.get(size)
        if seconds is None:
            cells.append("")
        elif before is None:
            cells.append(number(seconds))
        else:
            power = math.log(seconds / before[1]) / math.log(size / before[0])
            cells.append(f"{number(seconds)} ({power:.2f})")
        before = (size, seconds) if seconds is not None else before
    return cells


def limit_page(figures: dict[str, Figures]) -> list[str]:
    """Write the arithmetic of the limit from the figures of all parts."""
    limit = figures["pairs"].get("limit")
    if limit is None:
        return []
    clock, most = limit["cycles_per_second"], max(limit["threads"], key=int)
    peaks = {jobs: max(one["peak"].values()) for jobs, one in limit["threads"].items()}
    loops = "; ".join(
        f"{loop} {words / 1e9:.1f} ({words / clock:.1f} a cycle)"
        for loop, words in limit["threads"]["1"]["peak"].items()
    )
    cases = [
        (f"{limit['rows']:,} x {limit['attributes']}", int(jobs), limit, one["ours"]["least"])
        for jobs, one in limit["threads"].items()
    ]
    for step in ("rows_counting", "attributes_counting"):
        cases += [
            (f"{one['rows']:,} x {one['attributes']:,}", int(most), one, one["least"])
            for one in figures["growth"].get(step, {}).get("points", [])[-1:]
        ]
    return [
        "## The limit",
        "",
        "A pair cell is the number of ones that two bit planes share, so counting all pairs means to AND and to count "
        "the planes of every level but each attribute's last, pair by pair, 64 rows a word. How fast can that be?",
        "",
        f"- The clock runs at {clock / 1e9:.2f} GHz (a chain of one-cycle instructions, best burst).",
        f"- Hand-written loops over planes in the first-level cache, one thread, in 10^9 words a second: {loops}. On "
        f"{most} threads at most {peaks[most] / 1e9:.1f}.",
        f"- One thread that only adds up numbers reads {limit['bytes_per_second'] / 1e9:.1f} GB a second from memory.",
        "",
        "| rows x attributes | threads | 10^9 words | at the peak, s | codes, GB | reading them once, s | best run, s "
        "| words a cycle and thread | of the peak |",
        "|---|---|---|---|---|---|---|---|---|",
        *(_case(name, jobs, one, seconds, peaks[str(jobs)], limit) for name, jobs, one, seconds in cases),
        "",
        "The best run includes sums over groups, bit planes made from the codes, and threads that start and wait. "
        "Planes are made a few thousand rows at a time and used from the cache, so codes are read once.",
        "",
        *_commands(figures, peaks[most], limit["bytes_per_second"]),
    ]


def _case(name: str, jobs: int, one: Figures, seconds: float, peak: float, limit: Figures) -> str:
    words, read = one["plane_words"], one["code_bytes"]
    speed = words / seconds
    return (
        f"| {name} | {jobs} | {number(words / 1e9)} | {number(words / peak)} | {number(read / 1e9)} | "
        f"{number(read / limit['bytes_per_second'])} | {number(seconds)} | "
        f"{speed / limit['cycles_per_second'] / jobs:.2f} | {speed / peak:.0%} |"
    )


def _commands(figures: dict[str, Figures], peak: float, rate: float) -> list[str]:
    """Set the whole command on wide and tall tables against counting and reading alone."""
    found = [one for part, step in (("wide", "vocabulary"), ("tall", "whole")) if (one := figures[part].get(step))]
    if not found:
        return []
    rows = [
        f"| {one['rows']:,} x {one['attributes']:,} | {number(one['plane_words'] / 1e9)} | "
        f"{number(one['plane_words'] / peak)} | {number(one['code_bytes'] / 1e9)} | "
        f"{number(one['code_bytes'] / rate)} | {number(one['seconds'])} | "
        f"{number(one['seconds'] / (one['plane_words'] / peak + one['code_bytes'] / rate))} |"
        for one in found
    ]
    return [
        "The whole command on the wide and the tall table, against counting all pairs once at the peak and reading all "
        "codes once:",
        "",
        "| rows x attributes | 10^9 words | at the peak, s | codes, GB | reading them once, s | whole command, s | "
        "times both |",
        "|---|---|---|---|---|---|---|",
        *rows,
        "",
        "Counting is no longer what takes the time: the stages above show what does. Wide: a logarithm per cell of "
        "every pair in every training set, and trees. Tall: decoding the Parquet files, and passes over all rows for "
        "every structure's tables and predictions.",
        "",
    ]
