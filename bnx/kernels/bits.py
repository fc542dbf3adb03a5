"""One bits of a word, by the machine's own instruction; loops over words become vectors."""

from numba import types
from numba.extending import intrinsic

__all__ = ["ones"]


# Intrinsics take numba's own types, which have no annotations: hence the ignored errors.
@intrinsic
def ones(typing_context, word):  # type: ignore[no-untyped-def]
    """Count the one bits of a word."""

    def generate(context, builder, signature, arguments):  # type: ignore[no-untyped-def]
        return builder.ctpop(arguments[0])

    return types.uint64(types.uint64), generate
