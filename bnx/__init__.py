"""See where the independence assumption of naive Bayes breaks, whether it matters, and what to model instead."""

import hashlib
import os
from pathlib import Path

__version__ = "0.1.0"

# Compiled kernels are kept with the user, not in the package: files that pip does not know would outlive an uninstall.
# Each state of the sources has a folder of its own: a compiled kernel does not notice that one it calls has changed.
# The noqa: pathlib refuses a user without a home, os.path does not.
_CACHE = Path(os.environ.get("XDG_CACHE_HOME") or Path(os.path.expanduser("~"), ".cache"))  # noqa: PTH111
_SOURCES = sorted((Path(__file__).parent / "kernels").glob("*.py"))
__kernels__ = hashlib.blake2b(
    repr([(path.name, path.read_bytes()) for path in _SOURCES]).encode(), digest_size=8
).hexdigest()
"""Which state of the compiled loops' sources this is."""
os.environ.setdefault("NUMBA_CACHE_DIR", str(_CACHE / "bnx" / f"kernels-{__kernels__}"))
