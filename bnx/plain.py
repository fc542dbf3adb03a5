"""Values that JSON knows."""

import math
from typing import Any

__all__ = ["finite"]


def finite(value: Any) -> Any:
    """Replace what JSON does not know (infinity, NaN) by None, inside lists and dicts too."""
    if isinstance(value, float):
        return value if math.isfinite(value) else None
    if isinstance(value, dict):
        return {key: finite(item) for key, item in value.items()}
    if isinstance(value, list | tuple):
        return [finite(item) for item in value]
    return value
