"""Tests of pairs as text: within 100 columns whatever the names, in the figures of the JSON, every sentence earned."""

import re
from collections.abc import Sequence
from pathlib import Path

import numpy as np
import pandas as pd
import pytest
from probed import CLASSES, copied, planted, probed, words
from test_explaining import caused

from bnx.tested_text import headline, strata_text, written

DEMO = Path(__file__).parent.parent / "datasets" / "cold_chain.csv"
WIDTH = 100


def demo() -> pd.DataFrame:
    return pd.read_csv(DEMO, dtype=str, keep_default_na=False)


def widest(text: str) -> str:
    return max(text.splitlines(), key=len)


LONG = ("L" * 299 + "1", "L" * 299 + "2", "L" * 299 + "3", "K" * 300)
WIDE = ("漢字" * 40, "水準" * 40, "분류" * 40, "ชั้น" * 30)
CONTROL = ("tab\there\x1b[31mred", "line\nend", "bell\x07\x00", "\u202eright to left")
SHORT = ("a", "b", "c", "k")


@pytest.mark.parametrize("names", [SHORT, LONG, WIDE, CONTROL], ids=["short", "long", "wide", "control"])
@pytest.mark.parametrize("levels", [3, 12])
def test_no_line_is_longer_than_100_characters_whatever_the_names(names: Sequence[str], levels: int) -> None:
    """Signs of wide scripts are counted as one, as everywhere in the program; terminals show them two columns wide."""
    random = np.random.default_rng(2)
    kind, first = (random.integers(0, size, 1000) for size in (3, levels))
    second, third = (copied(random, first, levels, share) for share in (0.7, 0.63))
    columns = [words(codes, names[0]) for codes in (first, second, third, kind)]
    frame = pd.DataFrame(dict(zip(names, columns, strict=True)))
    for given in ((), (names[2],)):
        tests = probed(frame, names[3], names[: 3 - len(given)], given=given, explain=True)
        text = written(tests, with_strata=True)
        assert len(widest(text)) <= WIDTH, widest(text)
        assert all(line.isprintable() for line in text.splitlines())


def test_the_widest_figures_fit_too() -> None:
    """A million records, p below 1e-300, a hundred thousand degrees of X2: every column at its widest."""
    random = np.random.default_rng(3)
    size = 300_000
    first = random.integers(0, 30, size)
    second = np.where(random.random(size) < 0.03, first, random.integers(0, 30, size))
    third = np.where(random.random(size) < 0.01, first, random.integers(0, 30, size))
    columns = {"N" * 30: first, "M" * 30: second, "P" * 30: third, "class of all shipments": first % 2}
    frame = pd.DataFrame({name: words(codes, "level of some length ") for name, codes in columns.items()})
    text = written(probed(frame, "class of all shipments", ("N" * 30, "M" * 30, "P" * 30)))
    assert len(widest(text)) <= WIDTH, widest(text)


def test_the_demo_fits_with_everything_asked_for() -> None:
    text = written(probed(demo(), "arrival", explain=True), with_strata=True)
    assert len(widest(text)) <= WIDTH, widest(text)


def rows_of(text: str) -> list[list[str]]:
    """Take the rows of the table of pairs: name, then figures."""
    table = text.split("\n\nbits: ", maxsplit=1)[0]
    return [re.split(r"\s{2,}", line.strip()) for line in table.splitlines() if " ~ " in line]


def bits_shown(bits: float) -> str:
    """Write bits as the text does: none below 0, and those that four decimals would hide with their power of ten."""
    return f"{max(0.0, bits):.4f}" if bits <= 0 or bits >= 5e-5 else f"{bits:.1e}"


def p_shown(p: float, method: str) -> str:
    """Write p as the text does: p by moments has been checked down to 1e-5 only."""
    return "<1e-6" if method == "moments" and p < 1e-6 else f"{p:.2g}"


def shows(shown: str, a: str, b: str) -> bool:
    """Tell whether a pair is shown under these names, of which the middles may be left out."""
    parts = [one.partition("…") for one in shown.split(" ~ ")]
    return all(
        name.startswith(front) and name.endswith(back) and (bool(cut) or name == front)
        for name, (front, cut, back) in zip((a, b), parts, strict=True)
    )


TABLES = {
    "every pair": lambda: probed(demo(), "arrival"),
    "given more": lambda: probed(demo(), "arrival", ("route", "season", "load_temp"), given=("precool",)),
    "a sparse table": lambda: probed(planted(60, 2, {"sound": 0.8}, levels=4), "kind"),
    "by G": lambda: probed(demo().head(300), "arrival", test="g"),
}


@pytest.mark.parametrize("which", TABLES)
def test_the_figures_of_the_text_are_those_of_the_json(which: str) -> None:
    tests = TABLES[which]()
    statistic = "G" if which == "by G" else "X2"
    header = next(line for line in written(tests).splitlines() if line.lstrip().startswith("bits "))
    assert header.split() == ["bits", "marginal", statistic, "df", "p", "adjusted", "detectable", "method"]
    order = ("dependent", "detected, but negligible", "negligible", "not enough data")
    document = sorted(tests.to_dict()["tests"], key=lambda one: order.index(one["verdict"]))
    for cells, one in zip(rows_of(written(tests)), document, strict=True):
        assert shows(cells[0], one["a"], one["b"])
        expected = [bits_shown(one[key]) for key in ("bits_corrected", "marginal_bits_corrected")]
        if one["method"] == "none":
            assert cells[-1] == "none"
            continue
        about = "" if one["min_expected"] >= 1 and one["share_expected_below_5"] <= 0.2 else "~"
        expected += [f"{one['statistic']:.2f}", f"{one['df']}"]
        expected += [p_shown(one[key], one["method"]) for key in ("p_value", "adjusted_p")]
        expected += [f"{about}{bits_shown(one['detectable_bits'])}", one["method"]]
        assert cells[1:] == expected


def test_pairs_stand_under_their_verdict_most_bits_first() -> None:
    tests = probed(demo(), "arrival")
    found: dict[str, list[str]] = {}
    verdict = ""
    for line in written(tests).split("\n\nbits: ")[0].splitlines()[3:]:
        if " ~ " in line:
            found.setdefault(verdict, []).append(line.strip().split("  ")[0])
        else:
            verdict = line
    assert list(found) == ["dependent", "negligible", "not enough data"]
    for verdict, pairs in found.items():
        expected = [one for one in tests.results if one.verdict == verdict]
        assert all(shows(shown, one.a, one.b) for shown, one in zip(pairs, expected, strict=True))


def section(text: str, pair: str) -> str:
    """Take what is written of one pair, on one line."""
    part = text.partition(f"\n\n{pair}: ")[2]
    assert part, pair
    return " ".join(part.split())


def test_a_dependence_of_one_class_is_named_and_a_common_one_is_not() -> None:
    lone = section(written(probed(planted(900, 7, {"worn": 0.7}), "kind", ("left", "right"))), "left ~ right")
    assert "Independence is rejected only in kind = worn, and the patterns differ (X2 " in lone
    assert "naive Bayes takes the two for independent there too" in lone
    same = probed(planted(900, 7, dict.fromkeys(CLASSES, 0.5)), "kind", ("left", "right"))
    text = section(written(same), "left ~ right")
    assert "No difference of pattern between levels of kind was found" in text
    assert "only in" not in text


def test_the_classes_of_the_text_are_those_of_the_json() -> None:
    tests = probed(demo(), "arrival", ("season", "precool"))
    text = written(tests)
    for one in tests.to_dict()["tests"][0]["classes"]:
        line = next(line for line in text.splitlines() if line.startswith(f"  {one['level']}"))
        assert line.split()[1:] == [
            f"{one['rows']:,}",
            bits_shown(one["bits_corrected"]),
            f"{one['x2']:.2f}",
            f"{one['df']}",
            p_shown(one["p_value"], one["method"]),
            p_shown(one["adjusted_p"], one["method"]),
            f"{one['cramers_v']:.3f}",
            bits_shown(one["detectable_bits"]),
            one["method"],
        ]


def test_bits_without_and_given_are_compared_on_one_scale() -> None:
    """Of 60 levels by 60 a plain count shows .7 bit of pure chance: no class explains that."""
    random = np.random.default_rng(1)
    columns = {name: words(random.integers(0, size, 3000), name) for name, size in (("a", 60), ("b", 60), ("k", 3))}
    tests = probed(pd.DataFrame(columns), "k", ("a", "b"))
    assert tests.results[0].marginal_bits > 0.5
    without = float(re.search(r"([\d.]+) bits given nothing", section(written(tests), "a ~ b")).group(1))  # type: ignore[union-attr]
    assert without == pytest.approx(max(0.0, tests.results[0].marginal_bits_corrected), abs=5e-5)
    assert without < 0.05


def test_explanations_are_listed_best_first_and_the_rest_counted() -> None:
    tests = probed(caused(2000, 3, extra=6), "kind", ("first", "second"), explain=True, max_levels=100)
    found = tests.explained["first", "second"]
    text = written(tests)
    lines = text.partition("given too")[2].splitlines()[1:7]
    assert [line.split()[0] for line in lines[:5]] == [one.attribute for one in found[:5]]
    for line, one in zip(lines[:5], found, strict=False):
        assert one.words in line
        assert f"{one.strata_informative:,} of {one.strata:,}" in line
        assert f"{max(0.0, one.bits_corrected):.4f}" in line
    assert lines[5].strip().startswith(f"and {len(found) - 5} more")


def test_no_figure_is_nan_or_infinite() -> None:
    """Perfect copies have an infinite odds ratio; a class of one record has nothing to test."""
    random = np.random.default_rng(4)
    left = random.integers(0, 2, 200)
    kind = ["odd", *words(random.integers(0, 2, 199), "k")]
    frame = pd.DataFrame({"left": words(left, "l"), "right": words(left, "r"), "kind": kind})
    tests = probed(frame, "kind", ("left", "right"))
    assert tests.details["left", "right"].binary.odds_ratio == np.inf  # type: ignore[union-attr]
    assert not re.search(r"\bnan\b", written(tests, with_strata=True))


def cells_of(text: str) -> list[tuple[int, float, float]]:
    found = re.findall(r"([\d,]+) / ([\d,.]+)(?: ([+-][\d.]+))?", text)
    return [(int(o.replace(",", "")), float(e.replace(",", "")), float(r or "nan")) for o, e, r in found]


@pytest.mark.parametrize("levels", [3, 25])
def test_every_cell_of_every_stratum_is_printed(levels: int) -> None:
    frame = planted(2000, 5, {"sound": 0.5}, levels=levels)
    detail = probed(frame, "kind", ("left", "right"), given=("other",)).details["left", "right"]
    cells = cells_of(strata_text(detail))
    assert sum(observed for observed, _, _ in cells) == 2000
    assert len(cells) == 6 * levels * levels
    assert sum(expected for _, expected, _ in cells) == pytest.approx(2000, abs=0.05 * len(cells))
    largest = max(np.nanmax(np.abs(stratum.residuals)) for stratum in detail.strata)
    assert max(abs(residual) for _, _, residual in cells) == pytest.approx(largest, abs=0.05)


def test_the_headline_says_verdict_bits_and_p() -> None:
    result = probed(demo(), "arrival", ("season", "load_temp")).results[0]
    assert headline(result) == f"dependent: {result.bits_corrected:.4f} bits, p {result.p_value:.2g} (chi2-tail)"
    columns = {"a": list("xxyy") * 3, "b": list("xyxy") * 3, "z": words(np.arange(12), "z"), "k": list("mmmmmmnnnnnn")}
    nothing = probed(pd.DataFrame(columns), "k", ("a", "b"), given=("z",), keep=("all",)).results[0]
    assert headline(nothing) == "not enough data: 0.0000 bits, nothing to test"


def test_bits_are_never_negative() -> None:
    """Less chance, half of all independent pairs have less than nothing."""
    tests = probed(planted(400, 2, {}), "kind")
    assert min(one.bits_corrected for one in tests.results) < 0
    assert not re.search(r"-\d+\.\d+ bits|-\d\.\d{4}", written(tests))
    least = min(tests.results, key=lambda one: one.bits_corrected)
    assert headline(least).startswith("not enough data: 0.0000 bits, p ")


def test_a_class_without_a_choice_has_no_bits_to_show() -> None:
    frame = planted(600, 3, dict.fromkeys(CLASSES, 0.5))
    frame.loc[frame["kind"] == "worn", "left"] = "l0"
    tests = probed(frame, "kind", ("left", "right"))
    rows = {part.level: part.rows for part in tests.details["left", "right"].classes if not part.df}
    line = next(line for line in written(tests).splitlines() if line.startswith("  worn "))
    assert line.split()[1:] == [f"{rows['worn']}", "0.00", "0", "none"]
    other = next(line for line in written(tests).splitlines() if line.startswith("  sound "))
    assert len(other.split()) == 10
