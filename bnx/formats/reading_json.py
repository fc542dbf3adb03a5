"""JSON that somebody hands over, read with one sentence for whatever is wrong with it."""

import json
from pathlib import Path
from typing import Any

from bnx.errors import DataError, FormatError

__all__ = ["read_json"]


def read_json(path: str) -> Any:
    """Read a file of JSON.

    Raises:
        DataError: there is no such file. FormatError: it is no text, or no JSON that can be read.
    """
    wanted = "give the NAME.json that bnx learn or bnx export wrote"
    try:
        text = Path(path).read_text(encoding="utf-8")
    except FileNotFoundError:
        raise DataError(f"there is no file {path}; {wanted}") from None
    except IsADirectoryError:
        raise DataError(f"{path} is a folder, not a file; give one in it, as in {Path(path) / 'NAME.json'}") from None
    except UnicodeDecodeError as error:
        raise FormatError(f"{path} is not text in UTF-8 (at byte {error.start:,}); {wanted}") from None
    except OSError as error:
        raise FormatError(f"{path} cannot be read ({error.strerror}); {wanted}") from None
    try:
        return json.loads(text)
    except json.JSONDecodeError as error:
        raise FormatError(f"{path} is not JSON (line {error.lineno}: {error.msg}); {wanted}") from None
    except RecursionError:
        raise FormatError(f"{path} nests brackets too deeply to be a file of bnx; {wanted}") from None
    except ValueError:
        raise FormatError(f"{path} holds a number with too many digits; {wanted}") from None
