"""Blocks of data that the page's scripts read, and digests for its content security policy."""

import base64
import hashlib
import json
from typing import Any

from markupsafe import Markup

__all__ = ["digest", "json_block"]

_ESCAPES = {ord(sign): f"\\u{ord(sign):04x}" for sign in "<>&\u2028\u2029"}


def json_block(name: str, value: Any) -> Markup:
    """Write plain values as a block of the page that no browser runs, id ``data-NAME``.

    No text in it can end the block: ``<``, ``>`` and ``&`` are escaped.
    """
    text = json.dumps(value, ensure_ascii=False, allow_nan=False, separators=(",", ":")).translate(_ESCAPES)
    return Markup(f'<script type="application/json" id="data-{name}">{text}</script>')


def digest(text: str) -> str:
    """Give the SHA-256 of a style sheet or script as the policy names it."""
    return base64.b64encode(hashlib.sha256(text.encode()).digest()).decode()
