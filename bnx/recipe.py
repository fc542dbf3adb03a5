"""Every setting of a run, with its default and its check."""

from collections.abc import Sequence
from dataclasses import asdict, dataclass, replace
from typing import Any

from bnx.coding import MISSING, Coded, code_table
from bnx.discretising import parse_bins
from bnx.errors import DataError, SettingError
from bnx.independence import TESTS
from bnx.learners import learner
from bnx.multiplicity import METHODS as ADJUSTMENTS
from bnx.parameters import candidates
from bnx.reading import Source
from bnx.storing import MEMORY, Store
from bnx.text import quoted
from bnx.weighing import read_weights, records_of

__all__ = ["DEFAULT_STRUCTURES", "MOST_FOLDS", "Recipe"]

DEFAULT_STRUCTURES = ("naive", "tan", "tan-tested", "kdb1-tested", "kdb2", "kdb2-tested", "kdb3-tested", "heldout")
_ON_REQUEST = "heldout"  # ... on tables of more rows or attributes than these
MOST_ROWS, MOST_ATTRIBUTES = 50_000, 60

MOST_FOLDS = 50  # every pair of folds is a training set of its own, so the work grows with their square


@dataclass(frozen=True)
class Recipe:
    """The settings of ``bnx learn``; an option of the command line, a field here and a key in the JSON share a name.

    ``structures``: none stands for the default ones, which the size of the table decides (``for_table``).

    Raises:
        SettingError: a setting cannot be used.
    """

    target: str
    structures: tuple[str, ...] = ()
    baseline: str = "naive"
    test: str = "auto"
    adjust: str = "bh"
    alpha: float = 0.05
    negligible: float = 0.005
    folds: int = 10
    repeats: int = 1
    group: str = ""
    fold_column: str = ""
    holdout: str = ""
    weight: str = ""
    seed: int = 1
    bins: str = "auto"
    numeric: tuple[str, ...] = ()
    categorical: tuple[str, ...] = ()
    ignore: tuple[str, ...] = ()
    keep: tuple[str, ...] = ()
    missing: str = "level"
    max_levels: int = 50
    smoothing: str = "auto"
    temperature: bool = True
    mix: bool = True
    require: tuple[str, ...] = ()
    forbid: tuple[str, ...] = ()
    resamples: int = 100
    records: int = 12
    yardstick: bool = False
    learning_curve: bool = False

    def __post_init__(self) -> None:
        """Check every setting that can be checked without the table."""
        _one_of("test", self.test, TESTS)
        _one_of("adjust", self.adjust, ADJUSTMENTS)
        _one_of("missing", self.missing, MISSING)
        _between("alpha", self.alpha, 0, 1)
        _between("negligible", self.negligible, 0, 10)
        _whole("folds", self.folds, 3, MOST_FOLDS)
        _whole("repeats", self.repeats, 1, 1000)
        _whole("seed", self.seed, 0, 2**63 - 1)
        _whole("max-levels", self.max_levels, 2, 60_000)
        _whole("resamples", self.resamples, 0, 100_000)
        _whole("records", self.records, 0, 100)
        candidates(self.smoothing)
        parse_bins(self.bins)
        if len(set(self.structures)) < len(self.structures):
            raise SettingError(f"--structures names one structure twice ({quoted(self.structures)}); name each once")
        for name in self.structures:
            learner(name)
        structures = self.structures or DEFAULT_STRUCTURES
        if self.baseline not in structures:
            raise SettingError(
                f"--baseline {self.baseline} is not among the structures; add it to --structures, or choose one of "
                f"{quoted(structures)} with --baseline"
            )
        if self.group and self.fold_column:
            raise SettingError("--group and --fold-column both decide the folds; give one of them")
        if self.fold_column and self.repeats > 1:
            raise SettingError(
                f"--repeats {self.repeats} cannot be used with --fold-column, whose folds are given; leave it at 1"
            )
        self._check_weight()
        for option, pairs in (("require", self.require), ("forbid", self.forbid)):
            for pair in pairs:
                if not all(pair.partition(":")):
                    raise SettingError(f"--{option}: {pair!r} is not a pair of attributes; write PARENT:CHILD")

    def _check_weight(self) -> None:
        """Refuse a column of weights that is to be something else too."""
        for names, other in (
            ((self.target,), "the class"),
            ((self.group, self.fold_column), "the group or fold column"),
            (self.numeric, "numeric"),
            (self.categorical, "categorical"),
            (self.ignore, "ignore"),
            (self.keep, "keep"),
        ):
            if self.weight and self.weight in names:
                raise SettingError(
                    f"column {self.weight!r} is given as the weight and also as {other}; it can be only one of them"
                )

    def for_table(self, rows: int, attributes: int) -> tuple["Recipe", list[str]]:
        """Settle which structures are compared unless they are named; say what a large table leaves out.

        Raises:
            SettingError: the baseline is left out.
        """
        if self.structures:
            return self, []
        if rows <= MOST_ROWS and attributes <= MOST_ATTRIBUTES:
            return replace(self, structures=DEFAULT_STRUCTURES), []
        fewer = tuple(name for name in DEFAULT_STRUCTURES if name != _ON_REQUEST)
        note = (
            f"{_ON_REQUEST} is not compared on tables of more than {MOST_ROWS:,} rows or {MOST_ATTRIBUTES} attributes "
            f"unless it is named: --structures {','.join(DEFAULT_STRUCTURES)}"
        )
        return replace(self, structures=fewer), [note]

    def code(self, source: Source, jobs: int = 1, store: Store = MEMORY, only_counts: bool = False) -> Coded:
        """Code a table as these settings say; ``keep`` = all keeps every column that could be left out.

        What has a value per row is kept in ``store``. ``only_counts``: refuse weights that are no whole numbers.

        Raises:
            DataError, SettingError: the table or a setting cannot be used.
        """
        extra = [name for name in (self.group, self.fold_column) if name]
        weights = read_weights(source, self.weight, store) if self.weight else None
        if weights is not None:
            if only_counts and not weights.counts:
                raise DataError(
                    f"the weight column {self.weight!r} of {source.name} holds numbers that are not whole, but only "
                    "records can be counted here; give a column of counts, or bnx learn, which takes any weights"
                )
            attributes = len(source.columns) - len({self.target, self.weight, *self.ignore, *extra})
            source = records_of(source, weights, attributes, store) if weights.counts else source
        keep: Sequence[str] = self.keep
        if self.keep == ("all",) and "all" not in source.columns:
            keep = [name for name in source.columns if name not in {self.target, self.weight, *self.ignore, *extra}]
        return code_table(
            source,
            self.target,
            numeric=self.numeric,
            categorical=self.categorical,
            ignore=self.ignore,
            keep=keep,
            missing=next(one for one in MISSING if one == self.missing),
            max_levels=self.max_levels,
            extra=extra,
            jobs=jobs,
            store=store,
            weights=weights,
        )

    def to_dict(self) -> dict[str, Any]:
        """Give the settings by name, ready for JSON."""
        return {key: list(value) if isinstance(value, tuple) else value for key, value in asdict(self).items()}


def _one_of(option: str, value: str, allowed: tuple[str, ...]) -> None:
    if value not in allowed:
        raise SettingError(f"--{option}: {value!r} cannot be used; give one of {', '.join(allowed)}")


def _between(option: str, value: float, low: float, high: float) -> None:
    if not low < value < high:
        raise SettingError(f"--{option}: {value:g} cannot be used; give a number above {low:g} and below {high:g}")


def _whole(option: str, value: int, low: int, high: int) -> None:
    if not low <= value <= high:
        raise SettingError(f"--{option}: {value} cannot be used; give a whole number from {low} to {high}")
