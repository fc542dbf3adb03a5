"""What bnx raises on purpose.

BnxError
    SettingError    a setting has a value that cannot be used
    DataError       the table cannot be read or used as asked
    StructureError  a structure contradicts itself or the table
    FormatError     a file is not what it claims to be
    EngineError     something outside bnx (a drawing engine, a cluster) failed

Every message is one sentence: what is wrong, the value, where, and what would be right.
"""

__all__ = ["BnxError", "DataError", "EngineError", "FormatError", "SettingError", "StructureError"]


class BnxError(Exception):
    """Anything that bnx refuses with a sentence instead of a traceback."""


class SettingError(BnxError):
    """A setting has a value that cannot be used."""


class DataError(BnxError):
    """The table cannot be read or used as asked."""


class StructureError(BnxError):
    """A structure contradicts itself or the table."""


class FormatError(BnxError):
    """A file is not what it claims to be."""


class EngineError(BnxError):
    """Something outside bnx failed: a drawing engine, a cluster."""
