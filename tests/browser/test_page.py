"""The whole page in a browser: quiet, within its width, readable in both themes, and usable by everybody."""

from collections.abc import Mapping, Sequence
from typing import Any

import pytest
from axe_playwright_python.sync_playwright import Axe
from pages import Made, Opened, Theme, opened
from playwright.sync_api import Browser

from bnx.palette import PALETTES

WIDTHS = (1280, 420)
THEMES: tuple[Theme, ...] = ("light", "dark")
SECTIONS = ("answer", "structures", "scores", "pairs", "attributes", "method")


def rgb(colour: str) -> str:
    red, green, blue = (int(colour[place : place + 2], 16) for place in (1, 3, 5))
    return f"rgb({red}, {green}, {blue})"


def faults(found: Opened) -> Sequence[str]:
    """List the accessibility faults that are serious or worse, with where they are."""
    results: Mapping[str, Any] = Axe().run(found.page).response
    return [
        f"{one['id']}: {one['help']}: {[node['html'][:160] for node in one['nodes'][:3]]}"
        for one in results["violations"]
        if one["impact"] in {"serious", "critical"}
    ]


@pytest.mark.parametrize("scripts", [True, False])
def test_the_page_opens_from_disk_without_a_word_or_a_request(browser: Browser, demo: Made, scripts: bool) -> None:
    with opened(browser, demo.path, scripts=scripts) as found:
        assert [found.page.locator(f"section#{one}").count() for one in SECTIONS] == [1] * len(SECTIONS)
        assert found.page.locator("section#answer h1").is_visible()
        found.assert_quiet()


def test_the_demo_s_page_is_small(demo: Made) -> None:
    assert demo.path.stat().st_size < 1_500_000


@pytest.mark.parametrize("theme", THEMES)
@pytest.mark.parametrize("width", WIDTHS)
def test_nothing_serious_stands_in_the_way_of_anybody(browser: Browser, demo: Made, theme: Theme, width: int) -> None:
    with opened(browser, demo.path, width=width, theme=theme, trusted=True) as found:
        assert faults(found) == []


@pytest.mark.parametrize("theme", THEMES)
def test_the_page_follows_the_system_until_a_theme_is_chosen(browser: Browser, demo: Made, theme: Theme) -> None:
    other: Theme = "dark" if theme == "light" else "light"
    background = "getComputedStyle(document.documentElement).backgroundColor"
    frame = "getComputedStyle(document.querySelector('.bnx-picture .bnx-fill-frame')).fill"
    with opened(browser, demo.path, theme=theme) as found:
        page = found.page
        assert page.evaluate(background) == rgb(PALETTES[theme]["background"])
        assert page.evaluate(frame) == rgb(PALETTES[theme]["frame"])
        page.get_by_role("radio", name=other, exact=True).check()
        assert page.evaluate(background) == rgb(PALETTES[other]["background"])
        assert page.evaluate(frame) == rgb(PALETTES[other]["frame"])
        page.get_by_role("radio", name="as the system").focus()
        page.keyboard.press("Space")
        assert page.evaluate(background) == rgb(PALETTES[theme]["background"])
        found.assert_quiet()
