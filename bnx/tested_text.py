"""The tests of pairs as text that fits 100 columns: a table by verdict, what was seen closely, tables of strata."""

import textwrap
from collections.abc import Sequence

import numpy as np

from bnx.explaining import Explanation
from bnx.pair_details import ClassPart, PairDetail, Stratum
from bnx.pair_tests import PairTests
from bnx.text import aligned, count_of, cut_middle, fixed, of_p, printable
from bnx.verdicts import VERDICTS, TestResult

__all__ = ["headline", "strata_text", "written"]

_WIDTH = 100
_ORDER = [VERDICTS[code] for code in (2, 1, 0, 3)]
_EXPLANATIONS = 5  # shown of every pair; --json holds all
_LEVEL = 20
_FEW = 0.00005  # bits that four decimals would show as none


def written(tests: PairTests, with_strata: bool = False) -> str:
    """Lay out everything that was found, most bits first under every verdict."""
    parts = [_table(tests), _notes(tests)]
    for result in tests.results:
        detail = tests.details.get((result.a, result.b))
        if detail:
            parts.append(_close(result, detail, tests))
            parts += [strata_text(detail)] if with_strata else []
    return "\n\n".join(parts)


def headline(result: TestResult) -> str:
    """Say in one line what the test of a pair says."""
    p = (
        f"p {_p(result.p_value, result.method)} ({result.method})"
        if not np.isnan(result.p_value)
        else "nothing to test"
    )
    return f"{result.verdict}: {_bits(result.bits_corrected)} bits, {p}"


def _table(tests: PairTests) -> str:
    statistic = "G" if tests.recipe.test == "g" else "X2"
    header = ("", "bits", "marginal", statistic, "df", "p", "adjusted", "detectable", "method")
    cells = {verdict: [_cells(one) for one in tests.results if one.verdict == verdict] for verdict in _ORDER}
    rows: list[tuple[str, ...]] = []
    every = [row for found in cells.values() for _, row in found]
    room = _WIDTH - sum(max(len(row[k]) for row in (header[1:], *every)) + 2 for k in range(len(header) - 1))
    for verdict, found in cells.items():
        named = [(f"  {_both(result.a, result.b, room - 2)}", *row) for result, row in found]
        rows += [(verdict, *[""] * (len(header) - 1)), *named] if named else []
    conditions = printable(", ".join((tests.target, *tests.asked.given)))
    head = textwrap.fill(f"{count_of(tests.rows, 'row')}; bits, {statistic} and p given {conditions}", _WIDTH)
    return f"{head}\n\n{aligned(header, rows)}"


def _both(a: str, b: str, room: int) -> str:
    """Name a pair in so many characters: what the shorter name leaves is the longer one's."""
    half = (room - 3) // 2
    first = cut_middle(a, max(half, room - 3 - len(printable(b))))
    return f"{first} ~ {cut_middle(b, room - 3 - len(first))}"


def _bits(corrected: float) -> str:
    """Write bits less what chance alone would show, at least 0; very few with their power of ten."""
    return f"{corrected:.1e}" if 0.0 < corrected < _FEW else fixed(max(0.0, corrected), 4)


def _p(p: float, method: str) -> str:
    """Write a p-value; by moments it has been checked down to 1e-5 only."""
    return "<1e-6" if method == "moments" and p < 1e-6 else of_p(p)


def _cells(result: TestResult) -> tuple[TestResult, tuple[str, ...]]:
    about = "~" if np.isnan(result.bits_at_most) else ""
    return result, (
        _bits(result.bits_corrected),
        _bits(result.marginal_bits_corrected),
        "" if np.isnan(result.statistic) else fixed(result.statistic, 2),
        str(result.df),
        _p(result.p_value, result.method),
        _p(result.adjusted_p, result.method),
        "" if np.isnan(result.detectable_bits) else f"{about}{_bits(result.detectable_bits)}",
        result.method,
    )


def _notes(tests: PairTests) -> str:
    at = next((one.detectable_at for one in tests.results if not np.isnan(one.detectable_at)), None)
    level = "" if at is None else f" detectable: what a test at p <= {at:.2g} finds with power .80."
    notes = (
        f"bits: shared per record, less what chance alone would give; marginal: given nothing.{level} Negligible: at "
        f"most {tests.recipe.negligible:g} bits, at 95 %. Not enough data is not independence. ~: the sample is too "
        "sparse for more than a rough figure, and for bounds of the bits, so it is never called negligible."
    )
    informative = [result.strata_informative for result in tests.results]
    low, high, strata = min(informative), max(informative), max(result.strata for result in tests.results)
    span = f"{low:,}" if low == high else f"{low:,} to {high:,}"
    informed = f"{span} of {count_of(strata, 'stratum', 'strata')} informative (both attributes vary there)"
    return f"{textwrap.fill(notes, _WIDTH)}\n{informed}"


def _close(result: TestResult, detail: PairDetail, tests: PairTests) -> str:
    """Write what was seen of one pair."""
    lines = [f"{_both(result.a, result.b, _WIDTH - 2 - len(result.verdict))}: {result.verdict}"]
    lines += _sentence(_shared(result, tests))
    lines += _sentence(_pattern(detail, tests.target))
    lines += ["", _by_class(detail.classes, tests.target)]
    lines += _sentence(_odds(detail)) + _sentence(_trend(detail))
    explained = tests.explained.get((result.a, result.b), ())
    lines += ["", _explained(explained)] if explained else []
    return "\n".join(lines)


def _sentence(text: str) -> list[str]:
    """Fill a sentence under its pair; none for an empty one."""
    return (
        textwrap.fill(
            printable(text), _WIDTH, initial_indent="  ", subsequent_indent="  ", break_on_hyphens=False
        ).split("\n")
        if text
        else []
    )


def _shared(result: TestResult, tests: PairTests) -> str:
    conditions = ", ".join((tests.target, *tests.asked.given))
    neither = not result.adjusted_p <= tests.recipe.alpha and not result.marginal_adjusted_p <= tests.recipe.alpha
    interval = "" if np.isnan(result.bits_low) else f" (95 % {_bits(result.bits_low)} to {_bits(result.bits_high)})"
    if result.verdict == VERDICTS[0]:
        interval = f" (95 % at most {_bits(result.bits_at_most)})"
    share = result.bits_corrected / result.marginal_bits_corrected if result.marginal_bits_corrected > 0 else np.nan
    meaning = {
        "explained": f"explained by {conditions}",
        "remains": f"{min(1.0, share):.0%} of it is left",
        "strengthened": "it is stronger there",
        "appears only given the class": "it appears only there",
        "not enough data": "not rejected either way, so there is nothing to explain"
        if neither
        else f"not enough data to say what {conditions} explains",
    }
    blanks = (
        ""
        if np.isnan(result.bits_without_blanks)
        else f" Where neither cell is blank: {_bits(result.bits_without_blanks)} bits."
    )
    alone, given = _bits(result.marginal_bits_corrected), _bits(result.bits_corrected)
    known = tests.given_class.get((result.a, result.b))
    between = "" if known is None else f"{_bits(known)} given {tests.target} alone, "
    return (
        f"{alone} bits given nothing, {between}{given}{interval} given {conditions}, less what chance alone would "
        f"give: {meaning[result.outcome]}.{blanks}"
    )


def _pattern(detail: PairDetail, target: str) -> str:
    """Say whether the classes share one pattern."""
    same = detail.same
    if np.isnan(same.p):
        return f"Whether all levels of {target} share one pattern cannot be tested here."
    at_most = "<= " if same.method == "monte-carlo" and same.p * (same.draws + 1) <= 1.0 else ""
    df = "" if same.df is None else f"df {same.df}, "
    several = "" if detail.same_adjusted_p == same.p else f", adjusted {of_p(detail.same_adjusted_p)}"
    test = f"X2 {same.x2:.2f}, {df}p {at_most}{of_p(same.p)}, {same.method}{several}"
    if detail.only_in:
        return (
            f"Independence is rejected only in {target} = {detail.only_in}, and the patterns differ ({test}): a "
            "dependence that lives in one class looks so, and naive Bayes takes the two for independent there too."
        )
    if detail.differs:
        return f"The pattern differs between levels of {target} ({test})."
    return f"No difference of pattern between levels of {target} was found ({test})."


def _by_class(parts: Sequence[ClassPart], target: str) -> str:
    rows = [
        (
            f"  {part.level}",
            f"{part.rows:,}",
            _bits(part.bits_corrected) if part.df else "",
            fixed(part.x2, 2),
            str(part.df),
            _p(part.p_value, part.method),
            _p(part.adjusted_p, part.method),
            "" if np.isnan(part.cramers_v) else fixed(part.cramers_v),
            "" if np.isnan(part.detectable_bits) else _bits(part.detectable_bits),
            part.method,
        )
        for part in parts
    ]
    return aligned(
        (f"  {target}", "rows", "bits", "X2", "df", "p", "adjusted", "Cramer's V", "detectable", "method"),
        rows,
        most=_WIDTH,
    )


def _odds(detail: PairDetail) -> str:
    one = detail.binary
    if one is None or np.isnan(one.odds_ratio):
        return ""
    homogeneous = (
        "" if np.isnan(one.tarone_p) else f"; equal in all strata (Breslow-Day-Tarone): p {of_p(one.tarone_p)}"
    )
    known = np.isfinite([one.odds_low, one.odds_high]).all()
    interval = f" [{one.odds_low:.4g}, {one.odds_high:.4g}]" if known else ""
    return (
        f"Common odds ratio (Mantel-Haenszel) {one.odds_ratio:.4g}{interval}, {detail.pooled_odds:.4g} given nothing; "
        f"Yule's Q {one.yule_q.q:+.3f}; CMH {one.cmh:.2f}, p {of_p(one.cmh_p)}{homogeneous}."
    )


def _trend(detail: PairDetail) -> str:
    one = detail.trend
    if one is None or np.isnan(one.statistic) or (one.kind == "general" and detail.binary):
        return ""
    a, b = (cut_middle(domain.name, 25) for domain in (detail.pair.a, detail.pair.b))
    scored, other = (b, a) if detail.pair.a_scores is None else (a, b)
    kind = {
        "linear": "Linear trend of both",
        "mean scores": f"Mean {scored} by level of {other}",
        "general": "If all strata share one pattern",
    }[one.kind]
    way = "" if np.isnan(one.correlation) else f", correlation within strata {one.correlation:+.3f}"
    return f"{kind} (generalised CMH): {one.statistic:.2f}, df {one.df}, p {of_p(one.p)}{way}."


def _explained(found: Sequence[Explanation]) -> str:
    rows = [
        (
            f"  {one.attribute}",
            one.words,
            _bits(one.bits_corrected),
            _p(one.adjusted_p, one.method),
            "" if np.isnan(one.detectable_bits) else _bits(one.detectable_bits),
            f"{one.strata_informative:,} of {one.strata:,}",
        )
        for one in found[:_EXPLANATIONS]
    ]
    table = aligned(
        ("  given too", "", "bits left", "adjusted p", "detectable", "informative strata"), rows, left=2, most=_WIDTH
    )
    more = len(found) - _EXPLANATIONS
    return table if more <= 0 else f"{table}\n  and {more:,} more; see --json"


def strata_text(detail: PairDetail) -> str:
    """Lay out observed / expected / adjusted residual of every stratum that holds records."""
    return "\n\n".join(_stratum(detail, stratum) for stratum in detail.strata)


def _stratum(detail: PairDetail, stratum: Stratum) -> str:
    pair = detail.pair
    given = ", ".join(f"{domain.name} = {level}" for domain, level in zip(pair.given, stratum.of, strict=True))
    v = "" if np.isnan(stratum.cramers_v) else f", Cramer's V {stratum.cramers_v:.3f}"
    q = "" if stratum.yule is None or np.isnan(stratum.yule.q) else f", Yule's Q {stratum.yule.q:+.3f}"
    head = f"  {given}: {count_of(stratum.rows, 'row')}{v}{q}; observed / expected / adjusted residual"
    used = np.flatnonzero(stratum.observed.any(axis=0)).tolist()
    blocks = [textwrap.fill(printable(head), _WIDTH, subsequent_indent="  ")]
    lines = [[_cell(stratum, i, j) for j in used] for i in range(len(stratum.observed))]
    names = [cut_middle(name, _LEVEL) for name in pair.a.levels]
    shown = [i for i in range(len(names)) if stratum.observed[i].any()]
    columns = 2 + max(map(len, names))
    width = max((len(lines[i][k]) for i in shown for k in range(len(used))), default=0)
    together = max(1, (_WIDTH - columns) // (max(width, _LEVEL) + 2))
    for start in range(0, len(used), together):
        part = range(start, min(start + together, len(used)))
        header = ("", *(cut_middle(pair.b.levels[used[k]], _LEVEL) for k in part))
        blocks.append(aligned(header, [(f"  {names[i]}", *(lines[i][k] for k in part)) for i in shown]))
    return "\n".join(blocks)


def _cell(stratum: Stratum, i: int, j: int) -> str:
    residual = stratum.residuals[i, j]
    told = "" if np.isnan(residual) else f" {residual:+.1f}"
    return f"{stratum.observed[i, j]:,} / {stratum.expected[i, j]:,.1f}{told}"
