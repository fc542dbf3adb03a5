"""Published ways to smooth, against hand-worked tables, plain loops and the program's own tables."""

import json
from pathlib import Path
from typing import Any

import numpy as np
import pandas as pd
import pytest
from quality import report
from quality.measuring import read_rows, recipe_for, run
from quality.scoring_rows import nats
from quality.smoothing_page import draw_ways, means, smoothing_page
from quality.smoothing_schemes import (
    PROGRAM,
    SCHEMES,
    TRIED,
    absolute,
    back_off,
    by_levels,
    evidence,
    kneser_ney,
    laplace,
    marginal,
    to_marginal,
    witten_bell,
)
from quality.smoothing_trial import STRUCTURES, compare_ways
from quality.test_quality_harness import figures_of as harness_figures
from quality.test_quality_harness import made

from bnx.parameters import CANDIDATES, Smoothing, log_tables

# Two classes, a parent of two levels, a child of three; one context is empty.
COUNTS = np.array([[[3, 1, 0], [0, 0, 0]], [[0, 2, 1], [1, 0, 4]]], dtype=float)
MARGINAL = np.array([5, 4, 6]) / 15  # 4, 3 and 5 records, and one for each level


def own(smoothing: Smoothing, counts: np.ndarray) -> np.ndarray:
    """Smooth as the program does."""
    cells = counts.astype(np.int32).reshape(len(counts), -1)
    logs = log_tables(cells, counts.shape[1:], [smoothing])
    return np.asarray(np.exp(logs.T).reshape(counts.shape))


@pytest.mark.parametrize("shape", [(2, 3), (3, 2, 4), (2, 3, 2, 2)])
def test_every_way_gives_probabilities_above_zero(shape: tuple[int, ...]) -> None:
    counts = np.random.default_rng(1).poisson(0.8, shape).astype(float)
    for way in (way for ways in SCHEMES.values() for way in ways):
        p = way.smooth(counts)
        assert p.shape == shape, way.name
        assert p.sum(axis=-1) == pytest.approx(np.ones(shape[:-1])), way.name
        assert p.min() > 0, way.name


def test_the_programs_own_ways_are_the_same() -> None:
    for amounts in ((0.5,), (8.0,), (2.0, 256.0)):
        assert back_off(COUNTS, amounts) == pytest.approx(own(Smoothing("backoff", *amounts), COUNTS), rel=1e-12)
    assert laplace(COUNTS, 1.0) == pytest.approx(own(Smoothing("laplace", 1.0), COUNTS), rel=1e-12)
    names = [way.name.replace("back-off ", "backoff:").replace("laplace ", "laplace:") for way in SCHEMES[PROGRAM]]
    assert names == [str(smoothing) for smoothing in CANDIDATES]


def test_every_context_goes_back_to_the_marginal() -> None:
    assert marginal(COUNTS) == pytest.approx(MARGINAL)
    p = to_marginal(COUNTS, 2.0)
    assert p[0, 0] == pytest.approx((COUNTS[0, 0] + 2 * MARGINAL) / 6)
    assert p[0, 1] == pytest.approx(MARGINAL)


def test_witten_bell_by_hand() -> None:
    first = (np.array([3, 1, 0]) + 2 * MARGINAL) / 6
    second = (np.array([1, 2, 5]) + 3 * MARGINAL) / 11
    p = witten_bell(COUNTS)
    assert p[0, 0] == pytest.approx((np.array([3, 1, 0]) + 2 * first) / 6)
    assert p[0, 1] == pytest.approx(first)
    assert p[1, 1] == pytest.approx((np.array([1, 0, 4]) + 2 * second) / 7)


def test_absolute_discounting_by_hand() -> None:
    first = (np.array([2.5, 0.5, 0]) + 0.5 * 2 * MARGINAL) / 4
    p = absolute(COUNTS, 0.5)
    assert p[0, 0] == pytest.approx((np.array([2.5, 0.5, 0]) + 0.5 * 2 * first) / 4)
    assert p[0, 1] == pytest.approx(first)
    discount = 2 / (2 + 2 * 1)  # given the class alone, two cells hold one record and one holds two
    assert absolute(COUNTS, None)[0, 1] == pytest.approx(
        (np.array([3, 1, 0]) - discount * np.array([1, 1, 0]) + 2 * discount * MARGINAL) / 4
    )


def test_kneser_ney_counts_contexts() -> None:
    """In class 1 the levels were seen in 1, 1 and 2 contexts of the parent."""
    first = (np.array([0.5, 0.5, 1.5]) + 0.5 * 3 * MARGINAL) / 4
    p = kneser_ney(COUNTS, 0.5)
    assert p[1, 0] == pytest.approx((np.array([0, 1.5, 0.5]) + 0.5 * 2 * first) / 3)


def urn(counts: np.ndarray, strength: float, prior: np.ndarray) -> float:
    """Log probability of a sequence with these counts, drawn one by one from an urn that returns two for one."""
    total, seen = 0.0, np.zeros(len(counts))
    for x in np.repeat(np.arange(len(counts)), counts.astype(int)):
        total += np.log((seen[x] + strength * prior[x]) / (seen.sum() + strength))
        seen[x] += 1
    return total


def test_strengths_are_the_most_probable_ones() -> None:
    counts = np.array([[30.0, 2, 1], [1, 25, 9]])
    prior = marginal(counts)
    best = max(TRIED, key=lambda s: sum(urn(row, s, prior) for row in counts))
    expected = (counts + best * prior) / (counts.sum(axis=1, keepdims=True) + best)
    assert evidence(counts, 1.0) == pytest.approx(expected)
    assert evidence(counts, 2.0) == pytest.approx(back_off(counts, [2 * best]))


def test_strength_in_proportion_to_levels() -> None:
    assert by_levels(COUNTS, 0.5) == pytest.approx(back_off(COUNTS, [1.5]))


def test_the_trial_is_the_programs_own_run(tmp_path: Path) -> None:
    """With the program's own ways, every structure scores as in the comparison of the program itself."""
    frame = made().drop(columns="part")
    structures = ("naive", "tan", "kdb2-tested")
    found = compare_ways(frame, "kind", tmp_path, {PROGRAM: SCHEMES[PROGRAM]}, structures=structures)[PROGRAM]
    rows = read_rows(run(frame, recipe_for(frame, "kind", structures=structures), tmp_path))
    for name in structures:
        assert found[name]["log_loss"] == pytest.approx(nats(rows.p[name], rows.truth).mean(), abs=1e-12)
        assert sum(found[name]["ways"].values()) == 10
    twice = compare_ways(frame, "kind", tmp_path, {PROGRAM: SCHEMES[PROGRAM]}, (1, 2), structures=structures)[PROGRAM]
    rows = read_rows(run(frame, recipe_for(frame, "kind", structures=structures, seed=2), tmp_path))
    second = nats(rows.p["tan"], rows.truth).mean()
    assert twice["tan"]["log_loss"] == pytest.approx((found["tan"]["log_loss"] + second) / 2, abs=1e-12)
    assert sum(twice["tan"]["ways"].values()) == 20


def figures_of(program: float) -> dict[str, Any]:
    return {
        name: {structure: {"log_loss": program if name == PROGRAM else 0.19, "ways": {}} for structure in STRUCTURES}
        for name in SCHEMES
    }


def test_the_page_compares_with_one_strength(tmp_path: Path) -> None:
    figures = {"monk1": figures_of(0.09), "iris": figures_of(0.19)}
    assert means(figures)[PROGRAM]["tan-tested"] == pytest.approx(0.5**0.5)
    lines = smoothing_page(figures)
    row = next(line for line in lines if line.startswith(f"| {PROGRAM} |"))
    assert row.endswith("| 0.707 | 0.707 | 0.707 | 0.707 |")
    assert "| monk1 |" + " 0.1900 | 0.0900 |" * 4 in lines
    assert smoothing_page({}) == []
    for name in ("a.svg", "b.svg"):
        draw_ways(figures, tmp_path / name)
    drawn = (tmp_path / "a.svg").read_bytes()
    assert drawn == (tmp_path / "b.svg").read_bytes()
    assert b"<text" not in drawn


def test_ways_are_stored_and_only_missing_ones_measured(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    asked: list[list[str]] = []

    def compared(frame: pd.DataFrame, target: str, folder: Path, schemes: dict[str, Any]) -> dict[str, Any]:
        asked.append(list(schemes))
        assert (len(frame), target) == (150, "species")
        return {name: figures_of(0.09)[name] for name in schemes}

    monkeypatch.setattr(report, "compare_ways", compared)
    report.measure_ways("iris", tmp_path, resume=False)
    path = tmp_path / "smoothing" / "iris.json"
    kept = json.loads(path.read_text(encoding="utf-8"))
    del kept["Witten-Bell"]
    path.write_text(json.dumps(kept), encoding="utf-8")
    report.measure_ways("iris", tmp_path, resume=True)
    report.measure_ways("iris", tmp_path, resume=True)
    assert asked == [list(SCHEMES), ["Witten-Bell"]]
    assert list(json.loads(path.read_text(encoding="utf-8"))) == list(SCHEMES)
    (tmp_path / "iris.json").write_text(json.dumps(harness_figures(0.2, 0.3, 0.4)), encoding="utf-8")
    report.write(tmp_path, tmp_path)
    text = (tmp_path / "probabilities.md").read_text(encoding="utf-8")
    assert "(pictures/smoothing.svg)" in text
    assert (tmp_path / "pictures" / "smoothing.svg").exists()
    assert all(len(line) <= 120 or line.startswith("|") for line in text.splitlines())
