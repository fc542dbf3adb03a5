"""What a reader of the figures must know about how they were made."""

from collections.abc import Sequence

from bnx.coding import Coded
from bnx.cut_notes import cut_notes
from bnx.evaluation import Evaluation
from bnx.heldout import MOST_ROWS
from bnx.learners import Heldout, KdbTrimmed, Learner
from bnx.learning import make_bounds
from bnx.leaving_out import MOST_JUDGED
from bnx.observing import rare_classes, short_of_room, unobserved_notes
from bnx.rating import EXACT_ROWS, SLOPE_ROWS, StructureScore
from bnx.recipe import Recipe
from bnx.sampling import rows_for_gains

__all__ = ["run_notes"]


def run_notes(
    evaluations: Sequence[Evaluation],
    coded: Coded,
    recipe: Recipe,
    learners: Sequence[Learner],
    results: Sequence[StructureScore],
) -> list[str]:
    """Say what a reader of the figures must know about how they were made."""
    notes: list[str] = []
    sample, engine = evaluations[0].sample, evaluations[0].engine
    if len(sample.target) < engine.rows:
        gained = rows_for_gains(engine, len(evaluations[0].fold_rows))
        notes.append(
            f"choices inside training folds are made on {len(sample.target):,} of {engine.rows:,} rows, gains of edges "
            f"are judged on {gained:,}, a seeded sample by fold and class; scores and tests use all rows"
        )
    notes += unobserved_notes(evaluations[0], coded.table.schema.names)
    notes += cut_notes(evaluations[0], coded.table.schema, recipe.bins)
    if any(isinstance(member, Heldout) for member in learners) and engine.rows > MOST_ROWS:
        notes.append(
            f"parents of heldout are chosen on at most {MOST_ROWS:,} rows of every training set, spread evenly by fold "
            "and class"
        )
    if any(isinstance(member, KdbTrimmed) for member in learners) and engine.rows > MOST_JUDGED:
        notes.append(
            f"kdb-trimmed judges parents and attributes on at most {MOST_JUDGED:,} rows of every training set, spread "
            "evenly by block and class; its counts are of all rows"
        )
    notes += short_of_room(evaluations[0], make_bounds(recipe, coded.table.schema.names))
    if recipe.group:
        notes.append(
            f"rows of one {recipe.group} may be alike, but the tests assume independent records: every p is descriptive"
        )
        if any(isinstance(member, KdbTrimmed) for member in learners):
            notes.append(
                f"kdb-trimmed leaves out single rows, not whole {recipe.group}, while it chooses: it may keep too many "
                "parents where rows of one are alike, and its scores show that"
            )
    sizes = evaluations[0].rows_by_fold
    if max(sizes) > 1.2 * min(sizes):
        notes.append(
            f"folds hold {min(sizes):,} to {max(sizes):,} rows; differences to {recipe.baseline} are means over folds "
            "and may differ from those of the log losses, which are means over rows"
        )
    notes += rare_classes(evaluations, coded.table.schema.target.levels)
    if any(member.tested for member in learners) and recipe.alpha > 0.1:
        notes.append(f"edges are tested at {recipe.alpha:g}: that share of the drawn edges may be false")
    return notes + _rating_notes(results)


def _rating_notes(results: Sequence[StructureScore]) -> list[str]:
    """Say how far rankings may be off where rows are too many to be ranked one by one."""
    rows = sum(fold.rows for fold in results[0].by_fold)
    every = [one for result in results for one in (result.pooled, *(fold.scores for fold in result.by_fold))]
    area, error = (max(getattr(one, name) for one in every) for name in ("auc_within", "calibration_within"))
    if rows <= EXACT_ROWS or not area + error:
        return []
    return [
        f"{rows:,} rows are too many to rank one by one: areas under the curve come from histograms and are within "
        f"{area:.1g}, calibration errors within {error:.1g}; calibration slopes are found from {SLOPE_ROWS:,} rows"
    ]
