"""Where counting runs. A member holds rows in blocks and counts pairs and families by block and class."""

from bnx.engines.local import LocalEngine, start_local

__all__ = ["LocalEngine", "start_local"]
