"""The structure file: one self-contained JSON that others can read, check and score with."""

from collections.abc import Mapping, Sequence
from typing import Any

import numpy as np

from bnx.calibrating import Calibration
from bnx.classifier import Classifier
from bnx.domains import Domain
from bnx.errors import BnxError, FormatError
from bnx.formats.reading_json import read_json
from bnx.parameters import parse_smoothing
from bnx.structure import Structure, words

__all__ = ["STRUCTURE_FORMAT", "classifier_document", "classifier_of", "read_structure"]

STRUCTURE_FORMAT = "bnx-structure/1"


def classifier_document(classifier: Classifier) -> dict[str, Any]:
    """Describe a classifier: schema, parents, tables, prior, smoothing and calibration.

    Tables are nested lists by class, then by the levels of each parent in the order taken, then by the own level.
    """
    names = [domain.name for domain in classifier.domains]
    calibration = classifier.calibration
    levels = classifier.target.levels
    prior = classifier.class_counts / classifier.class_counts.sum()
    return {
        "format": STRUCTURE_FORMAT,
        "name": classifier.structure.name,
        "words": words(classifier.structure.name, classifier.structure.depth, classifier.dropped),
        "most_parents": classifier.structure.depth,
        "dropped": list(classifier.dropped),
        "class": {
            "name": classifier.target.name,
            "levels": list(levels),
            "rows": classifier.class_counts.tolist(),
            "prior": prior.tolist(),
        },
        "attributes": [
            {
                "name": domain.name,
                "numeric": domain.numeric,
                "cuts": list(domain.cuts),
                "levels": list(domain.levels),
                "pooled": domain.pooled,
                "blank": domain.blank,
                "parents": [names[parent] for parent in classifier.structure.parents[child]],
                "counts": classifier.counts[child].tolist(),
                "probabilities": classifier.table(child).tolist(),
            }
            for child, domain in enumerate(classifier.domains)
        ],
        "free_parameters": classifier.free_parameters,
        "smoothing": str(classifier.smoothing),
        "temperature": calibration.temperature,
        "class_offsets": dict(zip(levels, calibration.offsets.tolist(), strict=True)),
        "floor": calibration.floor,
        "floor_shares": dict(zip(levels, calibration.shares.tolist(), strict=True)),
    }


def read_structure(path: str) -> dict[str, Any]:
    """Read a structure file.

    Raises:
        DataError: there is no such file. FormatError: it is not a structure file of this version.
    """
    document = read_json(path)
    if not isinstance(document, dict) or document.get("format") != STRUCTURE_FORMAT:
        found = repr(document.get("format", "none")) if isinstance(document, dict) else "no JSON object"
        raise FormatError(f"{path} has the format {found}, not {STRUCTURE_FORMAT!r}; give a NAME.json of bnx learn")
    return document


def classifier_of(document: Mapping[str, Any], path: str) -> Classifier:
    """Rebuild the classifier of a structure document.

    Raises:
        FormatError: a part is missing, or the tables contradict their counts.
    """
    try:
        classifier = _classifier(document)
        for child, attribute in enumerate(document["attributes"]):
            _check_table(classifier, child, attribute["probabilities"])
    except (KeyError, TypeError, ValueError, AttributeError, OverflowError, BnxError) as error:
        what = f"has no {error}" if isinstance(error, KeyError) else f"contradicts itself ({error})"
        raise FormatError(f"{path} {what}; write it anew with bnx learn or bnx export") from None
    return classifier


def _check_table(classifier: Classifier, child: int, probabilities: Any) -> None:
    """Refuse probabilities that do not follow from the counts and the smoothing."""
    written, table = np.array(probabilities, dtype=float), classifier.table(child)
    if written.shape != table.shape or not (np.abs(written - table) <= 1e-9).all():
        raise ValueError(f"the probabilities of {classifier.domains[child].name} do not follow from its counts")


def _classifier(document: Mapping[str, Any]) -> Classifier:
    attributes = document["attributes"]
    domains = tuple(
        Domain(
            one["name"],
            tuple(one["levels"]),
            bool(one["numeric"]),
            tuple(one["cuts"]),
            bool(one["pooled"]),
            bool(one["blank"]),
        )
        for one in attributes
    )
    names = [domain.name for domain in domains]
    place = {name: number for number, name in enumerate(names)}
    parents = tuple(tuple(place[parent] for parent in one["parents"]) for one in attributes)
    target = Domain(document["class"]["name"], tuple(document["class"]["levels"]))
    if len({target.name, *names}) <= len(names):
        raise ValueError("two columns have the same name")
    for domain in (target, *domains):
        _check_domain(domain)
    counts = tuple(_counts(one["counts"]) for one in attributes)
    for table, domain, own in zip(counts, domains, parents, strict=True):
        shape = (len(target), *(len(domains[parent]) for parent in own), len(domain))
        if table.shape != shape or not (table >= 0).all():
            raise ValueError(f"the counts of {domain.name} have the shape {table.shape}, not {shape}")
    rows = np.array(document["class"]["rows"])
    _check_class(document["class"], rows)
    return Classifier(
        domains,
        target,
        Structure(document["name"], parents, _depth(document.get("most_parents"), parents)),
        counts,
        rows,
        parse_smoothing(document["smoothing"]),
        _calibration(document, target.levels),
        dropped=_dropped(document.get("dropped", []), names),
    )


def _depth(number: Any, parents: Sequence[Sequence[int]]) -> int | None:
    """Refuse a number of parents that some attribute exceeds."""
    if number is None:
        return None
    most = max(map(len, parents), default=0)
    if isinstance(number, bool) or not isinstance(number, int) or number < most:
        raise ValueError(f"most_parents is {number}, but an attribute has {most}")
    return number


def _dropped(found: Any, names: Sequence[str]) -> tuple[str, ...]:
    """Refuse attributes left out that are no texts, or that take part."""
    if not isinstance(found, list) or not all(isinstance(name, str) for name in found) or set(found) & set(names):
        raise ValueError(f"dropped is {found}, not a list of names that are no attributes")
    return tuple(found)


def _counts(values: Any) -> np.ndarray:
    """Read counts, which are no whole numbers where rows had weights."""
    return np.array(values, dtype=np.float64 if np.array(values).dtype.kind == "f" else np.int32)


def _check_domain(domain: Domain) -> None:
    """Refuse levels that cannot be told apart, or that do not follow from the cut points."""
    texts = all(isinstance(level, str) for level in (domain.name, *domain.levels))
    if not texts or len(set(domain.levels)) < len(domain.levels) or not domain.levels:
        raise ValueError(f"{domain.name} needs levels that are texts, each named once")
    if not all(isinstance(cut, int | float) and np.isfinite(cut) for cut in domain.cuts):
        raise ValueError(f"the cut points of {domain.name} are not all numbers")
    if domain.numeric and (
        len(domain.cuts) + 1 + domain.blank != len(domain) or list(domain.cuts) != sorted(set(domain.cuts))
    ):
        raise ValueError(f"the {len(domain.cuts)} cut points of {domain.name} do not make its {len(domain)} levels")


def _check_class(target: Mapping[str, Any], rows: np.ndarray) -> None:
    """Refuse rows per class that cannot be, or a prior that does not follow from them."""
    if rows.shape != (len(target["levels"]),) or not (rows >= 0).all() or not rows.sum():
        raise ValueError(f"the rows {rows.tolist()} do not fit the {len(target['levels'])} levels of the class")
    prior = np.array(target["prior"], dtype=float)
    if prior.shape != rows.shape or not np.allclose(prior, rows / rows.sum(), rtol=0, atol=1e-9):
        raise ValueError(f"the prior {prior.tolist()} does not follow from the rows {rows.tolist()}")


def _calibration(document: Mapping[str, Any], levels: Sequence[str]) -> Calibration:
    """Read the calibration and refuse one that could not have been fitted."""
    temperature, floor = float(document["temperature"]), float(document["floor"])
    offsets = np.array([document["class_offsets"][level] for level in levels], dtype=float)
    shares = np.array([document["floor_shares"][level] for level in levels], dtype=float)
    if not 0 < temperature < np.inf or not np.isfinite(offsets).all():
        raise ValueError(f"the temperature {temperature} or an offset is not a usable number")
    if not 0 <= floor <= 1 or (shares < 0).any() or abs(shares.sum() - 1) > 1e-9:
        raise ValueError(f"the floor {floor} and its shares are not probabilities")
    return Calibration(temperature, offsets, floor, shares)
