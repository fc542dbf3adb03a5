"""Scores, links and paper: the choice of a score and of a table of classes, pairs named in sentences, and print."""

import re

import pytest
from pages import Made, opened, rgb
from playwright.sync_api import Browser, Page, expect

from bnx.palette import PALETTES

METRICS = ("log_loss", "brier", "accuracy", "balanced_accuracy", "auc", "calibration_error")


def shown(page: Page, kind: str) -> list[str]:
    """List the figures of a kind that can be seen, by their data attribute."""
    return [one.get_attribute(f"data-{kind}") or "" for one in page.locator(f"[data-{kind}]").all() if one.is_visible()]


@pytest.mark.parametrize("by", ["mouse", "keyboard"])
def test_every_score_can_be_chosen(browser: Browser, demo: Made, by: str) -> None:
    with opened(browser, demo.path) as found:
        page = found.page
        choices = page.locator("#metric-choice input")
        assert shown(page, "metric") == ["log_loss"]
        if by == "keyboard":
            choices.first.focus()
        for number, metric in enumerate(METRICS[1:], start=1):
            if by == "keyboard":
                page.keyboard.press("ArrowRight")
            else:
                page.locator("#metric-choice label").nth(number).click()
            assert shown(page, "metric") == [metric]
        found.assert_quiet()


def test_a_chart_says_what_the_document_says(browser: Browser, demo: Made) -> None:
    chosen = next(one for one in demo.document["structures"] if one["name"] == demo.document["recommended"]["name"])
    with opened(browser, demo.path) as found:
        for number, metric in enumerate(METRICS):
            found.page.locator("#metric-choice label").nth(number).click()
            against = chosen["against_baseline"]["by_metric"][metric]
            low, high = against["interval"]
            told = f"{chosen['name']}, recommended {against['difference']:+.3f} [{low:+.3f}, {high:+.3f}]"
            expect(found.page.locator(f"[data-metric={metric}] svg")).to_contain_text(told)


@pytest.mark.parametrize("by", ["mouse", "keyboard"])
def test_every_table_of_classes_can_stand_beside_that_of_the_baseline(browser: Browser, demo: Made, by: str) -> None:
    document = demo.document
    names = {one["name"] for one in document["structures"]} | {"mix"}
    with opened(browser, demo.path) as found:
        page = found.page
        choices = page.locator("#class-choice input")
        assert {one.get_attribute("value") for one in choices.all()} == names - {"naive"}
        assert shown(page, "classes") == [document["recommended"]["name"], "naive"]
        if by == "keyboard":
            choices.first.focus()
        for number in range(1, choices.count()):
            if by == "keyboard":
                page.keyboard.press("ArrowRight")
            else:
                page.locator("#class-choice label").nth(number).click()
            assert set(shown(page, "classes")) == {choices.nth(number).get_attribute("value"), "naive"}
        found.assert_quiet()


@pytest.mark.parametrize("by", ["mouse", "keyboard"])
def test_further_columns_of_the_scores_are_shown_on_demand(browser: Browser, demo: Made, by: str) -> None:
    with opened(browser, demo.path) as found:
        slopes = found.page.get_by_role("columnheader", name="calibration slope")
        expect(slopes).to_have_count(0)
        box = found.page.locator("#all-columns")
        if by == "keyboard":
            box.focus()
            found.page.keyboard.press("Space")
        else:
            box.click()
        expect(slopes).to_be_visible()


@pytest.mark.parametrize("by", ["mouse", "keyboard"])
def test_a_pair_named_in_a_sentence_opens_and_gives_the_focus_back(browser: Browser, demo: Made, by: str) -> None:
    with opened(browser, demo.path) as found:
        page = found.page
        link = page.locator("#answer .twice li a, #answer .twice li button").first
        a, b = re.split(r" ?~ ?", (link.text_content() or "").strip())
        if by == "keyboard":
            link.focus()
            page.keyboard.press("Enter")
        else:
            link.click()
        panel = page.locator("#pair-panel")
        expect(panel).to_be_visible()
        expect(panel.locator("h2").first).to_contain_text(a.strip())
        expect(panel.locator("h2").first).to_contain_text(b.strip())
        page.keyboard.press("Escape")
        expect(panel).to_be_hidden()
        expect(link).to_be_focused()
        found.assert_quiet()


def test_paper_is_light_and_bears_no_control(browser: Browser, demo: Made) -> None:
    with opened(browser, demo.path, theme="dark") as found:
        page = found.page
        page.get_by_role("radio", name="dark", exact=True).check()
        page.emulate_media(media="print")
        assert page.evaluate("getComputedStyle(document.documentElement).backgroundColor") == "rgb(255, 255, 255)"
        ink = rgb(PALETTES["light"]["text"])
        assert page.evaluate("getComputedStyle(document.body).color") == ink
        assert page.evaluate("getComputedStyle(document.querySelector('.bnx-picture .bnx-fill-text')).fill") == ink
        assert [one for one in page.locator("input, select").all() if one.is_visible()] == []
        for section in ("answer", "structures", "scores", "pairs", "attributes", "method"):
            assert page.locator(f"#{section} h2, #{section} h1").first.is_visible()
