"""Blank cells as cells not observed: available cases in every table, exact sums out of fold, against oracles."""

from functools import cache
from itertools import product
from pathlib import Path

import numpy as np
import pandas as pd
import pytest
from builders import compared, folds_of, predicted, recipe_of, silent
from scipy.stats import chi2_contingency
from sklearn.naive_bayes import CategoricalNB

from bnx.comparison import Comparison
from bnx.documents import structure_document
from bnx.encoding import encode
from bnx.formats.structure_json import classifier_of
from bnx.pair_table import Asked
from bnx.pair_tests import PairTests, run_pair_tests
from bnx.reading import open_source
from bnx.storing import MEMORY

NAMES = ("a", "b", "c", "d", "e")
SIZES = (2, 3, 2, 3, 2)


def with_blanks(share: float = 0.15, rows: int = 240, seed: int = 5) -> pd.DataFrame:
    """Draw texts that depend on each other and on the class, then empty some cells and all of two rows."""
    random = np.random.default_rng(seed)
    target = random.integers(0, 3, rows)
    codes = [(target + random.integers(0, 2, rows)) % 2]
    for size in SIZES[1:]:
        codes.append((codes[-1] + target * random.integers(0, 2, rows) + random.integers(0, 2, rows)) % size)
    frame = pd.DataFrame({name: [f"v{code}" for code in column] for name, column in zip(NAMES, codes, strict=True)})
    frame = frame.mask(random.random(frame.shape) < share)
    frame.iloc[[3, 77]] = None if share else frame.iloc[[3, 77]]
    return frame.assign(kind=[f"k{code}" for code in target])


@cache
def found() -> tuple[pd.DataFrame, Comparison]:
    frame = with_blanks()
    structures = ("naive", "tan", "kdb2")
    settings = {"smoothing": "laplace:1", "temperature": False, "missing": "sum-out", "folds": 5}
    return frame, compared(frame, "kind", structures=structures, **settings)


def tables(train: pd.DataFrame, parents: tuple[tuple[int, ...], ...]) -> list[np.ndarray]:
    """Estimate (N + 1) / (N of the context + levels) from the rows in which the whole family is there."""
    out = []
    for child, own in enumerate(parents):
        members = [NAMES[one] for one in (*own, child)]
        whole = train.dropna(subset=members)
        counts = np.ones((3, *(SIZES[one] for one in (*own, child))))
        for row in whole.itertuples():
            counts[(int(row.kind[1]), *(int(getattr(row, name)[1]) for name in members))] += 1
        out.append(counts / counts.sum(axis=-1, keepdims=True))
    return out


def posterior(record: pd.Series, prior: np.ndarray, own: list[np.ndarray], parents: object) -> np.ndarray:
    """Add up P(class, record) over every way to fill the blanks in."""
    known = [None if pd.isna(record[name]) else int(record[name][1]) for name in NAMES]
    p = np.zeros(3)
    for levels in product(*([own] if own is not None else range(k) for own, k in zip(known, SIZES, strict=True))):
        weight = prior.copy()
        for child, above in enumerate(parents):  # type: ignore[call-overload]
            weight *= own[child][(slice(None), *(levels[one] for one in (*above, child)))]
        p += weight
    return p / p.sum()


@pytest.mark.parametrize("s", range(3))
def test_out_of_fold_predictions_equal_enumeration_over_available_cases(s: int) -> None:
    frame, comparison = found()
    fold, p = folds_of(comparison.evaluations[0]), predicted(comparison, s)
    for held in range(5):
        train = frame[fold != held]
        parents = comparison.evaluations[0].learned((held,)).structures[s].parents
        prior = train["kind"].value_counts(normalize=True).sort_index().to_numpy()
        own = tables(train, parents)
        for row in np.flatnonzero(fold == held):
            assert p[row] == pytest.approx(posterior(frame.iloc[row], prior, own, parents), abs=1e-12)
    assert comparison.classifiers[2].structure.edges


def test_the_final_tables_count_available_cases() -> None:
    frame, comparison = found()
    for classifier in comparison.classifiers:
        own = tables(frame, classifier.structure.parents)
        for child, expected in enumerate(own):
            assert classifier.table(child) == pytest.approx(expected, abs=1e-12)
        assert [domain.levels for domain in classifier.domains] == [tuple(f"v{k}" for k in range(n)) for n in SIZES]
        assert not any(domain.blank for domain in classifier.domains)


def test_naive_bayes_out_of_fold_equals_scikit_learn_without_the_blank_columns() -> None:
    """Blanks in one column only: records with one are scored by a model that does without this column."""
    frame = with_blanks(0.0)
    frame.loc[::4, "c"] = None
    comparison = compared(
        frame, "kind", structures=("naive",), smoothing="laplace:1", temperature=False, missing="sum-out", folds=4
    )
    fold, p = folds_of(comparison.evaluations[0]), predicted(comparison, 0)
    codes = frame.drop(columns=["kind", "c"]).map(lambda text: int(text[1])).to_numpy()
    truth = frame["kind"].str[1].astype(int).to_numpy()
    for held in range(4):
        train, rows = fold != held, np.flatnonzero((fold == held) & frame["c"].isna().to_numpy())
        rival = CategoricalNB(alpha=1, min_categories=[2, 3, 3, 2]).fit(codes[train], truth[train])
        assert p[rows] == pytest.approx(rival.predict_proba(codes[rows]), abs=1e-12)
        assert len(rows)


def test_a_record_of_blanks_gets_the_prior_of_its_training_fold_whatever_the_calibration() -> None:
    frame = with_blanks()
    comparison = compared(frame, "kind", structures=("naive", "tan"), missing="sum-out", folds=5)
    fold, p = folds_of(comparison.evaluations[0]), predicted(comparison, 1)
    for row in (3, 77):
        prior = frame[fold != fold[row]]["kind"].value_counts(normalize=True).sort_index().to_numpy()
        assert p[row] == pytest.approx(prior, abs=1e-14)
    choice = comparison.evaluations[0].choices[(int(fold[3]),)]
    assert np.abs(choice.calibrations[1].offsets).max() > 1e-4
    assert "blank cells are not observed" in " ".join(comparison.warnings)


def test_without_blanks_nothing_changes() -> None:
    frame = with_blanks(0.0)
    level, summed = (
        compared(frame, "kind", structures=("naive", "tan", "kdb2-tested"), missing=missing, folds=4)
        for missing in ("level", "sum-out")
    )
    for s in range(3):
        assert np.array_equal(predicted(level, s), predicted(summed, s))
    assert level.edges == summed.edges
    assert level.warnings == summed.warnings


def pairs_of(frame: pd.DataFrame, folder: Path, asked: Asked, **settings: object) -> PairTests:
    frame.to_csv(folder / "t.csv", index=False)
    recipe = recipe_of("kind", test="chi2", missing="sum-out", **settings)
    return run_pair_tests(open_source(str(folder / "t.csv")), recipe, asked, 1, silent, MEMORY)


def x2_of(parts: list[pd.DataFrame], a: str, b: str) -> tuple[float, int, int]:
    """Sum X2, degrees of freedom and rows over strata, by a second library."""
    total, df, rows = 0.0, 0, 0
    for part in parts:
        table = pd.crosstab(part[a], part[b])
        rows += int(table.to_numpy().sum())
        if min(table.shape) > 1:
            found = chi2_contingency(table, correction=False)
            total, df = total + found.statistic, df + found.dof
    return total, df, rows


def test_pairs_are_tested_on_the_records_in_which_both_are_there(tmp_path: Path) -> None:
    frame = with_blanks()
    tests = pairs_of(frame, tmp_path, Asked(everything=True, close=0))
    assert len(tests.results) == 10
    for result in tests.results:
        whole = frame.dropna(subset=[result.a, result.b])
        x2, df, _ = x2_of([part for _, part in whole.groupby("kind")], result.a, result.b)
        assert (result.x2, result.df) == (pytest.approx(x2, rel=1e-10), df)
        assert np.isnan(result.bits_without_blanks)


def test_so_they_are_with_more_given_looked_at_closely_and_binned(tmp_path: Path) -> None:
    frame = with_blanks()
    random = np.random.default_rng(2)
    numbers = pd.Series(random.normal(size=len(frame)).round(3) + frame["b"].fillna("v0").str[1].astype(int))
    frame["e"] = numbers.mask(random.random(len(frame)) < 0.2)
    tests = pairs_of(frame, tmp_path, Asked(("a", "e"), ("b",)), bins="width:3")
    result, detail = tests.results[0], tests.details["a", "e"]
    whole = frame.dropna(subset=["a", "b", "e"]).copy()
    low, high = frame["e"].min(), frame["e"].max()
    cuts = [float(cut) for level in detail.pair.b.levels[:-1] for cut in [level.split(" ")[-1]]]
    assert len(cuts) == 2
    assert low < cuts[0] < cuts[1] < high
    whole["e"] = np.searchsorted(cuts, whole["e"], side="left")
    x2, df, rows = x2_of([part for _, part in whole.groupby(["kind", "b"])], "a", "e")
    assert (result.x2, result.df) == (pytest.approx(x2, rel=1e-10), df)
    assert sum(stratum.rows for stratum in detail.strata) == rows == len(whole)


def test_a_structure_file_sums_blanks_out_when_it_classifies(tmp_path: Path) -> None:
    frame, comparison = found()
    document = structure_document(comparison, 2)
    assert document["settings"]["missing"] == "sum-out"
    classifier = classifier_of(document, "x.json")
    frame.to_csv(tmp_path / "t.csv", index=False)
    codes = np.concatenate([c for c, _ in encode(open_source(str(tmp_path / "t.csv")), classifier.domains)], axis=1)
    assert np.array_equal((codes < 0).T, frame[list(NAMES)].isna().to_numpy())
    parents = classifier.structure.parents
    prior, own = frame["kind"].value_counts(normalize=True).sort_index().to_numpy(), tables(frame, parents)
    p = classifier.probabilities(codes)
    for row in range(0, 240, 7):
        assert p[row] == pytest.approx(posterior(frame.iloc[row], prior, own, parents), abs=1e-12)


def test_a_level_that_a_training_fold_never_saw_is_summed_out_of_the_rows_it_predicts() -> None:
    """One row holds level v2 of a: where it is predicted, no table knows it."""
    frame = with_blanks(0.0)
    frame.loc[[10], "a"] = "v2"
    settings = {"smoothing": "laplace:1", "temperature": False, "folds": 5}
    comparison = compared(frame, "kind", structures=("naive", "tan"), **settings)
    assert "levels that a training fold does not hold were summed out in the rows it predicts: a (1 row)" in (
        comparison.warnings
    )
    fold = folds_of(comparison.evaluations[0])
    train = frame[fold != fold[10]]
    prior = train["kind"].value_counts(normalize=True).sort_index().to_numpy()
    sizes = (3, *SIZES[1:])
    for s in range(2):
        parents = comparison.evaluations[0].learned((int(fold[10]),)).structures[s].parents
        joint = np.zeros(3)
        for level in range(3):
            weight = prior.copy()
            for child, above in enumerate(parents):
                members = [NAMES[one] for one in (*above, child)]
                counts = np.ones((3, *(sizes[one] for one in (*above, child))))
                for row in train.itertuples():
                    counts[(int(row.kind[1]), *(int(getattr(row, name)[1]) for name in members))] += 1
                own = counts / counts.sum(axis=-1, keepdims=True)
                seen = [level if name == "a" else int(frame.loc[10, name][1]) for name in members]
                weight *= own[(slice(None), *seen)]
            joint += weight
        assert predicted(comparison, s)[10] == pytest.approx(joint / joint.sum(), abs=1e-12)


def test_the_gain_of_an_edge_counts_nothing_where_a_member_of_its_family_is_not_observed() -> None:
    frame, comparison = found()
    fold, p = folds_of(comparison.evaluations[0]), predicted(comparison, 2)
    edge = max(comparison.edges[2], key=lambda one: (one.chosen_in, one.bits))
    truth = frame["kind"].str[1].astype(int).to_numpy()
    gains = []
    for held in range(5):
        parents = comparison.evaluations[0].learned((held,)).structures[2].parents
        ends = [(a, b) for a, b in ((edge.parent, edge.child), (edge.child, edge.parent)) if a in parents[b]]
        train, rows, gain = frame[fold != held], np.flatnonzero(fold == held), 0.0
        if ends:
            parent, child = ends[0]
            less_parents = tuple(one for one in parents[child] if one != parent)
            fewer = (*parents[:child], less_parents, *parents[child + 1 :])
            own, less = tables(train, parents), tables(train, fewer)
            family = [NAMES[one] for one in (*parents[child], child)]
            for row in rows[frame.iloc[rows][family].notna().all(axis=1).to_numpy()]:
                record = {name: frame.iloc[row][name] for name in family}
                levels = {name: int(text[1]) for name, text in record.items()}
                index = (slice(None), *(levels[NAMES[one]] for one in (*parents[child], child)))
                index_less = (slice(None), *(levels[NAMES[one]] for one in (*fewer[child], child)))
                without = p[row] * less[child][index_less] / own[child][index]
                gain += np.log2(p[row, truth[row]] / (without / without.sum())[truth[row]])
        gains.append(gain / len(rows))
    assert edge.gain == pytest.approx(np.mean(gains), abs=1e-10)
    assert edge.chosen_in > 0
