"""The first screen: what is counted twice, how sure naive is, against the document and by hand-made cases."""

import copy
from typing import Any

import pytest
from smallrun import small_run

from bnx.counted_twice import counted_twice
from bnx.findings import chance, findings
from bnx.reliability_words import strayed
from bnx.sureness import sureness


@pytest.fixture
def document() -> dict[str, Any]:
    return copy.deepcopy(small_run().comparison)


def pair(a: str, b: str, twice: float | None, bits: float = 0.1, verdict: str = "dependent") -> dict[str, Any]:
    return {"a": a, "b": b, "double_counted_bits": twice, "bits": bits, "verdict": verdict}


def test_the_worst_are_dependent_and_in_order_and_none_is_counted_twice_by_nothing() -> None:
    pairs = [
        pair("a", "b", 0.1),
        pair("a", "c", 0.4),
        pair("b", "c", 0.9, verdict="not enough data"),
        pair("a", "d", 0.2, bits=0.3),
        pair("b", "d", 0.2, bits=0.5),
        pair("c", "d", 0.0004),
        pair("d", "e", None),
    ]
    structure = {"edges": [{"parent": "c", "child": "a"}, {"parent": "d", "child": "c"}], "chosen": {"dropped": ["e"]}}
    found = counted_twice({"pairs": pairs}, structure)
    assert [(one.a, one.b, one.twice, one.bits, one.fate, one.bar) for one in found.worst] == [
        ("a", "c", "0.400", "0.100", "modelled", 100.0),
        ("b", "d", "0.200", "0.500", "left out", 50.0),
        ("a", "d", "0.200", "0.300", "left out", 50.0),
    ]
    assert (found.modelled, found.dropped) == (2, 1)
    assert found.left == found.worst[1]


def test_nothing_is_left_where_all_that_counts_is_modelled() -> None:
    structure = {"edges": [{"parent": "b", "child": "a"}], "chosen": None}
    found = counted_twice({"pairs": [pair("a", "b", 0.2), pair("a", "c", 0.0)]}, structure)
    assert (found.modelled, found.left) == (1, None)
    assert counted_twice({"pairs": []}, structure).worst == ()


def test_the_whole_document_names_its_worst_pair_first(document: dict[str, Any]) -> None:
    dependent = [one for one in document["pairs"] if one["verdict"] == "dependent"]
    worst = max(dependent, key=lambda one: one["double_counted_bits"])
    first = findings(document).twice.worst[0]
    assert {first.a, first.b} == {worst["a"], worst["b"]}
    assert first.twice == f"{worst['double_counted_bits']:.3f}"


def group(said: float, right: float, rows: int, half: float = 0.02) -> dict[str, Any]:
    return {"mean_probability": said, "share_right": right, "interval": [right - half, right + half], "rows": rows}


def test_the_group_that_strayed_furthest_has_most_wrongly_told_records() -> None:
    before = [group(0.5, 0.51, 100), group(0.7, 0.6, 100), group(0.9, 0.75, 50), group(0.4, 0.6, 80)]
    after = [group(0.52, 0.52, 100), group(0.66, 0.65, 100)]
    assert strayed(before, after) == (before[3], None)
    assert strayed(before, after, timid=False) == (before[1], after[1])
    assert strayed(before, after, over=False) == (before[3], None)
    assert strayed(before[:1], after) is None


@pytest.mark.parametrize(("factor", "kind"), [(0.94, "over"), (0.95, "right"), (1.05, "right"), (1.06, "timid")])
def test_naive_is_judged_by_its_temperature(document: dict[str, Any], factor: float, kind: str) -> None:
    document["structures"][0]["temperature"] = factor
    found = sureness(document)
    assert (found.name, found.kind, found.factor) == ("naive", kind, f"{factor:.2f}")


def test_what_strayed_is_told_with_the_figures_of_the_document(document: dict[str, Any]) -> None:
    document["structures"][0]["temperature"] = 0.5
    document["reliability"]["naive"] = {
        "before": {"bins": [group(0.7, 0.6, 100)]},
        "after": {"bins": [group(0.68, 0.66, 100)]},
    }
    told = sureness(document).sentence
    assert (
        "furthest it is, uncorrected, 70 % sure and right in 60 % of records; corrected, 68 % sure and right in 66 %"
        in told
    )
    document["reliability"]["naive"]["after"]["bins"] = [group(0.5, 0.5, 100)]
    assert "60 % of records; corrected, it is never that sure." in sureness(document).sentence
    document["reliability"]["naive"]["before"]["bins"] = [group(0.6, 0.7, 100)]
    assert "No group of its answers strayed" in sureness(document).sentence


def test_a_small_table_may_be_why_where_nothing_depends(document: dict[str, Any]) -> None:
    document["structures"][0]["temperature"] = 0.5
    document["pairs_verdicts"]["dependent"] = 0
    assert "with no dependent pair in sight, a small table may be why" in sureness(document).sentence


def test_mistakes_are_counted_in_whole_ones_but_where_there_are_few(document: dict[str, Any]) -> None:
    chosen = next(one for one in document["structures"] if one["name"] == document["recommended"]["name"])
    naive = document["structures"][0]
    chosen["against_baseline"]["by_metric"]["accuracy"]["interval"] = [-0.012, 0.034]
    chosen["accuracy"], naive["accuracy"] = 0.80, 0.79
    found = findings(document).mistakes
    assert (found.own, found.baseline, found.difference, found.apart) == ("200", "210", "10", "fewer")
    assert found.interval == ("-12", "34")
    chosen["accuracy"], naive["accuracy"] = 0.9912, 0.9955
    found = findings(document).mistakes
    assert (found.own, found.baseline, found.difference, found.apart) == ("8.8", "4.5", "4.3", "more")
    assert found.interval == ("-34.0", "12.0")


@pytest.mark.parametrize(
    ("share", "words"),
    [(None, "–"), (0.0, "0.0 %"), (1e-9, "under 0.1 %"), (0.5, "50.0 %"), (0.99999, "over 99.9 %"), (1.0, "100.0 %")],
)
def test_only_certainty_is_called_certain(share: float | None, words: str) -> None:
    assert chance(share) == words
