"""The page of the benchmarks: growth, limits and requirements worked out by hand from figures made up here."""

import json
from pathlib import Path
from typing import Any

import pytest
from page_command import claims as command_claims
from page_growth import limit_page
from page_growth import page as growth_page
from page_large import tall_claims, tall_page, wide_claims
from part_command import SCIKIT
from report import PARTS, page, write


def timed(seconds: float) -> dict[str, Any]:
    return {"seconds": seconds, "least": seconds, "most": seconds, "processor": seconds, "runs": 1}


def child(seconds: float, anonymous: float) -> dict[str, Any]:
    stages = [["reading", 1.0, 1.0], ["all", seconds, seconds]]
    memory = {"anonymous": anonymous, "resident": anonymous + 1e9}
    return {"seconds": seconds, "processor": seconds, "options": "--spill DIR", "stages": stages, **memory}


def sized(rows: int, **more: Any) -> dict[str, Any]:
    return {"rows": rows, "attributes": 20, "code_bytes": 21 * rows, "plane_words": 2 * rows, **more}


TALL: dict[str, dict[str, Any]] = {
    "few": sized(1, file_bytes=5, **child(1.0, 1e9)),
    "tenth": sized(10, file_bytes=50, **child(4.0, 1e9)),
    "whole": sized(100, file_bytes=500, **child(33.0, 2.5e9)),
}
GROWTH: dict[str, dict[str, Any]] = {
    "rows_counting": {"points": [sized(10, **timed(0.5)), sized(100, **timed(5.0)), sized(1000, **timed(500.0))]},
    "rows_command": {"curves": {"bnx learn": [{"size": 10, **child(7.0, 0)}, {"size": 1000, **child(70.0, 0)}]}},
}
LIMIT = {
    "threads": {"1": {"peak": {"a loop": 4e9, "another": 2e9}, "ours": timed(3.0)}},
    "cycles_per_second": 2e9,
    "bytes_per_second": 1e10,
    **sized(10**9),
}


def test_growth_is_a_power_of_the_size() -> None:
    lines = growth_page(GROWTH)
    assert "| rows (20 attributes of 2 to 8 levels) | 10 | 100 | 1,000 |" in lines
    assert "| counting all pairs | 0.5 | 5 (1.00) | 500 (2.00) |" in lines
    assert "| bnx learn | 7 |  | 70 (0.50) |" in lines


def test_the_limit_is_worked_out() -> None:
    figures: dict[str, Any] = {name: {} for name in PARTS} | {"pairs": {"limit": LIMIT}, "tall": TALL}
    lines = limit_page(figures)
    # 2e9 words at 4e9 a second; 21 GB at 10 GB a second; 2e9 words in 3 s of 2e9 cycles; a sixth of the peak
    assert "| 1,000,000,000 x 20 | 1 | 2 | 0.5 | 21 | 2.1 | 3 | 0.33 | 17% |" in lines
    whole = next(line for line in lines if line.startswith("| 100 x 20 |"))
    assert whole.split("|")[6].strip() == "33"


def test_tall_requirements() -> None:
    memory, least, most = tall_claims(TALL)
    assert (memory.measured, memory.holds) == (2.5, True)
    assert (least.measured, least.holds, most.holds) == ((33 - 1) / (4 - 1), True, True)
    slow = {**TALL, "whole": {**TALL["whole"], "seconds": 37.1, "anonymous": 3.1e9}}
    assert [claim.holds for claim in tall_claims(slow)] == [False, True, False]
    assert "| reading | 1.0 | 1.0 | 1.0 |" in tall_page(TALL)


def test_wide_requirements() -> None:
    words = sized(200, **child(181.0, 2.9e9))
    pictures = sized(200, **child(1799.0, 2.9e9))
    claims = wide_claims({"vocabulary": words, "bitmap": pictures})
    assert [claim.holds for claim in claims] == [False, True, True]
    assert [claim.unit for claim in claims] == ["s", "GB", "minutes"]


def test_command_requirements() -> None:
    seconds = {SCIKIT: 20.0, "bnx learn from Parquet": 11.0, "bnx learn from CSV": 14.0}
    default = {"times": {name: timed(value) for name, value in seconds.items()}}
    default["times"]["pyarrow reads the CSV, no more"] = timed(1.0)
    naive = {"bnx learn --structures naive": 4.1, "importing what it imports, no more": 1.6, SCIKIT: 20.0}
    found = command_claims({"default": default, "naive": {"times": {name: timed(one) for name, one in naive.items()}}})
    assert [claim.measured for claim in found] == pytest.approx([0.55, 14 / 13.5, 20 / 4.1, 8.0])
    assert [claim.holds for claim in found[:3]] == [True, False, False]


def test_the_page_names_every_machine() -> None:
    figures: dict[str, Any] = {name: {} for name in PARTS}
    figures["growth"] = {step: {**one, "machine": "mill"} for step, one in GROWTH.items()}
    assert "Machine: mill.\n" in page(figures)
    figures["tall"] = {step: {**one, "machine": "forge"} for step, one in TALL.items()}
    assert "Machine of tall few, tall tenth, tall whole: forge.\n" in page(figures)


def test_the_same_figures_give_the_same_picture(tmp_path: Path) -> None:
    stored = {step: {**one, "machine": "mill"} for step, one in GROWTH.items()}
    (tmp_path / "growth.json").write_text(json.dumps(stored), encoding="utf-8")
    pictures = []
    for name in ("a", "b"):
        (tmp_path / name).mkdir()
        write(tmp_path, tmp_path / name)
        pictures.append((tmp_path / name / "pictures" / "growth.svg").read_bytes())
    assert pictures[0] == pictures[1]
    assert b"<text" not in pictures[0]  # letters are paths, so no font is needed
    assert "(pictures/growth.svg)" in (tmp_path / "a" / "speed.md").read_text(encoding="utf-8")
