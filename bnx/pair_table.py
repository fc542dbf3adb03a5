"""What `bnx test` is asked, and the coded table it asks it of."""

import math
from collections.abc import Mapping
from dataclasses import dataclass, field

import numpy as np

from bnx.coding import Coded
from bnx.domains import Domain
from bnx.engines import LocalEngine, start_local
from bnx.engines.local import Progress
from bnx.errors import DataError, SettingError
from bnx.level_order import level_scores
from bnx.recipe import Recipe
from bnx.storing import Store
from bnx.text import count_of
from bnx.trainings import Training, make_trainings

__all__ = ["CLOSE", "Asked", "PairTable", "bins_of"]

CLOSE = 10  # rejected pairs of --all that are looked at closely if nothing else is said

_MOST_CELLS = 400_000_000


@dataclass(frozen=True)
class Asked:
    """Which pairs to test: all of the named ``attributes``, or ``everything``; what else is ``given``; columns with
    ``ordered`` levels; whether to try what explains a dependence; how many rejected pairs of ``everything`` to look at
    closely.

    Raises:
        SettingError: too few names, a name twice, or one in two places.
    """

    attributes: tuple[str, ...] = ()
    given: tuple[str, ...] = ()
    everything: bool = False
    ordered: Mapping[str, tuple[str, ...]] = field(default_factory=dict)
    explain: bool = False
    close: int | None = None

    def __post_init__(self) -> None:
        """Refuse names that contradict each other."""
        if self.everything and self.attributes:
            raise SettingError(
                f"--all tests every pair, but {self.attributes[0]} is named too; give the names or --all"
            )
        if not self.everything and len(self.attributes) < 2:
            named = "no attribute is" if not self.attributes else f"only {self.attributes[0]} is"
            raise SettingError(f"{named} named, but a pair needs two; name at least two, or give --all")
        for names in (self.attributes, self.given):
            twice = [name for place, name in enumerate(names) if name in names[:place]]
            if twice:
                raise SettingError(f"{twice[0]!r} is named twice; name each attribute once")
        both = [name for name in self.given if name in self.attributes]
        if both:
            raise SettingError(f"{both[0]!r} is to be tested and also --given; it can be only one of them")
        if self.close is not None and not self.everything:
            raise SettingError(f"--close {self.close} says how many pairs of --all to look at; give --all, or drop it")
        if self.close is not None and self.close < 0:
            raise SettingError(f"--close: {self.close} cannot be used; give 0 or a number of pairs")
        idle = [
            name for name in self.ordered if name in self.given or (self.attributes and name not in self.attributes)
        ]
        if idle:
            raise SettingError(
                f"--ordered {idle[0]}: it is not among the attributes to be tested, so its order would change nothing; "
                "name it, or drop it"
            )


def bins_of(recipe: Recipe) -> str:
    """Cut numeric columns by this rule: nothing is chosen out of fold here, so ``auto`` means frequency:5."""
    return "frequency:5" if recipe.bins == "auto" else recipe.bins


@dataclass(frozen=True)
class PairTable:
    """The coded table ready for counting; ``chosen`` and ``given``: attributes by number."""

    engine: LocalEngine
    training: Training
    coded: Coded
    asked: Asked
    chosen: tuple[int, ...]
    given: tuple[int, ...]
    scores: tuple[np.ndarray | None, ...]

    @classmethod
    def of(cls, coded: Coded, recipe: Recipe, asked: Asked, jobs: int, progress: Progress, store: Store) -> "PairTable":
        """Cut numeric columns, find the attributes. The rows are sorted in place.

        Raises:
            DataError: an attribute cannot be tested.
        """
        schema = coded.table.schema
        given = tuple(_index(coded, name, recipe) for name in asked.given)
        named = asked.attributes or [name for name in schema.names if name not in asked.given]
        chosen = tuple(sorted(_index(coded, name, recipe) for name in named))
        if len(chosen) < 2:
            raise DataError(
                f"the table has only {count_of(len(chosen), 'attribute')} to test beside the class and --given, "
                "but a pair needs two; give a table with more, or fewer --given"
            )
        blocks = np.zeros(coded.table.lines.count, np.uint8)
        engine = start_local(coded.table, blocks, 1, jobs, progress, store, in_place=True)
        bins = bins_of(recipe)
        training = make_trainings(engine, schema, {(): np.ones(1, bool)}, bins, recipe.max_levels)[0]
        for name in asked.ordered:
            _index(coded, name, recipe)
        domains = training.view.domains
        for number in (*given, *(chosen if asked.attributes else ())):
            if _flat(domains[number]):
                raise DataError(
                    f"{domains[number].name!r} is numeric, but {bins} finds no cut point in it, so it has one level "
                    f"only; give other --bins, as frequency:5, or --categorical {domains[number].name}"
                )
        scores = tuple(level_scores(domain, asked.ordered) for domain in domains)
        table = cls(engine, training, coded, asked, chosen, given, scores)
        table.check_size()
        return table

    def check_size(self) -> None:
        """Refuse strata that could not be counted.

        Raises:
            SettingError: there are more of them than fit.
        """
        sizes = [len(domain) for domain in self.training.view.domains]
        strata = len(self.coded.table.schema.target) * math.prod(sizes[number] for number in self.given)
        largest = sorted((sizes[number] for number in self.chosen), reverse=True)[:2]
        if self.asked.explain:
            tested = self.chosen if len(self.chosen) == 2 else ()
            others = [size for number, size in enumerate(sizes) if number not in (*self.given, *tested)]
            strata *= max(others, default=1)
        if strata * math.prod(largest) > _MOST_CELLS:
            what = " and ".join([*(["--given"] if self.given else []), *(["--explain"] if self.asked.explain else [])])
            raise SettingError(
                f"{what or 'the table'} would make {strata:,} strata of up to {math.prod(largest):,} cells, more than "
                "can be counted; give a smaller --max-levels, fewer --given, or no --explain"
            )

    def without_cuts(self, number: int) -> bool:
        """Tell whether an attribute is numeric and has one level only, for want of a cut point."""
        return _flat(self.training.view.domains[number])

    @property
    def names(self) -> tuple[str, ...]:
        """Names of the attributes."""
        return self.coded.table.schema.names


def _flat(domain: Domain) -> bool:
    return domain.numeric and not domain.cuts and not domain.blank


def _index(coded: Coded, name: str, recipe: Recipe) -> int:
    """Find an attribute that takes part.

    Raises:
        DataError: it is the class, or was left out; saying why.
    """
    schema = coded.table.schema
    if name == schema.target.name:
        raise DataError(f"{name!r} is the class, which is taken as given in every test; leave it out")
    if name in recipe.ignore:
        raise DataError(f"{name!r} is left out by --ignore; drop that, or do not name it here")
    reasons = [one.reason for one in coded.left_out if one.name == name]
    if reasons:
        raise DataError(f"{name!r} is left out of the table: {reasons[0]}")
    return schema.index(name)
