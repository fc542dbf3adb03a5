"""The whole page in a browser: quiet, within its width, readable in both themes, and usable by everybody."""

from collections.abc import Mapping, Sequence
from typing import Any

import pytest
from axe_playwright_python.sync_playwright import Axe
from pages import Made, Opened, Theme, opened, rgb, unfolded
from playwright.sync_api import Browser, expect

from bnx.palette import PALETTES

WIDTHS = (1280, 420)
THEMES: tuple[Theme, ...] = ("light", "dark")
SECTIONS = ("answer", "structures", "scores", "pairs", "attributes", "method")


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


SEEN = [
    *(("demo", width, theme) for width in WIDTHS for theme in THEMES),
    ("hostile", 1280, "light"),
    ("hostile", 420, "dark"),
]


@pytest.mark.parametrize(("name", "width", "theme"), SEEN)
def test_nothing_serious_stands_in_the_way_of_anybody(
    browser: Browser, name: str, theme: Theme, width: int, request: pytest.FixtureRequest
) -> None:
    """With all that is folded away opened, and the panel of a pair beside or over the page."""
    path = request.getfixturevalue(name).path
    with opened(browser, path, width=width, theme=theme, trusted=True) as found:
        unfolded(found.page)
        if width > 1000:  # where it covers the page, nothing else is looked at
            found.page.locator("#pair-table .pair-open").first.click()
        assert faults(found) == []


@pytest.mark.parametrize("theme", THEMES)
def test_nothing_serious_stands_in_the_way_inside_the_panel(browser: Browser, demo: Made, theme: Theme) -> None:
    with opened(browser, demo.path, width=420, theme=theme, trusted=True) as found:
        found.page.locator("#pair-table .pair-open").first.click()
        assert faults(found) == []


def test_serious_faults_are_noticed(browser: Browser, demo: Made) -> None:
    with opened(browser, demo.path, trusted=True) as found:
        found.page.add_style_tag(content="p { color: #bbb }")
        found.page.evaluate("document.querySelector('main').append(document.createElement('input'))")
        assert {one.split(":")[0] for one in faults(found)} >= {"color-contrast", "label"}


@pytest.mark.parametrize("way", ["mouse", "keyboard"])
def test_links_lead_to_every_section(browser: Browser, demo: Made, way: str) -> None:
    with opened(browser, demo.path) as found:
        page = found.page
        sections = [one.get_attribute("id") for one in page.locator("main > section").all()]
        links = page.locator("nav.sections a")
        assert [one.get_attribute("href") for one in links.all()] == [f"#{one}" for one in sections]
        for link, section in zip(links.all(), sections, strict=True):
            if way == "mouse":
                link.click()
            else:
                link.focus()
                page.keyboard.press("Enter")
            heading = page.locator(f"#{section}").locator("h1, h2").first
            expect(heading).to_be_in_viewport()
            under = page.locator("nav.sections").evaluate("(one) => one.getBoundingClientRect().bottom")
            assert heading.evaluate("(one) => one.getBoundingClientRect().top") >= under - 1, section
        found.assert_quiet()


def test_every_link_within_the_page_leads_somewhere(browser: Browser, demo: Made) -> None:
    with opened(browser, demo.path) as found:
        places = found.page.locator('a[href^="#"]').evaluate_all("(all) => all.map((one) => one.getAttribute('href'))")
        assert len(places) > 6
        assert [one for one in places if not found.page.locator(one).count()] == []


@pytest.mark.parametrize("theme", THEMES)
@pytest.mark.parametrize("way", ["mouse", "keyboard"])
def test_every_colour_is_that_of_the_theme(browser: Browser, demo: Made, theme: Theme, way: str) -> None:
    """As the system is set, and whatever it is set to once a theme is chosen."""
    tokens = "(names) => names.map((one) => getComputedStyle(document.documentElement).getPropertyValue(`--${one}`))"
    names = list(PALETTES[theme])
    with opened(browser, demo.path, theme="dark" if theme == "light" else "light") as found:
        page = found.page
        if way == "mouse":
            page.locator("#theme label").filter(has_text=theme).click()
        else:
            page.locator("#theme input").first.focus()
            for _ in range(1 + THEMES.index(theme)):
                page.keyboard.press("ArrowRight")
        expect(page.get_by_role("radio", name=theme, exact=True)).to_be_checked()
        colours = [one.strip().lower() for one in page.evaluate(tokens, names)]
        assert colours == [PALETTES[theme][one].lower() for one in names]
        found.assert_quiet()


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
