"""Scores of the final classifiers on a table that took no part in anything (``--holdout``)."""

from collections.abc import Sequence

import numpy as np

from bnx.classifier import Classifier
from bnx.coding import Coded
from bnx.domains import codes_of, together
from bnx.encoding import encode
from bnx.errors import DataError
from bnx.losses import Scores, scores
from bnx.mix_judging import JudgedMix
from bnx.mixed_classifier import MixedClassifier
from bnx.reading import Source
from bnx.recipe import Recipe
from bnx.storing import Store
from bnx.summing_out import summing_notes
from bnx.text import count_of
from bnx.weighed_losses import weighed_scores
from bnx.weighing import as_records, checked_weights

__all__ = ["checked_holdout", "score_held_out"]


def checked_holdout(source: Source, coded: Coded, recipe: Recipe, store: Store) -> Source:
    """Look for the columns that a table must have to be scored, and take its rows by their counts.

    Raises:
        DataError: a column is missing, or one of weights cannot be used.
    """
    source.check([*coded.table.schema.names, recipe.target])
    return as_records(source, coded.weighing, len(coded.table.schema.attributes), store)


def score_held_out(
    members: Sequence[Classifier], mix: JudgedMix | None, source: Source, recipe: Recipe, coded: Coded
) -> tuple[tuple[Scores, ...], list[str]]:
    """Score the final structures, and their mix if there is one, on another table; say which rows could not be scored.

    coded: the table that they were learnt from.

    Raises:
        DataError: no row of the table can be scored.
    """
    classifiers = _scored_on_it(members, mix)
    weight = "" if coded.table.weights is None else recipe.weight
    target, domains = classifiers[0].target, together(one.domains for one in classifiers)
    parts: list[list[np.ndarray]] = [[] for _ in classifiers]
    truth, dropped, unknown, rough = [], 0, np.zeros(len(domains), np.int64), 0
    masses, read = [], 0
    for codes, batch in encode(source, [*domains, target], [weight] if weight else []):
        known = codes[-1] >= 0
        mass = checked_weights(batch.column(weight), weight, read) if weight else np.ones(len(known))
        masses.append(mass[known])
        read += len(known)
        truth.append(codes[-1][known])
        dropped += int((~known).sum())
        own = codes[:-1][:, known]
        unknown += (own < 0).sum(axis=1)
        found = [classifier.classified(codes_of(classifier.domains, own, domains)) for classifier in classifiers]
        rough += int(np.any([approximate for _, approximate in found], axis=0).sum())
        for part, (p, _) in zip(parts, found, strict=True):
            part.append(p)
    rows = np.concatenate(truth) if truth else np.zeros(0, np.int32)
    if not len(rows):
        raise DataError(
            f"{source.name} (--holdout) has no row whose {recipe.target} is one of {', '.join(target.levels)}"
        )
    notes = []
    if dropped:
        why = f"{recipe.target} is blank there or was never seen"
        notes.append(f"{count_of(dropped, 'row')} of {source.name} (--holdout) left out: {why}")
    names = [domain.name for domain in domains]
    notes += [f"{source.name} (--holdout): {note}" for note in summing_notes(names, unknown, rough)]
    mass = np.concatenate(masses)
    if not mass.any():
        raise DataError(f"the weight in {weight} is 0 in every row of {source.name} (--holdout) that could be scored")
    every = [np.concatenate(part) for part in parts]
    if not weight:
        return tuple(scores(p, rows, len(target)) for p in every), notes
    return tuple(weighed_scores(p, rows, mass / mass.mean()) for p in every), notes


def _scored_on_it(classifiers: Sequence[Classifier], mix: JudgedMix | None) -> list[Classifier | MixedClassifier]:
    """List what is scored on a table that took no part."""
    if mix is None:
        return list(classifiers)
    members = tuple(classifiers[s] for s in mix.members)
    return [*classifiers, MixedClassifier(members, tuple(mix.members.values()), mix.sharpness)]
