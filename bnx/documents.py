"""The machine-readable results: comparison, structures, pairs, predictions, as plain values ready to be written."""

import platform
from collections.abc import Iterator, Sequence
from itertools import pairwise
from typing import Any

import numba
import numpy as np
import pyarrow as pa
import scipy

from bnx import __version__
from bnx.chosen import chosen_entry, words_of
from bnx.comparison import Comparison
from bnx.curve_documents import curve_entry
from bnx.formats.dot import dot_source
from bnx.formats.structure_json import classifier_document
from bnx.ledger import EdgeEvidence
from bnx.level_entries import attribute_entries
from bnx.listed_pairs import pair_results
from bnx.mix_documents import mix_entry
from bnx.pair_table_entries import pair_table_entries
from bnx.picture import Arrow, Chip, Picture
from bnx.plain import finite
from bnx.record_entries import records_entry
from bnx.score_entries import against_entry, fold_entries, reliability_entry, score_entry
from bnx.structure import words
from bnx.text import count_of
from bnx.verdicts import OUTCOMES, VERDICTS
from bnx.yardstick_documents import yardstick_entries

__all__ = [
    "COMPARISON_FORMAT",
    "comparison_document",
    "dot_of",
    "pair_results",
    "picture_of",
    "predictions",
    "predictions_table",
    "structure_document",
]

COMPARISON_FORMAT = "bnx-comparison/1"


def versions() -> dict[str, str]:
    """Name the versions that the figures come from."""
    return {
        "bnx": __version__,
        "python": platform.python_version(),
        "numpy": np.__version__,
        "scipy": scipy.__version__,
        "numba": numba.__version__,
    }


def comparison_document(comparison: Comparison) -> dict[str, Any]:
    """Describe a whole run, ready for JSON."""
    advice = comparison.recommendation
    names = comparison.recipe.structures
    document: dict[str, Any] = finite(
        {
            "format": COMPARISON_FORMAT,
            "class": comparison.recipe.target,
            "class_levels": list(comparison.classifiers[0].target.levels),
            "source": comparison.source,
            "sha256": comparison.sha256,
            "rows": comparison.rows,
            "folds": comparison.folds,
            "attributes": list(comparison.names),
            "schema": attribute_entries(comparison),
            "attributes_counted": sum(one is not None for one in comparison.levels),
            "settings": comparison.recipe.to_dict(),
            "weights": comparison.weights,
            "structures": [structure_entry(comparison, s) for s in range(len(names))],
            "best": names[advice.best],
            "recommended": {
                "name": names[advice.recommended],
                "reason": advice.reason,
                "honest_log_loss": advice.honest.log_loss,
                "honest_accuracy": advice.honest.accuracy,
                "picks": [names[number] for number in advice.picks],
            },
            "mix": mix_entry(comparison),
            "yardsticks": yardstick_entries(comparison),
            "learning_curve": curve_entry(comparison),
            "reliability": {name: reliability_entry(one) for name, one in comparison.reliability.items()},
            "records": records_entry(comparison),
            **pair_entries(comparison),
            "left_out": [{"name": one.name, "reason": one.reason} for one in comparison.left_out],
            "warnings": list(comparison.warnings),
            "versions": versions(),
        }
    )
    return document


def pair_entries(comparison: Comparison) -> dict[str, Any]:
    """Describe the pairs: those listed, how many there are of each kind, and tables of those worth looking at."""
    listed, judged = pair_results(comparison), comparison.judged
    tables, without_table = pair_table_entries(comparison, listed)
    return {
        "pairs": [result.to_dict() for result in listed],
        "pairs_total": judged.family,
        "pairs_rejected": judged.rejected,
        "pairs_judged": len(comparison.pairs.left),
        "pairs_verdicts": {word: int((judged.judgement.verdict == code).sum()) for code, word in enumerate(VERDICTS)},
        "pairs_outcomes": {word: int((judged.outcome == code).sum()) for code, word in enumerate(OUTCOMES)},
        "pair_tables": tables,
        "pair_tables_left_out": without_table,
    }


def structure_entry(comparison: Comparison, s: int) -> dict[str, Any]:
    """Describe one structure and its scores."""
    classifier, result, names = comparison.classifiers[s], comparison.results[s], comparison.names
    levels = classifier.target.levels
    calibration, chosen = classifier.calibration, chosen_entry(comparison, s)
    entry = {
        "name": classifier.structure.name,
        "words": words_of(classifier.structure.name, chosen),
        "chosen": chosen,
        "edges": [edge_entry(names, edge) for edge in comparison.edges[s]],
        "free_parameters": classifier.free_parameters,
        **score_entry(result, levels),
        "temperature": calibration.temperature,
        "class_offsets": dict(zip(levels, calibration.offsets.tolist(), strict=True)),
        "floor": calibration.floor,
        "smoothing": str(classifier.smoothing),
        "by_fold": fold_entries(result, levels),
        "against_baseline": against_entry(comparison.against[s], comparison.by_metric(result)),
    }
    if comparison.held_out:
        entry["holdout"] = comparison.held_out[s].to_dict(levels)
    return entry


def edge_entry(names: Sequence[str], edge: EdgeEvidence) -> dict[str, Any]:
    """Describe one edge by names."""
    return {
        "parent": names[edge.parent],
        "child": names[edge.child],
        "bits": edge.bits,
        "gain": edge.gain,
        "gain_se": edge.gain_se,
        "gain_interval": list(edge.gain_interval) if edge.gain_interval else None,
        "gain_by_fold": list(edge.gain_by_fold),
        "chosen_in": edge.chosen_in,
        "stability": edge.stability,
        "gate_p": edge.gate_p,
        "gate_given": [names[parent] for parent in edge.gate_given],
        "carried_by_blanks": edge.carried_by_blanks,
        "verdict": edge.verdict,
    }


def structure_document(comparison: Comparison, s: int) -> dict[str, Any]:
    """Describe one structure with its tables and the evidence that speaks for it, ready for JSON."""
    entry = structure_entry(comparison, s)
    given = {
        "name",
        "words",
        "chosen",
        "edges",
        "free_parameters",
        "temperature",
        "class_offsets",
        "floor",
        "smoothing",
        "by_fold",
    }
    document: dict[str, Any] = finite(
        {
            **classifier_document(comparison.classifiers[s]),
            "bits_with_class": dict(zip(comparison.names, comparison.relevance.tolist(), strict=True)),
            "edges": entry["edges"],
            "scores": {key: value for key, value in entry.items() if key not in given},
            "recommended": s == comparison.recommendation.recommended,
            "settings": comparison.recipe.to_dict(),
            "seed": comparison.recipe.seed,
            "rows": comparison.rows,
            "folds": comparison.folds,
            "source": comparison.source,
            "sha256": comparison.sha256,
            "versions": versions(),
        }
    )
    return document


def picture_of(document: dict[str, Any]) -> Picture:
    """Turn a structure document into what a drawing shows."""
    place = {attribute["name"]: number for number, attribute in enumerate(document["attributes"])}
    chips = tuple(
        Chip(one["name"], len(one["levels"]), document["bits_with_class"][one["name"]])
        for one in document["attributes"]
    )
    arrows = tuple(
        Arrow(
            place[edge["parent"]],
            place[edge["child"]],
            edge["bits"],
            edge["verdict"],
            edge["gain"],
            tuple(edge["gain_interval"]) if edge["gain_interval"] else None,
            edge.get("carried_by_blanks", False),
        )
        for edge in document["edges"]
    )
    return Picture(document["name"], document["class"]["name"], chips, arrows, _subtitle(document))


def _subtitle(document: dict[str, Any]) -> str:
    """Say the name in words, and how many attributes are left out; nothing where words would only repeat the name."""
    told = words(document["name"], document.get("most_parents"))
    parts = [told] if told != document["name"] else []
    dropped = len(document.get("dropped", []))
    return ", ".join([*parts, f"{count_of(dropped, 'attribute')} left out"] if dropped else parts)


def dot_of(document: dict[str, Any]) -> str:
    """Draw a structure document as DOT, light theme."""
    return dot_source(picture_of(document))


def predictions_table(comparison: Comparison) -> pa.Table:
    """List out-of-fold probabilities: one row per row of data, repeat and structure."""
    return pa.concat_tables(predictions(comparison))


def predictions(comparison: Comparison) -> Iterator[pa.Table]:
    """Predict all rows out of fold once more, and list the probabilities a part at a time.

    In order of repeat, structure and row; a part is what the engine keeps together, and no more is held at once.
    """
    for repeat, one in enumerate(comparison.evaluations):
        engine = one.engine
        groups = engine.blocks * engine.classes
        bounds = engine.starts[np.arange(0, len(engine.starts), groups)].tolist()
        for s in range(len(comparison.recipe.structures) + (comparison.mix is not None)):
            for first, last in pairwise(bounds):
                yield _predicted(comparison, repeat, s, first, last)


def _predicted(comparison: Comparison, repeat: int, s: int, first: int, last: int) -> pa.Table:
    """Predict the engine's rows ``first:last`` by one structure, in the order of the table."""
    one, levels = comparison.evaluations[repeat], comparison.classifiers[0].target.levels
    p, fold = np.empty((last - first, len(levels))), np.empty(last - first, np.int64)

    def fill(number: int) -> None:
        inside = [run for run in one.fold_rows[number] if first <= run.start < run.stop <= last]
        predictor = one.predictor_of(number, s)
        for run in inside:
            p[run.start - first : run.stop - first] = predictor.probabilities(run.start, run.stop)
            fold[run.start - first : run.stop - first] = number

    one.engine.map(fill, range(len(one.fold_rows)))
    back = np.argsort(one.engine.order_of(slice(first, last)))
    names = pa.array([*comparison.recipe.structures, *(["mix"] if comparison.mix else [])])
    columns = {
        "row": comparison.lines.of_rows(first, last),
        "repeat": np.full(last - first, repeat),
        "fold": fold[back],
        "structure": pa.DictionaryArray.from_arrays(np.full(last - first, s, np.int32), names),
        "truth": pa.DictionaryArray.from_arrays(one.engine.target[first:last][back].astype(np.int32), pa.array(levels)),
    }
    return pa.table(columns | {f"p:{level}": p[back, c] for c, level in enumerate(levels)})
