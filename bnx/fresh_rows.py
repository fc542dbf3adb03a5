"""Scores on a table that took no part in anything: ``--holdout``."""

from collections.abc import Sequence

import numpy as np

from bnx.classifier import Classifier
from bnx.domains import codes_of, together
from bnx.encoding import encode
from bnx.errors import DataError
from bnx.losses import Scores, scores
from bnx.mix_judging import JudgedMix
from bnx.mixed_classifier import MixedClassifier
from bnx.reading import Source
from bnx.summing_out import summing_notes
from bnx.text import count_of

__all__ = ["score_on_fresh_rows"]


def score_on_fresh_rows(
    members: Sequence[Classifier], mix: JudgedMix | None, source: Source | None, class_name: str
) -> tuple[tuple[Scores, ...], list[str]]:
    """Score the final structures, and their mix if there is one, on another table; say which rows could not be scored.

    Raises:
        DataError: no row of the table can be scored.
    """
    if source is None:
        return (), []
    classifiers = _scored_on_them(members, mix)
    target, domains = classifiers[0].target, together(one.domains for one in classifiers)
    parts: list[list[np.ndarray]] = [[] for _ in classifiers]
    truth, dropped, unknown, rough = [], 0, np.zeros(len(domains), np.int64), 0
    for codes, _ in encode(source, [*domains, target]):
        known = codes[-1] >= 0
        truth.append(codes[-1][known])
        dropped += int((~known).sum())
        own = codes[:-1][:, known]
        unknown += (own < 0).sum(axis=1)
        found = [one.classified(codes_of(one.domains, own, domains)) for one in classifiers]
        rough += int(np.any([approximate for _, approximate in found], axis=0).sum())
        for part, (p, _) in zip(parts, found, strict=True):
            part.append(p)
    rows = np.concatenate(truth) if truth else np.zeros(0, np.int32)
    if not len(rows):
        raise DataError(f"{source.name} (--holdout) has no row whose {class_name} is one of {', '.join(target.levels)}")
    notes = []
    if dropped:
        why = f"{class_name} is blank there or was never seen"
        notes.append(f"{count_of(dropped, 'row')} of {source.name} (--holdout) left out: {why}")
    names = [domain.name for domain in domains]
    notes += [f"{source.name} (--holdout): {note}" for note in summing_notes(names, unknown, rough)]
    return tuple(scores(np.concatenate(part), rows, len(target)) for part in parts), notes


def _scored_on_them(classifiers: Sequence[Classifier], mix: JudgedMix | None) -> list[Classifier | MixedClassifier]:
    """List what is scored on a table that took no part."""
    if mix is None:
        return list(classifiers)
    members = tuple(classifiers[s] for s in mix.members)
    return [*classifiers, MixedClassifier(members, tuple(mix.members.values()))]
