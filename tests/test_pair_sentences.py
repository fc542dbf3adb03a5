"""What is said in words of a pair: what the class explains, whether classes differ, and trends."""

import re

import numpy as np
import pandas as pd
import pytest
from probed import CLASSES, copied, planted, probed, words
from test_tested_text import section

from bnx.tested_text import written
from bnx.verdicts import TestResult


def crossed(rows: int, seed: int, first: float, second: float, lean: float = 0.0) -> pd.DataFrame:
    """Draw two columns of two levels that agree with the chance (1 + first) / 2 in one class and (1 + second) / 2 in
    the other; ``lean`` pulls both towards the class.
    """
    random = np.random.default_rng(seed)
    kind, other = random.integers(0, 2, rows), random.integers(0, 2, rows)
    left, right = (copied(random, kind, 2, lean) for _ in range(2))
    strength = np.where(kind == 0, first, second)
    turned = np.where(strength < 0, 1 - left, left)
    right = np.where(random.random(rows) < np.abs(strength), turned, right)
    columns = {"left": left, "right": right, "other": other, "kind": kind}
    return pd.DataFrame({name: words(codes, name[0]) for name, codes in columns.items()})


MEANINGS = {
    "explained by kind": crossed(6000, 1, 0.0, 0.0, 0.6),
    "{share:.0%} of it is left": crossed(6000, 1, 0.5, 0.5),
    "it is stronger there": crossed(6000, 1, 0.7, -0.4),
    "it appears only there": crossed(6000, 1, 0.5, -0.5),
    "not rejected either way, so there is nothing to explain": crossed(200, 1, 0.0, 0.0),
    "not enough data to say what kind explains": crossed(150, 3, 0.0, 0.0, 0.6),
}


def words_of(meaning: str, one: TestResult) -> str:
    """Put the share of the bits that is left into the sentence that tells it."""
    return meaning.format(share=min(1.0, one.bits_corrected / one.marginal_bits_corrected))


@pytest.mark.parametrize("meaning", MEANINGS)
@pytest.mark.parametrize("given", [(), ("other",)])
def test_what_the_class_explains_is_said_in_words(meaning: str, given: tuple[str, ...]) -> None:
    tests = probed(MEANINGS[meaning], "kind", ("left", "right"), given=given)
    one, conditions = tests.results[0], ", ".join(("kind", *given))
    text = section(written(tests), "left ~ right")
    interval = "" if np.isnan(one.bits_low) else f" (95 % {one.bits_low:.4f} to {one.bits_high:.4f})"
    if one.verdict == "negligible":
        interval = f" (95 % at most {one.bits_at_most:.4f})"
    alone = f"{max(0.0, tests.given_class['left', 'right']):.4f} given kind alone, " if given else ""
    bits = [f"{max(0.0, value):.4f}" for value in (one.marginal_bits_corrected, one.bits_corrected)]
    assert (
        f"{bits[0]} bits given nothing, {alone}{bits[1]}{interval} given {conditions}, less what chance alone would "
        f"give: {words_of(meaning, one).replace('kind', conditions)}. "
    ) in text


def pattern(text: str) -> str:
    found = re.search(r"\(X2 [^)]*\)", text)
    assert found
    return found.group()


def test_a_p_of_equal_patterns_that_can_be_no_less_is_printed_as_a_bound() -> None:
    """Of 999 drawn tables and the observed one none lies as far out: p is at most 1 / 1,000, whatever it is."""
    frame = planted(150, 2, {"sound": 1.0}, levels=4)
    tests = probed(frame, "kind", ("left", "right"))
    same = tests.details["left", "right"].same
    assert (same.method, same.p) == ("monte-carlo", 0.001)
    shown = pattern(section(written(tests), "left ~ right"))
    assert shown == f"(X2 {same.x2:.2f}, df {same.df}, p <= 0.001, monte-carlo)"
    tail = probed(planted(3000, 2, {"sound": 1.0}), "kind", ("left", "right"))
    assert tail.details["left", "right"].same.p < 1e-9
    assert "<=" not in pattern(section(written(tail), "left ~ right"))
    weak = probed(planted(90, 5, {"sound": 0.5}, levels=4), "kind", ("left", "right"))
    same = weak.details["left", "right"].same
    assert same.method == "monte-carlo"
    assert pattern(section(written(weak), "left ~ right")).endswith(f" p {same.p:.2g}, monte-carlo)")


def test_degrees_of_freedom_that_nobody_counted_are_not_printed(monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr("bnx.loglinear._MOST_LINES", 10)
    tests = probed(planted(900, 7, {"worn": 0.7}), "kind", ("left", "right"))
    same = tests.details["left", "right"].same
    assert same.df is None
    assert pattern(section(written(tests), "left ~ right")) == f"(X2 {same.x2:.2f}, p <= 0.001, monte-carlo)"
    assert tests.to_dict()["tests"][0]["same_in_every_class"]["df"] is None


@pytest.mark.parametrize("ordered", ["left", "right"])
def test_mean_scores_are_named_by_what_is_scored(ordered: str) -> None:
    frame = planted(900, 4, dict.fromkeys(CLASSES, 0.4))
    order = {ordered: tuple(sorted(set(frame[ordered])))}
    tests = probed(frame, "kind", ("left", "right"), ordered=order)
    trend = tests.details["left", "right"].trend
    assert trend is not None
    other = {"left": "right", "right": "left"}[ordered]
    expected = f"Mean {ordered} by level of {other} (generalised CMH): {trend.statistic:.2f}, df {trend.df}, p "
    assert expected in section(written(tests), "left ~ right")


def test_without_an_order_the_general_test_is_told_except_for_two_by_two() -> None:
    """There it is the CMH that is told with the odds ratio."""
    for levels in (3, 2):
        tests = probed(planted(900, 4, dict.fromkeys(CLASSES, 0.4), levels=levels), "kind", ("left", "right"))
        trend = tests.details["left", "right"].trend
        assert trend is not None
        shown = f"If all strata share one pattern (generalised CMH): {trend.statistic:.2f}, df {trend.df}, p "
        assert (shown in section(written(tests), "left ~ right")) == (levels == 3)


def test_a_trend_of_both_is_named_linear_with_its_correlation() -> None:
    frame = planted(900, 4, dict.fromkeys(CLASSES, 0.4))
    order = {name: tuple(sorted(set(frame[name]))) for name in ("left", "right")}
    tests = probed(frame, "kind", ("left", "right"), ordered=order)
    trend = tests.details["left", "right"].trend
    assert trend is not None
    shown = f"Linear trend of both (generalised CMH): {trend.statistic:.2f}, df 1, p "
    text = section(written(tests), "left ~ right")
    assert shown in text
    assert f", correlation within strata {trend.correlation:+.3f}." in text
