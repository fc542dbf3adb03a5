"""The mix file: structures with their weights in one self-contained JSON."""

from collections.abc import Mapping, Sequence
from typing import Any

from bnx.errors import FormatError
from bnx.formats.structure_json import STRUCTURE_FORMAT, classifier_of
from bnx.mixed_classifier import MixedClassifier, mix_words

__all__ = ["MIX_FORMAT", "is_mix", "members_of_mix", "mixed_document", "mixed_of"]

MIX_FORMAT = "bnx-mix/1"


def mixed_document(members: Sequence[Mapping[str, Any]], weights: Sequence[float], sharpness: float) -> dict[str, Any]:
    """Put structure documents together with their weights, which sum to 1, and the sharpness of what they give."""
    first = members[0]["class"]
    return {
        "format": MIX_FORMAT,
        "name": "mix",
        "words": mix_words([member["name"] for member in members], weights),
        "class": {"name": first["name"], "levels": first["levels"]},
        "members": [
            {"name": member["name"], "weight": weight, "structure": member}
            for member, weight in zip(members, weights, strict=True)
        ],
        "sharpness": sharpness,
    }


def is_mix(document: Any) -> bool:
    """Tell whether what was read from a file claims to be a mix."""
    return isinstance(document, dict) and document.get("format") == MIX_FORMAT


def members_of_mix(document: Mapping[str, Any], path: str) -> list[tuple[dict[str, Any], float]]:
    """List the structure documents of a mix with their weights.

    Raises:
        FormatError: there are none, or the weights are none.
    """
    try:
        found = [(dict(one["structure"]), _weight(one["weight"])) for one in document["members"]]
        formats = {one.get("format") for one, _ in found}
    except (KeyError, TypeError, ValueError, AttributeError):
        raise FormatError(f"{path}: the members are no structures with weights; write it anew with bnx learn") from None
    if not found:
        raise FormatError(f"{path}: it has no members; write it anew with bnx learn")
    if formats != {STRUCTURE_FORMAT}:
        raise FormatError(f"{path}: its members are not all {STRUCTURE_FORMAT!r}; write it anew with bnx learn")
    weights = [weight for _, weight in found]
    if min(weights) < 0 or not abs(sum(weights) - 1) <= 1e-9:
        raise FormatError(f"{path}: the weights {weights} are not shares of 1; write it anew with bnx learn")
    return found


def mixed_of(document: Mapping[str, Any], path: str) -> MixedClassifier:
    """Rebuild the classifier of a mix document.

    Raises:
        FormatError: a part is missing or contradicts another.
    """
    found = members_of_mix(document, path)
    members = tuple(classifier_of(one, f"{path}, member {one.get('name')}") for one, _ in found)
    names = [one.get("name") for one, _ in found]
    told = [one.get("name") for one in document["members"]]
    if told != names or not isinstance(document.get("words"), str):
        raise FormatError(f"{path}: its words or the names of its members are not theirs; write it anew with bnx learn")
    if len(set(names)) < len(names):
        raise FormatError(f"{path}: two of its members have the same name; write it anew with bnx learn")
    known = {domain.name: domain for one in members for domain in one.domains}
    alike = all(known[domain.name] == domain for one in members for domain in one.domains)
    target = members[0].target
    own = {"name": target.name, "levels": list(target.levels)}
    if not alike or document.get("class") != own or any(one.target != target for one in members):
        raise FormatError(f"{path}: its members differ in attributes or class; write it anew with bnx learn")
    return MixedClassifier(members, tuple(weight for _, weight in found), _sharpness(document, path))


def _weight(found: Any) -> float:
    if isinstance(found, bool) or not isinstance(found, int | float):
        raise ValueError(f"{found!r} is no number")
    return float(found)


def _sharpness(document: Mapping[str, Any], path: str) -> float:
    found = document.get("sharpness")
    if isinstance(found, bool) or not isinstance(found, int | float) or not abs(found) <= 1:
        raise FormatError(f"{path}: the sharpness is {found}, not a number from -1 to 1; write it anew with bnx learn")
    return float(found)
