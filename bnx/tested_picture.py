"""The residual picture of tested pairs."""

from pathlib import Path

from bnx.pair_details import PairDetail, Stratum
from bnx.pair_tests import PairTests
from bnx.residual_picture import PairPanels, Panel, check_picture, residual_picture
from bnx.tested_text import headline
from bnx.text import count_of

__all__ = ["check_picture", "draw_tests"]


def draw_tests(tests: PairTests, path: str, theme: str, overwrite: bool) -> None:
    """Draw every pair that was looked at closely.

    Raises:
        DataError: there is none, or the file cannot be written. SettingError: the file is taken.
    """
    pairs = [
        PairPanels(
            result.a,
            result.b,
            detail.pair.a.levels,
            detail.pair.b.levels,
            headline(result),
            tuple(_panel(detail, stratum) for stratum in detail.strata),
        )
        for result in tests.results
        for detail in filter(None, [tests.details.get((result.a, result.b))])
    ]
    conditions = ", ".join((tests.target, *tests.asked.given))
    residual_picture(pairs, f"{count_of(tests.rows, 'row')}, given {conditions}", Path(path), theme, overwrite)


def _panel(detail: PairDetail, stratum: Stratum) -> Panel:
    of = zip(detail.pair.given, stratum.of, strict=True)
    parts = {part.level: part for part in detail.classes}
    note = count_of(stratum.rows, "row")
    if len(stratum.of) == 1:
        note = f"{max(0.0, parts[stratum.of[0]].bits_corrected):.4f} bits, {note}"
    return Panel(
        ", ".join(f"{domain.name} = {level}" for domain, level in of),
        note,
        stratum.observed,
        stratum.expected,
        stratum.residuals,
    )
