"""Tables, drawings and the ledger against the comparison, each number against its own field."""

import json
from typing import Any

import pytest
from ledger_reading import all_rows
from pages import Made, Opened
from printed_numbers import told
from table_reading import by_heads, pair_of, structure, table_of

PAIR_FIELDS = {
    "bits": ("bits",),
    "interval": ("bits_low", "bits_high"),
    "at_most": ("bits_at_most",),
    "marginal": ("marginal_bits",),
    "double_counted": ("double_counted_bits",),
    "cramers_v": ("cramers_v",),
    "statistic": ("statistic",),
    "df": ("df",),
    "adjusted_p": ("adjusted_p",),
    "min_expected": ("min_expected",),
    "detectable": ("detectable_bits",),
}
PAIR_WORDS = {"verdict": "verdict", "outcome": "outcome"}
SCORES = {
    "Brier": "brier",
    "accuracy": "accuracy",
    "balanced accuracy": "balanced_accuracy",
    "AUC": "auc",
    "calibration error": "calibration_error",
    "class-wise calibration error": "classwise_calibration_error",
    "calibration slope": "calibration_slope",
    "temperature": "temperature",
    "free parameters": "free_parameters",
}


def test_every_score_is_that_of_its_structure(found: Opened, demo: Made) -> None:
    baseline = demo.document["settings"]["baseline"]
    table = table_of(found.page.locator("#score-table"))
    names = [next(iter(row["data"].values())) for row in table["rows"]]
    assert sorted(names) == sorted([*(one["name"] for one in demo.document["structures"]), "mix"])
    for name, row in zip(names, table["rows"], strict=True):
        entry, cells = structure(demo.document, name), by_heads(table, row)
        against = entry["against_baseline"]
        assert told(cells["log loss, bits"], entry["log_loss"], entry["log_loss_se"])
        if entry.get("edges") is not None:
            assert told(cells["edges"], len(entry["edges"]))
        difference = (against["difference"], *(against["interval"] or ()))
        chance = (against["p_value"], against["probability_better"])
        assert told(cells[f"against {baseline}, bits"], *difference, *chance)
        for head in set(cells) & set(SCORES):
            assert told(cells[head], entry.get(SCORES[head])), (name, head)
    assert len(set(table["heads"]) & set(SCORES)) >= 5


def test_every_confusion_table_counts_the_records_of_its_structure(found: Opened, demo: Made) -> None:
    boxes = found.page.locator('[role="region"][aria-label^="Classes, "]')
    assert boxes.count() >= 2
    for place in range(boxes.count()):
        name = (boxes.nth(place).get_attribute("aria-label") or "").removeprefix("Classes, ")
        entry = structure(demo.document, name)
        rows = table_of(boxes.nth(place).locator("table"))["rows"]
        for row, level, counts in zip(rows, demo.document["class_levels"], entry["confusion"], strict=True):
            figures = [figure for count in counts for figure in (count, count / sum(counts))]
            assert row["names"] == [level]
            # The share follows its count without a space between them: cells are read one by one.
            cells = boxes.nth(place).locator("tbody tr").nth(rows.index(row)).locator("td").all()
            texts = [cell.evaluate("(one) => [...one.childNodes].map((part) => part.textContent)") for cell in cells]
            assert told(" ; ".join(" ; ".join(text) for text in texts), *figures, entry["recall"][level])


def test_every_edge_is_told_as_in_its_structure(found: Opened, demo: Made) -> None:
    tries = demo.document["folds"] * demo.document["settings"]["repeats"]
    for entry in demo.document["structures"]:
        place = found.page.locator(f'.structure[data-structure="{entry["name"]}"]')
        rows = table_of(place.locator("table.edges"))["rows"] if entry["edges"] else []
        assert len(rows) == len(entry["edges"])
        for row in rows:
            edge = next(e for e in entry["edges"] if [e["parent"], e["child"]] == row["names"][:2])
            numbers = " ".join(row["cells"][2:7])
            figures = [edge["bits"], edge["gain"], *(edge["gain_interval"] or []), edge["chosen_in"]]
            assert told(numbers, *figures, tries, edge["stability"], edge["gate_p"]), (row, edge)
            assert row["names"][2:] == edge["gate_given"]
            assert edge["verdict"] in row["cells"][8]


def test_the_data_of_edges_are_those_of_their_structures(found: Opened, demo: Made) -> None:
    block = json.loads(found.page.locator("#data-edges").text_content() or "")
    tries = demo.document["folds"] * demo.document["settings"]["repeats"]
    schema = {one["name"]: one for one in demo.document["schema"]}
    for name, bits in zip(block["names"], block["bits"], strict=True):
        assert told(bits, schema[name]["bits_with_class"])
    for one in block["structures"]:
        entry = structure(demo.document, one["name"])
        assert one["total"] == len(one["edges"]) == len(entry["edges"])
        for row in one["edges"]:
            cell = dict(zip(block["columns"], row, strict=True))
            ends = [block["names"][cell[end]] for end in ("parent", "child")]
            edge = next(e for e in entry["edges"] if [e["parent"], e["child"]] == ends)
            gained = [edge["gain"], *(edge["gain_interval"] or [])]
            assert told(f"{cell['bits']} {cell['gain']} {cell['interval']}", edge["bits"], *gained)
            assert told(cell["amount"], abs(edge["gain"]))
            assert told(cell["chosen"], edge["chosen_in"], tries)
            assert told(f"{cell['stability']} {cell['gate']}", edge["stability"], edge["gate_p"])
            assert told(" ".join(map(str, cell["folds"])), *edge["gain_by_fold"])


def test_every_cell_of_the_ledger_is_that_of_its_pair(found: Opened, demo: Made) -> None:
    document = demo.document
    found.page.locator("#pair-all-columns").check()
    columns = found.page.locator("#pair-table thead th").evaluate_all("(all) => all.map((one) => one.dataset.column)")
    assert set(columns) >= {*PAIR_FIELDS, *PAIR_WORDS, "pair", "joined", "method", "carried"}
    rows = all_rows(found.page)
    assert len(rows) == len(document["pairs"])
    for row in rows:
        pair, cells = pair_of(document, row["names"]), dict(zip(columns, row["cells"], strict=True))
        for column, fields in PAIR_FIELDS.items():
            assert told(cells[column], *(pair[field] for field in fields)), (row["names"], column)
        for column, field in PAIR_WORDS.items():
            assert cells[column] == pair[field]
        assert cells["carried"] == ("yes" if pair["sample_carries_it"] else "no")
        joining = [one for one in document["structures"] if joins(one, row["names"])]
        assert told(cells["joined"], len(joining), len(document["structures"]))
        framed = any(one["name"] == document["recommended"]["name"] for one in joining)
        assert ("recommended" in cells["joined"]) == framed


def joins(entry: dict[str, Any], names: list[str]) -> bool:
    return any({edge["parent"], edge["child"]} == set(names) for edge in entry["edges"])


@pytest.mark.parametrize("number", range(3))
def test_every_mark_of_the_triangle_has_the_number_of_its_pair(found: Opened, demo: Made, number: int) -> None:
    page = found.page
    page.locator("#triangle-measure input").nth(number).check()
    field = ("bits", "marginal_bits", "double_counted_bits")[number]
    names = page.locator("#triangle-names g > text > title").all_text_contents()
    marks = json.loads(page.locator("#data-triangle").text_content() or "")["marks"]
    numbers = page.locator("#triangle-numbers text").all_text_contents()
    assert len(marks) == len(numbers) == len(demo.document["pairs"])
    for (row, column, _), printed in zip(marks, numbers, strict=True):
        pair = pair_of(demo.document, [names[row], names[column]])
        value = pair[field]
        assert told(printed, value) if printed else value is None or abs(value) < 0.0005


def test_marks_grow_with_the_bits_of_their_pairs(found: Opened, demo: Made) -> None:
    """The side of a mark is the square root of its bits, down to the smallest that can be seen."""
    block = json.loads(found.page.locator("#data-triangle").text_content() or "")
    names = found.page.locator("#triangle-names g > text > title").all_text_contents()
    bits = [pair_of(demo.document, [names[row], names[column]])["bits"] for row, column, _ in block["marks"]]
    sides = [float(one) for one in block["measures"][0]["sides"]]
    assert sides[bits.index(max(bits))] == max(sides)
    large = [(side, one) for side, one in zip(sides, bits, strict=True) if side > 8.5]
    assert len(large) >= 5
    for side, one in large:
        assert (side / max(sides)) ** 2 == pytest.approx(one / max(bits), abs=0.02)
