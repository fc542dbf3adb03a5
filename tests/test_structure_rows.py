"""What the scripts of the structures read: the figures of the document, and sentences that say what they mean."""

import copy
import json
import re
from typing import Any

import pytest
from smallrun import SmallRun, small_run

from bnx.edge_words import CHIP_SENTENCES, EDGE_CLAUSES, PAIR_SENTENCES, WHAT_IF, pair_sentences, what_if
from bnx.pair_figures import FIGURES, PAIRS_IN_PANEL, pairs_block
from bnx.pair_tables_page import shade, tables_block
from bnx.report import report_html
from bnx.structure_rows import EDGES_IN_DATA, EDGES_ON_PAGE, edges_block, own_attributes, sliders


def read(block: str) -> Any:
    return json.loads(re.sub(r"^<script[^>]*>|</script>$", "", block))


@pytest.fixture
def document() -> dict[str, Any]:
    return copy.deepcopy(small_run().comparison)


def edges_of(document: dict[str, Any]) -> dict[str, list[dict[str, Any]]]:
    found = read(str(edges_block(document, [(f"s{k}", one) for k, one in enumerate(document["structures"])])))
    return {
        one["name"]: [dict(zip(found["columns"], edge, strict=True)) for edge in one["edges"]]
        for one in found["structures"]
    }


def test_every_edge_is_there_with_the_figures_of_the_document(document: dict[str, Any]) -> None:
    names = document["attributes"]
    found = edges_of(document)
    assert sum(len(one["edges"]) for one in document["structures"]) > 0
    for entry in document["structures"]:
        expected = sorted(entry["edges"], key=lambda one: -one["bits"])
        assert len(found[entry["name"]]) == len(expected)
        for edge, row in zip(expected, found[entry["name"]], strict=True):
            assert (names[row["parent"]], names[row["child"]]) == (edge["parent"], edge["child"])
            assert row["bits"] == f"{edge['bits']:.3f}"
            ends = edge["gain_interval"]
            assert (ends is None) == (edge["chosen_in"] == 0)
            interval = f"[{ends[0]:+.4f}, {ends[1]:+.4f}]" if ends else ""
            assert (row["gain"], row["interval"]) == (f"{edge['gain']:+.4f}", interval)
            assert row["chosen"] == f"{edge['chosen_in']} of {document['folds']}"
            assert row["stability"] == f"{100 * edge['stability']:.0f} %"
            assert [names[place] for place in row["given"]] == edge["gate_given"]
            assert row["verdict"] == edge["verdict"]
            assert row["folds"] == ["" if one is None else f"{one:+.4f}" for one in edge["gain_by_fold"]]


def test_very_many_edges_are_held_back_and_their_number_told(document: dict[str, Any]) -> None:
    entry = next(one for one in document["structures"] if one["edges"])
    first = {**entry["edges"][0], "verdict": "undecided"}
    entry["edges"] = [{**first, "bits": 1 / (k + 1)} for k in range(EDGES_IN_DATA + 20)]
    entry["edges"][-1]["verdict"] = "gains"
    found = edges_of(document)[entry["name"]]
    assert len(found) == EDGES_IN_DATA
    assert found[-1]["verdict"] == "gains"  # a clear gain is kept however weak
    assert [bool(row["folds"]) for row in found] == [True] * EDGES_ON_PAGE + [False] * (EDGES_IN_DATA - EDGES_ON_PAGE)
    whole = read(str(edges_block(document, [("s0", entry)])))
    assert whole["structures"][0]["total"] == EDGES_IN_DATA + 20


def test_attributes_left_out_shift_the_numbers_of_a_drawing(document: dict[str, Any]) -> None:
    entry = document["structures"][0]
    assert own_attributes(document, entry) == document["attributes"]
    entry["chosen"] = {"dropped": [document["attributes"][1]]}
    kept = [document["attributes"][place] for place in (0, *range(2, len(document["attributes"])))]
    assert own_attributes(document, entry) == kept


@pytest.mark.parametrize(
    ("edge", "amount", "kind"),
    [
        ({"chosen_in": 10, "verdict": "gains", "gain": 0.0054}, "0.0054", "lose"),
        ({"chosen_in": 10, "verdict": "loses", "gain": -0.0054}, "0.0054", "gain"),
        ({"chosen_in": 10, "verdict": "undecided", "gain": 0.005}, "0.0050", "may lose"),
        ({"chosen_in": 5, "verdict": "undecided", "gain": -0.005}, "0.0050", "may gain"),
        ({"chosen_in": 10, "verdict": "undecided", "gain": 0.00001}, "0.0000", "same"),
        ({"chosen_in": 4, "verdict": "undecided", "gain": 0.5}, "0.5000", "rare"),
        ({"chosen_in": 0, "verdict": "undecided", "gain": 0.0}, "0.0000", "never"),
    ],
)
def test_what_would_change_without_an_edge(edge: dict[str, Any], amount: str, kind: str) -> None:
    assert what_if(edge, 10, amount) == kind
    sure = not any(words in WHAT_IF[kind] for words in ("can be chance", "cannot be told", "No difference"))
    assert sure == (edge["verdict"] in {"gains", "loses"})


@pytest.mark.parametrize(
    ("verdict", "detectable", "upper", "twice", "told"),
    [
        ("dependent", 0.003, 0.2, 0.12, ("dependent", "twice")),
        ("dependent", 0.003, 0.2, -0.02, ("dependent", "too little")),
        ("dependent", 0.003, 0.2, -0.0049, ("dependent", "harmless")),
        ("negligible", 0.003, 0.004, 0.02, ("negligible",)),
        ("detected, but negligible", 0.003, 0.004, None, ("detected, but negligible",)),
        ("not enough data", 0.02, 0.03, 0.005, ("blunt", "bounded")),
        ("not enough data", 0.005, 0.03, 0.005, ("blunt", "bounded")),
        ("not enough data", 0.0049, 0.03, 0.005, ("missed", "bounded")),
        ("not enough data", 0.02, None, None, ("thin",)),
        ("not enough data", None, None, None, ("untested",)),
    ],
)
def test_what_a_verdict_means(
    verdict: str, detectable: float | None, upper: float | None, twice: float | None, told: tuple[str, ...]
) -> None:
    pair = {
        "verdict": verdict,
        "detectable_bits": detectable,
        "bits_at_most": upper,
        "double_counted_bits": twice,
        "method": "exact",
    }
    assert pair_sentences(pair, 0.005) == told
    if verdict == "not enough data":
        assert pair_sentences(pair | {"method": "none"}, 0.005)[0] == "untested", "whatever others of its size tell"


def test_only_a_negligible_pair_is_called_independent() -> None:
    for kind, words in PAIR_SENTENCES.items():
        assert ("practical purposes independent" in words) == (kind == "negligible")
    for kind in ("blunt", "missed", "thin", "untested"):
        assert "Do not take the two as independent" in PAIR_SENTENCES[kind]


def test_every_place_in_a_sentence_has_a_figure(document: dict[str, Any]) -> None:
    edge = set(read(str(edges_block(document, [])))["columns"]) | {"class", "structure"}
    pair = {key for key, _ in FIGURES} | {"class", "negligible", "p", "less"}
    chip = {"class", "bits", "levels", "parents", "children"}
    for sentences, known in ((EDGE_CLAUSES, edge), (WHAT_IF, edge), (PAIR_SENTENCES, pair), (CHIP_SENTENCES, chip)):
        assert {place for words in sentences.values() for place in re.findall(r"\{(\w+)\}", words)} <= known


def test_every_pair_is_in_the_panel_with_the_figures_of_the_document(document: dict[str, Any]) -> None:
    found = read(str(pairs_block(document)))
    keys = [key for key, _ in found["figures"]]
    ranked = sorted(document["pairs"], key=lambda one: -one["bits"])
    assert len(found["pairs"]) == len(ranked)
    for pair, (a, b, _, *printed) in zip(ranked, found["pairs"], strict=True):
        row = dict(zip(keys, printed, strict=True))
        row |= {key: words[row[key]] for key, words in found["words"].items()}
        assert (found["names"][a], found["names"][b]) == (pair["a"], pair["b"])
        assert row["bits"] == f"{pair['bits']:.4f}"
        assert row["corrected"] == f"{max(0.0, pair['bits_corrected']):.4f}"
        assert row["upper"] == ("–" if pair["bits_at_most"] is None else f"{pair['bits_at_most']:.4f}")
        is_dependent = pair["verdict"] == "dependent"
        assert row["twice"] == (f"{pair['double_counted_bits']:.4f}" if is_dependent else "–")
        assert (row["verdict"], row["outcome"], row["df"]) == (pair["verdict"], pair["outcome"], f"{pair['df']:,}")


def test_weak_pairs_beyond_the_limit_stay_when_a_structure_joins_them(document: dict[str, Any]) -> None:
    edge = next(edge for one in document["structures"] for edge in one["edges"])
    ends = {edge["parent"], edge["child"]}
    joined = next(pair for pair in document["pairs"] if {pair["a"], pair["b"]} == ends)
    other = next(pair for pair in document["pairs"] if {pair["a"], pair["b"]} != ends)
    weak = [{**other, "bits": 0.0}, {**joined, "bits": 0.0}]
    document["structures"] = [{**document["structures"][0], "edges": [edge]}]
    document["pairs"] = [{**other, "bits": 1.0}] * PAIRS_IN_PANEL + weak
    found = read(str(pairs_block(document)))
    assert len(found["pairs"]) == PAIRS_IN_PANEL + 1
    assert {found["names"][place] for place in found["pairs"][-1][:2]} == ends


def test_tables_hold_records_expected_records_and_residuals(document: dict[str, Any]) -> None:
    found = read(str(tables_block(document)))["tables"]
    assert len(found) == len(document["pair_tables"]) > 0
    for table in document["pair_tables"]:
        places = [document["attributes"].index(table[side]) for side in ("a", "b")]
        page = found[f"{min(places)},{max(places)}"]
        assert (page["aLevels"], page["bLevels"]) == (table["a_levels"], table["b_levels"])
        for one, shown in zip(table["classes"], page["classes"], strict=True):
            assert shown["rows"] == f"{one['rows']:,}"
            for i, cells in enumerate(shown["cells"]):
                for j, (observed, expected, residual, step) in enumerate(cells):
                    assert observed == f"{one['observed'][i][j]:,}"
                    mean, value = one["expected"][i][j], one["residuals"][i][j]
                    assert expected == ("–" if mean is None else f"{mean:,.1f}")
                    if value is None:
                        assert residual == "–"
                    else:
                        assert float(residual.replace("−", "-")) == pytest.approx(value, abs=0.0501)
                    assert step == shade(value)


@pytest.mark.parametrize(
    ("residual", "step"),
    [(None, 0), (0.0, 0), (2.0, 0), (2.01, 1), (-2.01, -1), (4.01, 2), (-7.9, -2), (8.01, 3), (-90.0, -3)],
)
def test_shades_grow_beyond_two_four_and_eight(residual: float | None, step: int) -> None:
    assert shade(residual) == step


def test_odds_ratios_are_printed_with_their_intervals(document: dict[str, Any]) -> None:
    table = document["pair_tables"][0]
    table["classes"][0]["odds"] = {"odds_ratio": 2.5, "odds_low": 0.013, "odds_high": None}
    table["common_odds"] = {
        **{"odds_ratio": 1234.0, "odds_low": 0.5, "odds_high": 3.0},
        **{"cmh_p": 0.04, "breslow_day_p": 0.5, "tarone_p": None},
    }
    document["pair_tables"] = [table]
    page = next(iter(read(str(tables_block(document)))["tables"].values()))
    assert page["classes"][0]["odds"] == "2.50 [0.013, ∞ or undefined]"
    assert [figure for _, figure in page["common"]] == ["1.2e+03 [0.50, 3.00]", "0.04", "–"]


def test_sliders_reach_from_below_the_least_to_the_greatest_edge(document: dict[str, Any]) -> None:
    edges = [edge for one in document["structures"] for edge in one["edges"]]
    found = sliders(document["structures"])
    assert found is not None
    assert float(found.gain.least) <= min(edge["gain"] for edge in edges)
    assert float(found.bits.least) == 0.0
    for slider, key in ((found.bits, "bits"), (found.gain, "gain")):
        most = max(edge[key] for edge in edges)
        assert most - float(slider.step) <= float(slider.most) <= most
    assert sliders([{"edges": []}]) is None


@pytest.mark.parametrize("is_hostile", [False, True])
def test_recommended_first_a_tab_a_panel_and_a_choice_for_every_structure(is_hostile: bool) -> None:
    run: SmallRun = small_run(hostile=is_hostile)
    page = report_html(run.comparison, run.pictures)
    tabs = re.findall(r'role="tab" class="tab" id="structure-tab-(s\d)" aria-controls="structure-(s\d)"', page)
    panels = re.findall(r'id="structure-(s\d)" data-structure="([^"]+)"', page)
    assert [prefix for prefix, _ in tabs] == [prefix for _, prefix in tabs] == [prefix for prefix, _ in panels]
    assert panels[0][1] == run.comparison["recommended"]["name"]
    assert {name for _, name in panels} == {one["name"] for one in run.comparison["structures"]}
    for prefix, name in panels:
        assert f'<option value="{prefix}">{name}</option>' in page
    for prefix, name in panels:
        entry = next(one for one in run.comparison["structures"] if one["name"] == name)
        for edge in entry["edges"]:
            ends = "-".join(str(run.comparison["attributes"].index(edge[end])) for end in ("parent", "child"))
            assert f'<tr id="{prefix}-r{ends}">' in page
            assert f'id="{prefix}-e{ends}"' in page
