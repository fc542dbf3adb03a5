"""What was chosen inside every training set for a structure that leaves its parents' number or attributes open."""

from collections import Counter
from collections.abc import Sequence
from typing import Any

from bnx.comparison import Comparison
from bnx.structure import words
from bnx.text import count_of

__all__ = ["chosen_entry", "words_of"]


def chosen_entry(comparison: Comparison, s: int) -> dict[str, Any] | None:
    """Describe the choice on all rows and in every fold: most parents, names of attributes left out; else None."""
    classifier = comparison.classifiers[s]
    if classifier.structure.depth is None:
        return None
    folds = [
        {"repeat": repeat, "fold": fold, **_choice(comparison, s, repeat, (fold,))}
        for repeat, one in enumerate(comparison.evaluations)
        for fold in range(len(one.fold_rows))
    ]
    return {"most_parents": classifier.structure.depth, "dropped": list(classifier.dropped), "by_fold": folds}


def _choice(comparison: Comparison, s: int, repeat: int, held: tuple[int, ...]) -> dict[str, Any]:
    structure = comparison.evaluations[repeat].learned(held).structures[s]
    return {"most_parents": structure.depth, "dropped": [comparison.names[one] for one in structure.dropped]}


def words_of(name: str, chosen: dict[str, Any] | None) -> str:
    """Say a structure's name in words, with what was chosen on all rows, and in how many folds."""
    if chosen is None:
        return words(name)
    by_fold = chosen["by_fold"]
    told = [_often([one["most_parents"] for one in by_fold])]
    left_out = [len(one["dropped"]) for one in by_fold]
    if any(left_out):
        least, most = min(left_out), max(left_out)
        told.append(
            f"without {count_of(most, 'attribute')}" if least == most else f"without {least} to {most} attributes"
        )
    what = "; ".join(told)
    return f"{words(name, chosen['most_parents'], chosen['dropped'])} (in {count_of(len(by_fold), 'fold')}: {what})"


def _often(numbers: Sequence[int]) -> str:
    """Say how often each number of parents was chosen, the most frequent first."""
    times = sorted(Counter(numbers).items(), key=lambda item: (-item[1], item[0]))
    return ", ".join(f"{number} in {often}" for number, often in times)
