"""How much memory the pairs of a wide table take where they are held in a matrix, said before the long part begins."""

from collections.abc import Sequence

from bnx.coarsening import needs_coarsening
from bnx.domains import Schema
from bnx.errors import DataError
from bnx.gating import Bounds
from bnx.learners import Learner
from bnx.recipe import Recipe
from bnx.storing import available_memory
from bnx.wide_learning import MOST_IN_MATRIX, TESTS, TREES

__all__ = ["matrix_notes"]

_BYTES = 1_250  # per pair at the peak, as measured: statistics, tests given the class and without it, what they say


def matrix_notes(schema: Schema, learners: Sequence[Learner], bounds: Bounds, recipe: Recipe) -> list[str]:
    """Say that very many pairs are held in a matrix, how much memory that takes, and which settings would not.

    Raises:
        DataError: the machine has less memory available than that.
    """
    attributes = len(schema.attributes)
    pairs = attributes * (attributes - 1) // 2
    reasons = _reasons(schema, learners, bounds, recipe)
    if pairs <= MOST_IN_MATRIX or not reasons:
        return []
    needed, available = pairs * _BYTES, available_memory()
    why = (
        f"{' and '.join(reasons)}; attributes of two levels that are not cut, with --structures naive,tan,tan-tested, "
        "--test auto and without --require, take a faster road that holds no matrix"
    )
    if available is not None and needed > available:
        raise DataError(
            f"{pairs:,} pairs would be held in a matrix of about {needed / 1e9:.1f} GB, but {available / 1e9:.1f} GB "
            f"of memory are available, because of {why}; fewer columns (--ignore) need less"
        )
    return [f"{pairs:,} pairs are held in a matrix, which takes about {needed / 1e9:.1f} GB, because of {why}"]


def _reasons(schema: Schema, learners: Sequence[Learner], bounds: Bounds, recipe: Recipe) -> list[str]:
    """List what keeps a table from the road without a matrix (`wide_learning.takes_wide_road`)."""
    domains = schema.attributes
    many = [one.name for one in domains if len(one) != 2 or needs_coarsening(one, recipe.max_levels)]
    other = [member.name for member in learners if member.name not in TREES]
    reasons = [f"attributes that are cut or have other than two levels (such as {many[0]})"] if many else []
    reasons += [f"--structures {','.join(other)}"] if other else []
    reasons += [f"--test {recipe.test}"] if recipe.test not in TESTS else []
    return reasons + (["--require"] if bounds.required else [])
