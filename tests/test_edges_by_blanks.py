"""Edges that stand for cells which are blank together are marked wherever edges are shown: a sign and words."""

import re
import xml.etree.ElementTree as ET
from functools import cache
from pathlib import Path

import numpy as np
import pandas as pd
from builders import compared

from bnx.comparison import Comparison
from bnx.documents import comparison_document, dot_of, structure_document
from bnx.drawing import render
from bnx.report import report_html
from bnx.showing import structure_text


@cache
def found(missing: str = "level") -> Comparison:
    """Two attributes that are blank together and else independent; two that depend on each other."""
    random = np.random.default_rng(8)
    rows = 900
    target = random.integers(0, 2, rows)
    gone = random.random(rows) < 0.3
    a, b = (np.where(gone, None, [f"v{k}" for k in (random.random(rows) < 0.4 + 0.2 * target)]) for _ in range(2))
    c = random.integers(0, 2, rows)
    d = np.where(random.random(rows) < 0.8, c, 1 - c)
    frame = pd.DataFrame({"a": a, "b": b, "c": c.astype(str), "d": d.astype(str), "kind": np.array(["n", "y"])[target]})
    return compared(frame, "kind", structures=("tan-tested",), missing=missing, folds=4)


def test_the_ledger_marks_the_edge_whose_bits_are_those_of_blanks() -> None:
    names = found().names
    marked = {frozenset((names[e.parent], names[e.child])): e.carried_by_blanks for e in found().edges[0]}
    assert marked == {frozenset("ab"): True, frozenset("cd"): False}
    assert any("which cells are blank together carries the rest" in note for note in found().warnings)


def test_blanks_that_are_summed_out_carry_nothing() -> None:
    names = found("sum-out").names
    edges = {frozenset((names[e.parent], names[e.child])): e.carried_by_blanks for e in found("sum-out").edges[0]}
    assert edges == {frozenset("cd"): False}


def test_the_drawing_has_a_ring_at_the_tail_and_says_what_it_means(tmp_path: Path) -> None:
    dot = dot_of(structure_document(found(), 0))
    arrows = [line for line in dot.splitlines() if 'class="arrow' in line]
    ringed = [line for line in arrows if "arrowtail=odot" in line]
    assert (len(arrows), len(ringed)) == (2, 1)
    assert re.search(r"tooltip=\"(a to b|b to a): .*; carried by blank cells\"", ringed[0])
    assert dot.count("ring at the tail: carried by blank cells") == 1
    plain = dot_of(structure_document(found("sum-out"), 0))
    assert "blank" not in plain
    assert "odot" not in plain
    svg = render(dot, "svg")
    shapes = [one.tag.rpartition("}")[2] for one in ET.fromstring(svg).iter()]
    assert (
        shapes.count("ellipse")
        == [one.tag.rpartition("}")[2] for one in ET.fromstring(render(plain, "svg")).iter()].count("ellipse") + 1
    )


def test_the_page_and_the_text_mark_it_in_words() -> None:
    html = report_html(comparison_document(found()), {})
    assert html.count('<span class="blanks">○ carried by blank cells</span>') == 1
    assert "less than half of the bits are left where neither of the two is blank" in html
    unmarked = report_html(comparison_document(found("sum-out")), {})
    assert "carried by blank cells" not in unmarked.partition('<script type="application/json"')[0]
    text = structure_text(structure_document(found(), 0))
    assert len(re.findall(r"^(a -> b|b -> a) .* o  ", text, re.MULTILINE)) == 1
    assert text.endswith("o carried by blank cells: less than half of the bits are left where neither is blank")
