"""See where the independence assumption of naive Bayes breaks, whether it matters, and what to model instead."""

import os

__version__ = "0.1.0"

# Compiled kernels are kept with the user, not in the package: files that pip does not know would outlive an uninstall.
# The noqa: pathlib refuses a user without a home, os.path does not.
_CACHE = os.environ.get("XDG_CACHE_HOME") or os.path.join(os.path.expanduser("~"), ".cache")  # noqa: PTH111, PTH118
os.environ.setdefault("NUMBA_CACHE_DIR", os.path.join(_CACHE, "bnx", "kernels"))  # noqa: PTH118
