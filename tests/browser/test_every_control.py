"""Every control of every section, whatever there is: reached by the Tab key, seen when in focus, and of some effect."""

from collections import Counter
from typing import Any

import pytest
from pages import Made, Opened, opened
from playwright.sync_api import Browser, Locator, Page

# Number all that can be worked, in their order; what the Tab key does not stop at is reached by other keys from what it
# does stop at: the radios of a group that are not chosen, and all but one of a set with keys of its own.
NUMBERED = """() => {
  const all = 'a[href], button, input, select, textarea, summary, [tabindex], [role="button"]';
  const seen = [...document.querySelectorAll(all)].filter((one) => {
    const box = one.getBoundingClientRect();
    return box.width && box.height && !one.disabled && one.checkVisibility({ visibilityProperty: true });
  });
  return seen.map((one, number) => {
    one.dataset.control = number;
    const kind = one.tagName === 'INPUT' ? one.type : (one.getAttribute('role') ?? one.tagName.toLowerCase());
    const other = one.type === 'radio' && !one.checked;
    const section = one.closest('section, nav, header, dialog');
    return { number, kind, stop: one.tabIndex >= 0 && !other,
      id: one.id || one.closest('[id]')?.id,
      sort: [section?.id, kind, one.className.baseVal ?? one.className, one.id.replace(/[0-9]+/g, '')].join(' '),
      words: `${kind} ${one.id} ${(one.getAttribute('aria-label') ?? one.textContent).trim().slice(0, 40)}` };
  });
}"""
FOCUSED = """() => {
  const one = document.activeElement;
  if (!one || one === document.body) return null;
  const ringed = (node) => {
    const style = node && getComputedStyle(node);
    return style && ((style.outlineStyle !== 'none' && parseFloat(style.outlineWidth) >= 1) || node.matches('.lit'));
  };
  return { number: Number(one.dataset.control ?? -1), ringed: Boolean(ringed(one) || ringed(one.nextElementSibling)),
    words: one.outerHTML.slice(0, 120) };
}"""
STATE = """() => [document.documentElement.outerHTML, location.hash, scrollY,
  ...[...document.querySelectorAll('input')].map((one) => one.value + one.checked),
  ...[...document.querySelectorAll('details')].map((one) => one.open)].join('|')"""
OF_A_SORT = 1
NOT_FOR_A_MOUSE = """(one) => one.matches('.skip, [aria-selected="true"]')"""  # out of sight; open already
KEYS = {
    "checkbox": "Space",
    "radio": "ArrowRight",
    "select": "ArrowDown",
    "range": "PageUp",
    "search": "x",
    "tab": "ArrowRight",
}
STILL = {"region", "application"}  # boxes that scroll, and the triangle, whose keys are tested on their own


SETTLED = "new Promise((done) => requestAnimationFrame(() => requestAnimationFrame(done)))"


def controls(page: Page) -> list[dict[str, Any]]:
    """Number the controls once all is drawn, as rows drawn anew afterwards would lose their numbers."""
    page.evaluate(SETTLED)
    found: list[dict[str, Any]] = page.evaluate(NUMBERED)
    return found


@pytest.mark.parametrize("width", [1280, 420])
def test_the_tab_key_reaches_every_control_and_shows_where_it_is(browser: Browser, demo: Made, width: int) -> None:
    with opened(browser, demo.path, width=width) as found:
        page = found.page
        wanted = {one["number"]: one["words"] for one in controls(page) if one["stop"]}
        assert len(wanted) > 40
        reached, unseen = set(), []
        for _ in range(2 * len(wanted)):
            page.keyboard.press("Tab")
            focused = page.evaluate(FOCUSED)
            if focused is None:
                break
            reached.add(focused["number"])
            if not focused["ringed"]:
                unseen.append(focused["words"])
        assert [words for number, words in wanted.items() if number not in reached] == []
        assert unseen == []
        found.assert_quiet()


def of_every_sort(found: list[dict[str, Any]]) -> list[dict[str, Any]]:
    """Take the first of all that are alike, so that no sort is left out."""
    seen: Counter[str] = Counter()
    taken = []
    for one in found:
        seen[one["sort"]] += 1
        if seen[one["sort"]] <= OF_A_SORT and one["kind"] not in STILL:
            taken.append(one)
    return taken


def work(page: Page, control: Locator, kind: str, way: str) -> None:
    if way == "keyboard":
        control.focus()
        page.keyboard.press(KEYS.get(kind, "Enter"))
    elif kind == "select":
        control.select_option(index=control.locator("option").count() - 1)
    elif kind == "range":
        control.click(position={"x": 60, "y": 6})
    elif kind == "search":
        control.click()
        control.press_sequentially("x")
    elif kind == "radio":
        control.locator("xpath=ancestor::fieldset").locator("label:not(:has(:checked))").first.click()
    elif kind == "button" and control.evaluate("(one) => one instanceof SVGElement"):
        control.dispatch_event("click")
    else:
        control.click()


@pytest.mark.parametrize("way", ["mouse", "keyboard"])
def test_every_control_does_something(browser: Browser, demo: Made, way: str) -> None:
    with opened(browser, demo.path) as found:
        taken = of_every_sort(controls(found.page))
        assert {one["kind"] for one in taken} >= {
            "a",
            "button",
            "checkbox",
            "radio",
            "range",
            "select",
            "tab",
            "search",
        }
    idle = []
    with opened(browser, demo.path) as found:
        page = found.page
        for one in taken:
            page.goto(demo.path.as_uri())
            controls(page)
            control = page.locator(f'[data-control="{one["number"]}"]')
            if way == "mouse" and control.evaluate(NOT_FOR_A_MOUSE):
                continue
            control.scroll_into_view_if_needed()
            before = page.evaluate(STATE)
            work(page, control, one["kind"], way)
            if "reset" not in str(one["id"]) and not changes(page, before):
                idle.append(one["words"])
        check(found, idle)


def changes(page: Page, before: str) -> bool:
    """Wait until the page is another one than before, for at most a second."""
    for _ in range(20):
        if page.evaluate(STATE) != before:
            return True
        page.wait_for_timeout(50)
    return False


def check(found: Opened, idle: list[str]) -> None:
    assert idle == []
    found.assert_quiet()
    assert found.page.evaluate("document.scrollingElement.scrollWidth <= innerWidth")
