"""Every number that the page prints stands in the comparison, to the printed digits and with its sign.

What a table, a drawing or the panel prints is compared field by field in ``test_page_fields``; this walk reaches every
text of every section, whatever sections there are, and every text that the scripts may print.
"""

import json
import re
from collections import Counter
from collections.abc import Iterator
from typing import Any

import pytest
from pages import Made, opened
from playwright.sync_api import Browser
from printed_numbers import forms, known_numbers, numbers_in, only
from record_reading import record_counts, record_means

SECTIONS = "[...document.querySelectorAll('main > section')].map((one) => one.id)"
# The texts of a section, with what only hovering or a screen reader tells; axes and scales bear numbers of their own.
TEXTS = """(id) => {
  const texts = [];
  const walk = (one) => {
    if (one.nodeType === Node.TEXT_NODE) texts.push(one.textContent);
    if (one.nodeType !== Node.ELEMENT_NODE || one.matches('.tick, .scale, script, style, input')) return;
    if (one.matches('svg.chart text.faint')) return;
    for (const key of ['title', 'aria-label']) if (one.hasAttribute(key)) texts.push(one.getAttribute(key));
    one.childNodes.forEach(walk);
  };
  walk(document.getElementById(id));
  return texts.filter((text) => /[0-9]/.test(text));
}"""
BLOCKS = """[...document.querySelectorAll('script[type="application/json"]')].map((one) => [one.id, one.textContent])"""
YEAR = re.compile(r"\b(?:19|20)\d\d\b")  # of the publications
WORDING = {"0", "1", "2", "3", "4", "8", "30", "80%", "95%", "1,000", "256"}
"""Of explanations: shades at 2, 4 and 8, residuals above 3, levels of under 30 records, power, intervals, mistakes in
1,000 records, the digest of the file."""
LARGE = {
    **{"pairs": ("pairs", "answer"), "pair_tables": ("pairs",), "records": ("records",)},
    "schema": ("attributes", "structures"),
}
"""Long parts of the comparison, where a wrong number could be found by chance, and the sections that tell of them."""
LEAST = {"answer": 20, "structures": 200, "scores": 100, "pairs": 200, "attributes": 300, "method": 12}


def counted(document: dict[str, Any]) -> Iterator[int]:
    """Count what the page counts: mistakes in 1,000 records, pairs that structures join, records of a class."""
    entries = [*document["structures"], *([document["mix"]] if document["mix"] else [])]
    mistakes = [round(1000 * (1 - one["accuracy"])) for one in entries]
    yield from mistakes
    yield from (abs(one - other) for one in mistakes for other in mistakes)
    joined = [{frozenset((edge["parent"], edge["child"])) for edge in one["edges"]} for one in document["structures"]]
    pairs = {frozenset((one["a"], one["b"])): one["verdict"] for one in document["pairs"]}
    by = [sum(pair in one for one in joined) for pair in pairs]
    yield from (*by, sum(map(bool, by)), sum(not one for one in by))
    yield from (sum(pairs[pair] == "dependent" for pair in one if pair in pairs) for one in joined)
    yield from Counter(document["recommended"]["picks"]).values()
    yield from (sum(row) for row in document["structures"][0]["confusion"])
    yield from record_counts(document)


def measured(document: dict[str, Any]) -> Iterator[float]:
    """Give what the page subtracts and divides: each fold less the baseline's, shares of a loss and of a class."""
    entries = document["structures"]
    base = next(one for one in entries if one["name"] == document["settings"]["baseline"])
    yield from ((base["log_loss"] - one["log_loss"]) / base["log_loss"] for one in entries)
    yield from (count / sum(row) for one in entries for row in one["confusion"] for count in row)
    yield from record_means(document)
    for one in [*entries, *([document["mix"]] if document["mix"] else [])]:
        for fold, other in zip(one["by_fold"], base["by_fold"], strict=True):
            yield from (value - other[key] for key, value in fold.items() if isinstance(value, float))


def counted_levels(document: dict[str, Any]) -> Iterator[int]:
    """Count what the page counts of levels: their records, those of a class, those drawn, and values without a name."""
    for one in (entry["counted"] for entry in document["schema"] if entry["counted"]):
        yield from map(sum, one["rows"])
        for table in (one["rows"], one["distribution"]["rows"] if one["distribution"] else []):
            yield from map(sum, zip(*table, strict=True))
        yield sum(one["blanks"]["rows"]) if one["blanks"] else 0
        yield one["pooled"]["values"] - len(one["pooled"]["most_frequent"]) if one["pooled"] else 0


def shared_levels(document: dict[str, Any]) -> Iterator[float]:
    """Give the shares of classes in levels, of levels in all, and of blanks in a class and in all others."""
    for one in (entry["counted"] for entry in document["schema"] if entry["counted"]):
        of_class = [sum(column) for column in zip(*one["rows"], strict=True)]
        yield from (count / sum(rows) for rows in [*one["rows"], of_class] for count in rows if sum(rows))
        yield from (sum(rows) / sum(of_class) for rows in one["rows"])
        blank = one["blanks"]["rows"] if one["blanks"] else [0] * len(of_class)
        yield from (few / many for few, many in zip(blank, of_class, strict=True))
        yield from ((sum(blank) - few) / (sum(of_class) - c) for few, c in zip(blank, of_class, strict=True))


def of_levels(document: dict[str, Any]) -> set[str]:
    shares = {form for value in set(shared_levels(document)) for form in forms(value)}
    return shares | {f"{one:,}" for one in counted_levels(document)}


def derived(document: dict[str, Any]) -> set[str]:
    counts = {f"{one:,}" for one in counted(document)}
    return counts | {form for value in set(measured(document)) for form in forms(value)}


def known(document: dict[str, Any], section: str) -> set[str]:
    left_out = [part for part, sections in LARGE.items() if section not in sections]
    own = of_levels(document) if section == "attributes" else set()
    return known_numbers(only(document, left_out)) | derived(document) | WORDING | own


def unexplained(texts: list[str], numbers: set[str]) -> dict[str, str]:
    return {one: text for text in texts for one in numbers_in(text) if one not in numbers}


@pytest.mark.parametrize("scripts", [True, False])
def test_every_number_is_one_of_the_comparison(browser: Browser, demo: Made, scripts: bool) -> None:
    with opened(browser, demo.path, scripts=scripts) as found:
        sections = found.page.evaluate(SECTIONS)
        assert set(LEAST) <= set(sections)
        for section in sections:
            texts = found.page.evaluate(TEXTS, section)
            if section == "method":
                texts = [YEAR.sub("", text) for text in texts]
            assert sum(len(numbers_in(text)) for text in texts) >= LEAST.get(section, 1), section
            assert unexplained(texts, known(demo.document, section)) == {}, section


def strings_in(part: Any) -> Iterator[str]:
    if isinstance(part, str):
        yield part
    elif isinstance(part, dict | list):
        for one in part.values() if isinstance(part, dict) else part:
            yield from strings_in(one)


def test_every_number_that_scripts_may_print_is_one_of_the_comparison(browser: Browser, demo: Made) -> None:
    """Printed figures are texts in the data; what is no text are places, ranks and pixels."""
    numbers = known_numbers(demo.document) | derived(demo.document) | WORDING
    with opened(browser, demo.path) as found:
        blocks = {name: json.loads(text) for name, text in found.page.evaluate(BLOCKS)}
    del blocks["data-triangle"]  # holds places in pixels; its numbers are compared mark by mark
    assert {"data-edges", "data-pairs", "data-panel", "data-tables"} <= set(blocks)
    for name, block in blocks.items():
        texts = list(strings_in(block))
        assert sum(len(numbers_in(text)) for text in texts) > 50, name
        assert unexplained(texts, numbers) == {}, name


def test_numbers_that_are_not_in_the_comparison_are_noticed(demo: Made) -> None:
    numbers = known(demo.document, "answer")
    figures = [f"{pair['bits'] + 0.0137:.4f}" for pair in demo.document["pairs"] if pair["bits"] > 0.03]
    assert len(figures) >= 7
    assert len(unexplained(figures, numbers)) >= 0.8 * len(figures)
    wrong = ["6,001 records", "kdb2 saves 7.3131 bits", "93.74 % of them", "log loss -0.7568", "123 of them"]
    assert set(unexplained(wrong, numbers)) == {"6,001", "7.3131", "93.74%", "-0.7568", "123"}
