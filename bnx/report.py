"""The report: a comparison summed up, then rendered as one page that needs nothing else."""

from collections.abc import Mapping
from dataclasses import dataclass
from pathlib import PurePath
from typing import Any, ClassVar

from bnx.attribute_rows import Attribute, attribute_rows
from bnx.findings import Findings, drawn_pairs, findings
from bnx.level_charts import FEW_RECORDS
from bnx.level_evidence import BEYOND_CHANCE, LEAST_EXPECTED
from bnx.method_words import GLOSSARY, SOURCES, VERDICTS_READ
from bnx.metric_charts import MetricChart, metric_charts
from bnx.pair_figures import pairs_block
from bnx.pair_rows import PairLedger, pair_ledger
from bnx.pair_tables_page import tables_block
from bnx.printed import (
    CurveTable,
    ScoreRow,
    curve_table,
)
from bnx.record_bars import RecordSection, record_section
from bnx.reliability_chart import ReliabilityChart, reliability_charts
from bnx.report_page import page_html
from bnx.score_tables import (
    ClassTable,
    DifferenceTable,
    class_tables,
    difference_table,
    ranked_rows,
    why_below,
)
from bnx.setting_words import SettingRow, setting_rows
from bnx.structure_rows import Drawn, Sliders, draw_structure, edges_block, sliders
from bnx.triangle import Triangle, triangle, triangle_block

__all__ = [
    "ATTRIBUTES_ON_PAGE",
    "LINES_ON_PAGE",
    "Report",
    "report_html",
    "summarise",
]

ATTRIBUTES_ON_PAGE = 300
"""Attributes that the page lists, those with most bits first."""
LINES_ON_PAGE = 100
"""Warnings, and columns left out, that the page lists."""

_ADJUSTMENTS = {
    "bh": "after adjustment for the number of pairs (Benjamini and Hochberg)",
    "holm": "after adjustment for the number of pairs (Holm)",
    "by": "after adjustment for the number of pairs (Benjamini and Yekutieli)",
    "none": "without any adjustment for the number of pairs",
}


@dataclass(frozen=True)
class Report:
    """The whole page in finished words and numbers; long lists hold what comes first, the page says of how many."""

    target: str
    class_levels: tuple[str, ...]
    source: str
    sha256: str
    rows: str
    attributes_used: int
    folds: int
    repeats: int
    findings: Findings
    scores: tuple[ScoreRow, ...]
    why_below: str
    mix_reason: str
    yardstick_sentences: tuple[str, ...]
    curve: CurveTable | None
    has_holdout: bool
    reliability: tuple[ReliabilityChart, ...]
    structures: tuple[Drawn, ...]
    sliders: Sliders | None
    metrics: tuple[MetricChart, ...]
    differences: DifferenceTable | None
    classes: tuple[ClassTable, ...]
    pairs: PairLedger
    pairs_total: str
    pairs_rejected: str
    pairs_judged: str
    triangle: Triangle | None
    attributes: tuple[Attribute, ...]
    records: RecordSection
    left_out: tuple[tuple[str, str], ...]
    left_out_total: int
    weighted: bool
    settings: tuple[SettingRow, ...]
    seed: int
    versions: tuple[tuple[str, str], ...]
    warnings: tuple[str, ...]
    warnings_total: int
    alpha: str
    adjust: str
    negligible: str
    few_records: ClassVar[int] = FEW_RECORDS
    least_expected: ClassVar[int] = LEAST_EXPECTED
    beyond_chance: ClassVar[str] = f"{BEYOND_CHANCE:g}"
    sources: ClassVar[tuple[tuple[str, str], ...]] = SOURCES
    verdicts_read: ClassVar[tuple[tuple[str, str], ...]] = VERDICTS_READ
    glossary: ClassVar[tuple[tuple[str, str], ...]] = GLOSSARY

    @property
    def by_blanks(self) -> bool:
        """Tell whether an edge listed is carried by blank cells."""
        return any(edge.by_blanks for one in self.structures for _, edge in one.ledger)


def report_html(comparison: Mapping[str, Any], pictures: Mapping[str, str]) -> str:
    """Write the page.

    comparison: the document of ``comparison.json``. pictures: structure name -> SVG text, absent or empty where nothing
    could be drawn; the page then says so.

    Raises:
        FormatError: a picture is no SVG.
    """
    report, styles = summarise(comparison, pictures)
    blocks = [
        edges_block(comparison, _ordered(comparison)),
        pairs_block(comparison),
        tables_block(comparison),
        report.pairs.block,
    ]
    if report.triangle:
        blocks.append(triangle_block(report.triangle, report.pairs.place))
    return page_html(report, styles, blocks)


def summarise(document: Mapping[str, Any], pictures: Mapping[str, str]) -> tuple[Report, tuple[str, ...]]:
    """Turn a comparison document into what the page shows, and the style rules its pictures need."""
    chosen = next(one for one in document["structures"] if one["name"] == document["recommended"]["name"])
    drawn = drawn_pairs(chosen)
    structures, styles = [], dict.fromkeys("")
    for prefix, entry in _ordered(document):
        one, rules = draw_structure(document, entry, pictures.get(entry["name"], ""), prefix)
        structures.append(one)
        styles.update(dict.fromkeys(rules))
    settings, metrics = document["settings"], metric_charts(document)
    triangular = triangle(document, drawn)
    report = Report(
        target=document["class"],
        class_levels=tuple(document["class_levels"]),
        source=PurePath(document["source"]).name or document["source"],
        sha256=document["sha256"],
        rows=f"{document['rows']:,}",
        attributes_used=len(document["attributes"]),
        folds=document["folds"],
        repeats=settings["repeats"],
        findings=findings(document),
        scores=ranked_rows(document),
        why_below=why_below(document),
        mix_reason="{words}. {reason}".format_map(document["mix"]) if document["mix"] else "",
        yardstick_sentences=tuple(one["sentence"] for one in document["yardsticks"] or ()),
        curve=curve_table(document["learning_curve"]) if document["learning_curve"] else None,
        has_holdout=any("holdout" in one for one in document["structures"]),
        reliability=reliability_charts(document),
        structures=tuple(structures),
        sliders=sliders(document["structures"]),
        metrics=metrics,
        differences=difference_table(metrics),
        classes=class_tables(document),
        pairs=pair_ledger(document, triangular.pairs if triangular else frozenset()),
        pairs_total=f"{document['pairs_total']:,}",
        pairs_rejected=f"{document['pairs_rejected']:,}",
        pairs_judged=f"{document['pairs_judged']:,}",
        triangle=triangular,
        attributes=attribute_rows(document, ATTRIBUTES_ON_PAGE),
        records=record_section(document),
        left_out=tuple((one["name"], one["reason"]) for one in document["left_out"][:LINES_ON_PAGE]),
        left_out_total=len(document["left_out"]),
        weighted=bool(settings["weight"]),
        settings=setting_rows(settings),
        seed=settings["seed"],
        versions=tuple(document["versions"].items()),
        warnings=tuple(document["warnings"][:LINES_ON_PAGE]),
        warnings_total=len(document["warnings"]),
        alpha=f"{settings['alpha']:g}",
        adjust=_ADJUSTMENTS[settings["adjust"]],
        negligible=f"{settings['negligible']:g}",
    )
    return report, tuple(styles)


def _ordered(document: Mapping[str, Any]) -> list[tuple[str, Mapping[str, Any]]]:
    """Put the recommended structure first, the others by log loss; each with the prefix of the ids of its drawing."""
    chosen = document["recommended"]["name"]
    ranked = sorted(
        document["structures"],
        key=lambda one: (one["name"] != chosen, one["log_loss"] is None, one["log_loss"] or 0.0),
    )
    return [(f"s{number}", entry) for number, entry in enumerate(ranked)]
