"""Reliability on the page: pictures, words and tables hold what the comparison document holds."""

import copy
import re
from typing import Any

import pytest
from readpage import Page
from smallrun import small_run

from bnx.reliability_chart import reliability_charts
from bnx.reliability_words import calibration_words, sure
from bnx.report import report_html


@pytest.fixture
def document() -> dict[str, Any]:
    return copy.deepcopy(small_run().comparison)


def curve(*bins: tuple[float, float, float, float], error: float = 0.125, loss: float | None = 0.5) -> dict[str, Any]:
    """Make a curve of bins of 100 records: (said, right, low, high)."""
    own = [
        {"mean_probability": said, "share_right": right, "interval": [low, high], "rows": 100, "effective_rows": 100.0}
        for said, right, low, high in bins
    ]
    return {"log_loss": loss, "calibration_error": error, "bins": own}


def told(document: dict[str, Any], temperature: float, before: dict[str, Any], after: dict[str, Any]) -> str:
    document["structures"][0]["temperature"] = temperature
    document["reliability"] = {"naive": {"before": before, "after": after}}
    return calibration_words(document, "naive")


def test_the_document_holds_naive_and_the_recommended_one(document: dict[str, Any]) -> None:
    held = set(document["reliability"]) - {"mix"}
    assert held == {"naive", document["recommended"]["name"]}
    assert ("mix" in document["reliability"]) == document["mix"]["offered"]
    for one in document["structures"]:
        if one["name"] in held:
            found = document["reliability"][one["name"]]
            assert found["after"]["calibration_error"] == one["calibration_error"]
            assert found["after"]["log_loss"] == one["log_loss"]
            assert sum(own["rows"] for own in found["before"]["bins"]) == document["rows"]


def test_tables_and_words_hold_the_figures_of_the_document(document: dict[str, Any]) -> None:
    page = Page(report_html(document, {}))
    for number, (name, found) in enumerate(document["reliability"].items(), 1):
        rows = page.tables[f"rely{number}-table"][1:]
        expected = [
            [
                side,
                f"{one['rows']:,}",
                f"{100 * one['mean_probability']:.2f} %",
                f"{100 * one['share_right']:.1f} %",
                f"{100 * one['interval'][0]:.1f} to {100 * one['interval'][1]:.1f} %",
            ]
            for side in ("before", "after")
            for one in (found[side] or {"bins": []})["bins"]
        ]
        assert rows == expected
        assert calibration_words(document, name) in page.text
        assert f"Reliability of {name}" in page.text


def test_marks_stand_where_the_figures_say(document: dict[str, Any]) -> None:
    for chart in reliability_charts(document):
        found = document["reliability"][chart.name]
        low = float(chart.ticks[0][2]) / 100
        for side in chart.sides:
            for mark, one in zip(side.marks, found[side.kind]["bins"], strict=True):
                assert low + (mark.x - chart.left) / (chart.right - chart.left) * (1 - low) == pytest.approx(
                    one["mean_probability"], abs=1e-3
                )
                for y, share in zip((mark.low, mark.y, mark.high), sorted(_three(one)), strict=True):
                    there = low + (chart.bottom - y) / (chart.bottom - chart.top) * (1 - low)
                    assert there == pytest.approx(share, abs=1e-3)
                assert chart.top <= mark.high <= mark.y <= mark.low <= chart.bottom


def _three(one: dict[str, Any]) -> list[float]:
    return [*one["interval"], one["share_right"]]


def test_before_and_after_differ_by_more_than_colour(document: dict[str, Any]) -> None:
    page = Page(report_html(document, {}))
    kinds = {attributes.get("class"): tag for tag, attributes in page.elements}
    assert kinds["rely-before"] == "rect"
    assert kinds["rely-after"] == "circle"
    rules = dict(re.findall(r"\.(rely-[a-z-]+)\{([^}]*)\}", page.style))
    assert "stroke-dasharray" in rules["rely-line-before"]
    assert "stroke-dasharray" not in rules["rely-line-after"]
    assert "fill:var(--background)" in rules["rely-before"]


OFF, GOOD = curve((0.6, 0.6, 0.5, 0.7), (0.95, 0.88, 0.8, 0.94)), curve((0.94, 0.935, 0.87, 0.97), error=0.0625)


def test_too_sure_is_said_with_its_reason(document: dict[str, Any]) -> None:
    document["pairs_verdicts"]["dependent"] = 3
    assert told(document, 0.654, OFF, GOOD) == (
        "Naive Bayes: evidence counts 0.65 of its face value, as happens where dependence is not modelled, or tables "
        "hold few records. Before calibration, its answers that were 95 % sure were right in 88 % of records; after "
        "it, those that were 94 % sure were right in 94 %. Calibration error 0.125 before, 0.062 after; log loss "
        "0.500 bits before, 0.500 bits after."
    )
    document["pairs_verdicts"]["dependent"] = 0
    assert "with no dependent pair in sight, a small table may be why" in told(document, 0.654, OFF, GOOD)
    document["reliability"]["tan"] = document["reliability"]["naive"]
    document["pairs_verdicts"]["dependent"] = 3
    document["structures"][1]["temperature"] = 0.8
    assert calibration_words(document, "tan").startswith(
        "tan: evidence counts 0.80 of its face value, as happens where dependence is not modelled, or tables hold "
        "few records."
    )


def test_too_timid_and_about_right_are_said(document: dict[str, Any]) -> None:
    timid = told(document, 1.3, curve((0.7, 0.9, 0.82, 0.95)), GOOD)
    assert timid.startswith("Naive Bayes: evidence counts more than its face value, 1.30 of it: as counted, it was too")
    assert "answers that were 70 % sure were right in 90 % of records; after it, it is never that sure." in timid
    right = told(document, 1.0, curve((0.7, 0.7, 0.6, 0.8), loss=None), GOOD)
    assert right.startswith("Naive Bayes: evidence counts at about its face value (1.00 of it). Before calibration no")
    assert "log loss infinite before, 0.500 bits after" in right


def test_without_calibration_there_is_one_curve_and_it_is_said(document: dict[str, Any]) -> None:
    document["settings"]["temperature"] = False
    for found in document["reliability"].values():
        found["before"] = found["after"]
    text = Page(report_html(document, {})).text
    assert "Nothing was calibrated, so this is both before and after. Calibration error" in text
    for chart in reliability_charts(document):
        assert [side.kind for side in chart.sides] == ["not calibrated"]
    assert "before calibration" not in text


def test_a_mix_has_nothing_before(document: dict[str, Any]) -> None:
    document["reliability"]["mix"] = {"before": None, "after": GOOD}
    chart = reliability_charts(document)[-1]
    assert [side.kind for side in chart.sides] == ["after"]
    assert chart.words.startswith("A mix of calibrated structures: there is nothing before calibration.")


def test_nobody_is_said_to_be_wholly_sure() -> None:
    assert [sure(share) for share in (0.876, 0.9912, 0.99949, 0.9999, 1.0)] == [
        "88 %", "99.1 %", "99.9 %", "over 99.9 %", "100 %",
    ]  # fmt: skip
