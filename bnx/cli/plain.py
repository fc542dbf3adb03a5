"""Sentences that hold names from a file, made safe for a terminal."""

__all__ = ["one_line"]


def one_line(sentence: str) -> str:
    """Write line ends and other control characters as escapes, so that a sentence stays one line."""
    return "".join(sign if sign.isprintable() else sign.encode("unicode_escape").decode() for sign in sentence)
