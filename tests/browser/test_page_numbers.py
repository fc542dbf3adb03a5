"""Every number that the page prints stands in the comparison, to the printed digits."""

import re
from collections import Counter

import pytest
from pages import Made, opened
from playwright.sync_api import Browser
from printed_numbers import numbers_in, printable_numbers

# The texts of a section, with what only hovering or a screen reader tells; axes and scales bear numbers of their own.
TEXTS = """(id) => {
  const texts = [];
  const walk = (one) => {
    if (one.nodeType === Node.TEXT_NODE) texts.push(one.textContent);
    if (one.nodeType !== Node.ELEMENT_NODE || one.matches('.tick, .scale, script, style, select, input')) return;
    if (one.matches('svg.folds text.faint, svg.chart text.faint')) return;
    for (const key of ['title', 'aria-label']) if (one.hasAttribute(key)) texts.push(one.getAttribute(key));
    one.childNodes.forEach(walk);
  };
  walk(document.getElementById(id));
  return texts;
}"""
YEAR = re.compile(r"\b(?:19|20)\d\d\b")  # of the publications
WORDING = {"95", "80", "1,000", "0", "1"}
LEAST = {"answer": 20, "structures": 200, "scores": 100, "pairs": 200, "attributes": 12, "method": 20}


def unexplained(texts: list[str], known: set[str]) -> Counter[str]:
    return Counter(one for text in texts for one in numbers_in(text) if one not in known | WORDING)


@pytest.mark.parametrize("section", LEAST)
@pytest.mark.parametrize("scripts", [True, False])
def test_every_number_is_one_of_the_comparison(browser: Browser, demo: Made, section: str, scripts: bool) -> None:
    with opened(browser, demo.path, scripts=scripts) as found:
        texts = found.page.evaluate(TEXTS, section)
    if section == "method":
        texts = [YEAR.sub("", text) for text in texts]
    assert sum(len(numbers_in(text)) for text in texts) >= LEAST[section]
    left = unexplained(texts, printable_numbers(demo.document))
    assert left == Counter(), [text for text in texts if set(numbers_in(text)) & set(left)][:20]


def test_numbers_that_are_not_in_the_comparison_are_noticed(demo: Made) -> None:
    """A small wrong figure can fit some other value by chance: cells of tables are checked one by one elsewhere."""
    known = printable_numbers(demo.document)
    figures = [f"{pair['bits'] + 0.0137:.4f}" for pair in demo.document["pairs"] if pair["bits"] > 0.03]
    assert len(figures) >= 7
    assert sum(unexplained(figures, known).values()) >= len(figures) / 2
    assert unexplained(["6,001 records", "kdb2 saves 7.3131 bits"], known).keys() == {"6,001", "7.3131"}
