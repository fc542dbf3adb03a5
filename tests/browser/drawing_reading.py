"""Drawings of structures in the page: their tabs, arrows and chips, and where a mouse meets an arrow."""

from typing import Any

from pages import Made
from playwright.sync_api import Locator, Page

# A point of the arrow that is in sight and not under another part of the page: pixels of the window.
POINT = """(group) => {
  const path = group.querySelector('path:not(.bnx-reach)');
  const [length, place] = [path.getTotalLength(), path.getScreenCTM()];
  for (const share of [0.5, 0.4, 0.6, 0.3, 0.7, 0.2, 0.8, 0.15, 0.85]) {
    const at = path.getPointAtLength(share * length).matrixTransform(place);
    if (group.contains(document.elementFromPoint(at.x, at.y))) return [at.x, at.y];
  }
  return null;
}"""


def recommended(demo: Made) -> dict[str, Any]:
    name = demo.document["recommended"]["name"]
    return next(one for one in demo.document["structures"] if one["name"] == name)


def strongest(demo: Made) -> dict[str, Any]:
    edges: list[dict[str, Any]] = recommended(demo)["edges"]
    return max(edges, key=lambda edge: edge["bits"])


def panel_of(page: Page, name: str) -> Locator:
    return page.locator(f'.structure[data-structure="{name}"]')


def open_structure(page: Page, name: str) -> Locator:
    """Open the tab of a structure; give its panel."""
    panel = panel_of(page, name)
    page.locator(f'[role="tab"][aria-controls="{panel.get_attribute("id")}"]').click()
    page.mouse.move(0, 0)  # else scrolling could bring an arrow under the pointer
    return panel


def arrows(panel: Locator, drawing: int = 0) -> Locator:
    return panel.locator(".drawings > .drawing").nth(drawing).locator('svg [role="button"][aria-label*=" → "]')


def arrow_of(panel: Locator, edge: dict[str, Any]) -> Locator:
    begin = f"\u2068{edge['parent']}\u2069 → \u2068{edge['child']}\u2069:"  # names are isolated from their surroundings
    return panel.locator(f'.drawings svg [role="button"][aria-label^="{begin}"]')


def chip_of(panel: Locator, name: str) -> Locator:
    return panel.locator(f'.drawings svg [role="button"][aria-label^="\u2068{name}\u2069:"]')


def shown(those: Locator) -> int:
    return sum(one.is_visible() for one in those.all())


def point_of(page: Page, arrow: Locator) -> tuple[float, float]:
    """Bring an arrow into sight; find where a mouse meets it."""
    arrow.scroll_into_view_if_needed()
    found = arrow.evaluate(POINT)
    assert found is not None, "the arrow lies under other parts of the page"
    return found[0], found[1]
