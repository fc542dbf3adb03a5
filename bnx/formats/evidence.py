"""What a structure file says besides its tables: where it comes from, its scores, and the evidence on its edges."""

from collections.abc import Mapping
from typing import Any

from bnx.errors import FormatError

__all__ = ["check_evidence"]

Kinds = tuple[type, ...]

_NUMBER: Kinds = (int, float)
_NUMBER_OR_NONE: Kinds = (int, float, type(None))
_TOP: Mapping[str, Kinds] = {
    "words": (str,),
    "source": (str,),
    "rows": (int,),
    "folds": (int,),
    "free_parameters": (int,),
    "bits_with_class": (dict,),
    "edges": (list,),
    "scores": (dict,),
    "settings": (dict,),
}
_SETTINGS: Mapping[str, Kinds] = {"repeats": (int,)}
_EDGE: Mapping[str, Kinds] = {
    "parent": (str,),
    "child": (str,),
    "bits": _NUMBER,
    "gain": _NUMBER_OR_NONE,
    "gain_se": _NUMBER_OR_NONE,
    "gain_interval": (list, type(None)),
    "chosen_in": (int,),
    "stability": _NUMBER_OR_NONE,
    "gate_p": _NUMBER_OR_NONE,
    "verdict": (str,),
}


def check_evidence(document: Mapping[str, Any], path: str) -> None:
    """Check the parts of a structure document that are shown but not needed to classify.

    Raises:
        FormatError: a part is missing or of another kind, or the edges are not those of the parents.
    """
    attributes = document["attributes"]
    _check(document, _TOP, path, "")
    _check(document["settings"], _SETTINGS, path, "settings.")
    _check(document["bits_with_class"], {one["name"]: _NUMBER for one in attributes}, path, "bits_with_class.")
    for place, edge in enumerate(document["edges"]):
        _check(edge, _EDGE, path, f"edges[{place}].")
        ends = edge["gain_interval"]
        if ends is not None and [type(end) in _NUMBER for end in ends] != [True, True]:
            raise FormatError(f"{path}: edges[{place}].gain_interval is {ends!r}, not two numbers; write it anew")
    told = sorted((edge["parent"], edge["child"]) for edge in document["edges"])
    if told != sorted((parent, one["name"]) for one in attributes for parent in one["parents"]):
        raise FormatError(f"{path}: the edges are not those of the attributes' parents; write it anew with bnx learn")


def _check(part: Any, kinds: Mapping[str, Kinds], path: str, where: str) -> None:
    """Check that a part holds values of the right kinds."""
    if not isinstance(part, dict):
        raise FormatError(f"{path}: {where.rstrip('.')} is {part!r}, not an object; write it anew with bnx learn")
    for key, allowed in kinds.items():
        if key not in part:
            raise FormatError(f"{path} has no {where}{key}; write it anew with bnx learn or bnx export")
        value = part[key]
        if not isinstance(value, allowed) or (isinstance(value, bool) and bool not in allowed):
            names = " or ".join("null" if kind is type(None) else kind.__name__ for kind in allowed)
            raise FormatError(f"{path}: {where}{key} is {value!r}, not {names}; write it anew with bnx learn")
