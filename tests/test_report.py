"""The page: nothing lost, nothing run, every figure that of the comparison document."""

import base64
import copy
import hashlib
import re
from typing import Any

import pytest
from readpage import Page
from smallrun import HOSTILE_LEVELS, HOSTILE_NAMES, SmallRun, small_run

from bnx.errors import FormatError
from bnx.findings import findings
from bnx.report import report_html


def page_of(run: SmallRun) -> Page:
    return Page(report_html(run.comparison, run.pictures))


@pytest.fixture(scope="module")
def plain() -> SmallRun:
    return small_run()


@pytest.fixture(scope="module")
def hostile() -> SmallRun:
    return small_run(hostile=True)


@pytest.fixture
def document(plain: SmallRun) -> dict[str, Any]:
    return copy.deepcopy(plain.comparison)


@pytest.mark.parametrize("is_hostile", [False, True])
def test_nothing_runs_and_nothing_is_loaded(is_hostile: bool) -> None:
    page = page_of(small_run(is_hostile))
    assert not {tag for tag, _ in page.elements} & {
        "img",
        "iframe",
        "object",
        "link",
        "base",
        "form",
        "image",
    }
    for _, attributes in page.elements:
        assert not [key for key in attributes if key.startswith("on") or key in {"src", "style", "action", "srcset"}]
        assert all(attributes[key].startswith("#") for key in attributes if key.endswith("href"))
    spoken = re.sub(r"http-equiv|http://www.w3.org/2000/svg", "", report_html(small_run(is_hostile).comparison, {}))
    assert "http" not in spoken
    assert "url(" not in page.style.replace("url(#", "")
    assert "@import" not in page.style


def test_the_policy_allows_exactly_the_one_style_sheet_and_the_one_script(hostile: SmallRun) -> None:
    page = page_of(hostile)
    policy = next(one["content"] for tag, one in page.elements if one.get("http-equiv") == "Content-Security-Policy")
    allowed = f"style-src 'sha256-{sha256(page.style)}'; script-src 'sha256-{sha256(page.script)}'"
    assert policy == f"default-src 'none'; {allowed}; base-uri 'none'; form-action 'none'"
    assert sum(tag == "style" for tag, _ in page.elements) == 1
    scripts = [one for tag, one in page.elements if tag == "script"]
    assert [one for one in scripts if one.get("type") != "application/json"] == [{}]


def sha256(text: str) -> str:
    return base64.b64encode(hashlib.sha256(text.encode()).digest()).decode()


def test_the_script_reads_no_markup_and_asks_nobody(plain: SmallRun) -> None:
    script = page_of(plain).script
    assert "textContent" in script
    forbidden = r"innerHTML|outerHTML|insertAdjacentHTML|document\.write|\beval\b|\bFunction\(|fetch\(|XMLHttp|import\("
    assert not re.findall(forbidden, script)


def test_hostile_names_and_levels_stand_on_the_page_as_they_are(hostile: SmallRun) -> None:
    page = page_of(hostile)
    for name in (*HOSTILE_NAMES, *HOSTILE_LEVELS):
        assert re.sub(r"\s+", " ", name) in page.text
    labels = [one.get("aria-label", "") for _, one in page.elements]
    attributes = {label.removeprefix("Levels of ") for label in labels if label.startswith("Levels of ")}
    assert attributes == set(hostile.comparison["attributes"])
    assert {*HOSTILE_NAMES[:-1]} <= attributes


def test_control_characters_become_a_sign_that_can_be_seen(document: dict[str, Any]) -> None:
    document["warnings"] = ["a\x00b\x1bc\x85d"]
    assert "a�b�c�d" in report_html(document, {})


def test_ids_are_unique_and_every_reference_is_met(plain: SmallRun) -> None:
    elements = page_of(plain).elements
    ids = [one["id"] for _, one in elements if "id" in one]
    assert len(ids) == len(set(ids))
    assert all(one["href"][1:] in ids for _, one in elements if "href" in one)


def test_every_structure_stands_with_its_picture_and_every_edge(plain: SmallRun) -> None:
    page = page_of(plain)
    shown = [one["data-structure"] for tag, one in page.elements if tag == "details" and "data-structure" in one]
    assert sorted(shown) == sorted(one["name"] for one in plain.comparison["structures"])
    assert sum(one.get("class", "").startswith("bnx-picture") for tag, one in page.elements if tag == "svg") == len(
        shown
    )
    cells = [row[:3] for rows in page.tables.values() for row in rows]
    for structure in plain.comparison["structures"]:
        for edge in structure["edges"]:
            assert [edge["parent"], edge["child"], f"{edge['bits']:.3f}"] in cells


def test_score_table_shows_the_figures_of_the_document(plain: SmallRun) -> None:
    head, *rows = page_of(plain).tables["score-table"]
    document = plain.comparison
    entries = {one["name"]: one for one in (*document["structures"], {"name": "mix", **document["mix"]})}
    assert len(rows) == len(entries)
    losses = [one["log_loss"] for one in entries.values()]
    assert [row[3].split()[0] for row in rows] == [f"{loss:.3f}" for loss in sorted(losses)]
    advice, baseline = document["recommended"]["name"], document["settings"]["baseline"]
    for one in entries.values():
        row = next(row for row in rows if re.match(rf"{re.escape(one['name'])}\b.*{re.escape(one['words'])}$", row[0]))
        assert ("recommended" in row[0]) == (one["name"] == advice)
        assert ("baseline" in row[0]) == (one["name"] == baseline)
        cells = dict(zip(head, row, strict=True))
        if one["name"] == "mix":
            assert ("not offered" not in row[0]) == one["offered"]
        else:
            assert row[1:3] == [f"{len(one['edges'])}", f"{one['free_parameters']:,}"]
            assert cells["temperature"] == f"{one['temperature']:.2f}"
        assert cells["log loss, bits"] == f"{one['log_loss']:.3f} ± {one['log_loss_se']:.3f}"
        assert cells["against naive, bits"].strip() == against_words(one["against_baseline"])
        for words, key in (
            ("Brier", "brier"), ("accuracy", "accuracy"), ("balanced accuracy", "balanced_accuracy"), ("AUC", "auc"),
            ("calibration error", "calibration_error"),
            ("class-wise calibration error", "classwise_calibration_error"),
        ):  # fmt: skip
            assert cells[words] == f"{one[key]:.3f}"
        assert cells["calibration slope"] == f"{one['calibration_slope']:.2f}"


def against_words(against: dict[str, Any]) -> str:
    if against["difference"] is None:
        return "–"
    low, high = against["interval"]
    p = against["p_value"]
    told = "" if p is None else f"p {p:.4f}" if p >= 0.001 else f"p {p:.0e}"
    return (
        f"{against['difference']:+.3f} [{low:+.3f}, {high:+.3f}]{told}; "
        f"matters: {100 * against['probability_better']:.1f} %"
    )


def test_confusion_and_recall_are_those_of_the_document(plain: SmallRun) -> None:
    rows = [row for table in page_of(plain).tables.values() for row in table]
    for one in plain.comparison["structures"]:
        recalls = [f"{100 * one['recall'][level]:.1f} %" for level in plain.comparison["class_levels"]]
        assert [one["name"], *recalls] in rows
    naive = plain.comparison["structures"][0]
    for level, counts in zip(plain.comparison["class_levels"], naive["confusion"], strict=True):
        shares = [f"{count:,}{100 * count / sum(counts):.0f} %" for count in counts]
        assert [level, *shares, f"{100 * naive['recall'][level]:.1f} %"] in rows


def test_the_first_screen_says_what_and_why_and_how_much(document: dict[str, Any]) -> None:
    text = Page(report_html(document, {})).text
    chosen = next(one for one in document["structures"] if one["name"] == document["recommended"]["name"])
    naive = document["structures"][0]
    assert document["recommended"]["reason"] in text
    assert f"Model grade with {chosen['name']}" in text
    saved, whole = -chosen["against_baseline"]["difference"], naive["log_loss"]
    assert f"It saves {saved:.3f} bits of log loss per record against naive (95 % interval" in text
    assert f"), {100 * saved / whole:.0f} % of the log loss of naive: " in text
    own, base = (round(1000 * (1 - one["accuracy"])) for one in (chosen, naive))
    assert f"In 1,000 records {chosen['name']} makes {own} mistakes, naive {base}: " in text
    honest = document["recommended"]["honest_log_loss"]
    assert f"{honest:.3f} bits of log loss (0 is perfect; naive has {whole:.3f}), " in text
    assert f"The evidence of naive is worth only {naive['temperature']:.2f} of its face value" in text
    assert "dock ~ alarm" in text


def test_a_worse_choice_and_an_even_one_are_called_so(document: dict[str, Any]) -> None:
    chosen = next(one for one in document["structures"] if one["name"] == document["recommended"]["name"])
    chosen["against_baseline"] |= {"difference": 0.25, "interval": [0.125, 0.5]}
    gain = findings(document).gain
    assert gain is not None
    assert (gain.kind, gain.bits, gain.interval, gain.credible) == ("worse", "0.250", ("0.125", "0.500"), True)
    assert "It costs 0.250 bits of log loss per record more than naive" in Page(report_html(document, {})).text
    chosen["against_baseline"] |= {"difference": 0.0001, "interval": [-0.1, 0.1]}
    assert "Its log loss is that of naive" in Page(report_html(document, {})).text


@pytest.mark.parametrize(
    ("temperature", "says"),
    [
        (0.5, "Over-confident. The evidence of naive is worth only 0.50 of its face value"),
        (1.0, "The evidence of naive is worth about its face value (1.00 of it)"),
        (1.25, "Too timid. The evidence of naive is worth 1.25 times its face value"),
    ],
)
def test_the_temperature_is_put_in_words(document: dict[str, Any], temperature: float, says: str) -> None:
    document["structures"][0]["temperature"] = temperature
    assert says in Page(report_html(document, {})).text


def test_without_temperature_the_calibration_slope_speaks_or_nothing(document: dict[str, Any]) -> None:
    document["settings"]["temperature"] = False
    document["structures"][0] |= {"temperature": 1.0, "calibration_slope": 0.5}
    text = Page(report_html(document, {})).text
    assert "The evidence of naive is worth only 0.50 of its face value" in text
    assert "Nothing was corrected (--no-temperature)." in text
    document["structures"][0]["calibration_slope"] = None
    assert "Not measured: there are too few mistakes to tell" in Page(report_html(document, {})).text


def test_missing_figures_are_said_not_printed_as_none(document: dict[str, Any]) -> None:
    for one in document["structures"]:
        one |= {"log_loss": None, "log_loss_se": None, "auc": None, "calibration_slope": None}
        one["against_baseline"] = dict.fromkeys(one["against_baseline"])
        one["recall"] = dict.fromkeys(one["recall"])
        for fold in one["by_fold"]:
            fold["log_loss"] = None
        for edge in one["edges"]:
            edge |= {"stability": None, "gate_p": None}
    for pair in document["pairs"]:
        pair.update(
            dict.fromkeys(("statistic", "p_value", "adjusted_p", "cramers_v", "min_expected", "detectable_bits"))
        )
        pair.update({"bits_low": None, "bits_high": None, "method": "none", "verdict": "not enough data"})
    document["recommended"] |= {"honest_log_loss": None, "honest_accuracy": None}
    text = Page(report_html(document, {})).text
    assert "None" not in text.replace("None.", "")
    assert "nan" not in text
    assert "infinite bits" in text


def test_one_structure_and_no_drawing_engine(plain: SmallRun) -> None:
    run = small_run(structures=("naive",))
    text = Page(report_html(run.comparison, {})).text
    assert "Keep naive for grade" in text
    assert "Not drawn: no drawing engine was found" in text
    assert "There is nothing to compare with naive." in text


@pytest.mark.parametrize(("rows", "words"), [(1, "only 1 record, too few"), (2, "only 2 records, too few")])
def test_a_class_of_few_records_is_warned_of(document: dict[str, Any], rows: int, words: str) -> None:
    for one in document["structures"]:
        one["confusion"][0] = [rows, *([0] * (len(document["class_levels"]) - 1))]
    assert words in Page(report_html(document, {})).text


def test_settings_warnings_versions_and_cautions_stand_on_the_page(document: dict[str, Any]) -> None:
    document["warnings"] = ["the first <warning>", "the second"]
    document["left_out"] = [{"name": "id <b>", "reason": "a different value in every row"}]
    page = Page(report_html(document, {}))
    options = {row[1]: row[2] for row in page.tables["setting-table"]}
    assert len(page.tables["setting-table"]) == 1 + len(document["settings"])
    assert options["--seed"] == "1"
    for words in (
        "the first <warning>", "the second", "id <b>: a different value in every row", document["sha256"],
        f"numpy {document['versions']['numpy']}", "A dependence is not a cause", "A probability is not a decision",
        "bias in who was recorded and how", "A rare class or a small table makes every figure soft",
        "health, safety, credit, work or rights", "leave the decision to those licensed to make it",
        "Friedman, Geiger & Goldszmidt 1997", "Nadeau & Bengio 2003",
    ):  # fmt: skip
        assert words in page.text


def test_a_second_table_is_shown_where_there_is_one(document: dict[str, Any]) -> None:
    assert "separate table" not in Page(report_html(document, {})).text
    for one in (*document["structures"], document["mix"]):
        one["holdout"] = {"log_loss": 0.4375}
    assert all(row[-1] == "0.438" for row in Page(report_html(document, {})).tables["score-table"][1:])


def test_the_same_document_gives_the_same_page(plain: SmallRun) -> None:
    assert report_html(plain.comparison, plain.pictures) == report_html(copy.deepcopy(plain.comparison), plain.pictures)


def test_one_attribute_has_no_pairs(document: dict[str, Any]) -> None:
    document |= {"attributes": ["alone"], "pairs": [], "pair_tables": []}
    document |= dict.fromkeys(("pairs_total", "pairs_rejected", "pairs_judged"), 0)
    document["schema"] = [{**document["schema"][0], "name": "alone"}]
    for one in document["structures"]:
        one["edges"] = []
    assert "There is only one attribute" in Page(report_html(document, {})).text


def test_a_picture_that_is_no_svg_is_refused(document: dict[str, Any]) -> None:
    with pytest.raises(FormatError, match="the picture for s0 is no SVG"):
        report_html(document, dict.fromkeys((one["name"] for one in document["structures"]), "<svg"))


def test_no_pairs_are_counted_in_words_and_not_as_zero(document: dict[str, Any]) -> None:
    document["pairs_verdicts"] = {**dict.fromkeys(document["pairs_verdicts"], 0), "dependent": len(document["pairs"])}
    text = Page(report_html(document, {})).text
    assert "none is negligible, and none is left open by the sample size." in text
