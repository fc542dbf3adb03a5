from itertools import combinations

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from hypothesis.extra import numpy as hnp
from sklearn.datasets import load_iris

from bnx.discretising import fine_cuts, frequency_cuts, mdl_cuts, ordered_cuts, parse_bins, width_cuts
from bnx.errors import SettingError


@pytest.mark.parametrize(
    ("column", "expected"),
    [(0, [5.55, 6.15]), (1, [2.95, 3.35]), (2, [2.45, 4.75]), (3, [0.80, 1.75])],
)
def test_iris_mdl_cuts(column, expected):
    # Fayyad & Irani 1993 on all 150 rows of Fisher's iris data; cut points as printed in several later papers.
    measurements, species = load_iris(return_X_y=True)
    values, bins = np.unique(measurements[:, column], return_inverse=True)
    counts = np.zeros((len(values), 3), dtype=np.int64)
    np.add.at(counts, (bins, species), 1)
    cuts = fine_cuts(values, counts.sum(axis=1), 255)
    np.testing.assert_allclose(cuts[mdl_cuts(counts)], expected, atol=1e-12)


def entropy(classes):
    return -sum(share * np.log2(share) for share in np.unique(classes, return_counts=True)[1] / len(classes))


def mdl_by_definition(rows):
    """Fayyad & Irani 1993 from the definition over sorted (bin, class) rows; every gap between bins is tried."""
    classes = [name for _, name in rows]
    gaps = [k for k in range(1, len(rows)) if rows[k - 1][0] < rows[k][0]]
    if not gaps:
        return []
    n = len(rows)
    info = {k: (k * entropy(classes[:k]) + (n - k) * entropy(classes[k:])) / n for k in gaps}
    best = min(info.values())
    k = next(gap for gap in gaps if info[gap] <= best + 1e-12)
    kinds = [len(set(part)) for part in (classes, classes[:k], classes[k:])]
    delta = np.log2(3 ** kinds[0] - 2) - (
        kinds[0] * entropy(classes) - kinds[1] * entropy(classes[:k]) - kinds[2] * entropy(classes[k:])
    )
    if entropy(classes) - info[k] <= (np.log2(n - 1) + delta) / n + 1e-12:
        return []
    here = (rows[k - 1][0] + rows[k][0] - 1) // 2
    return [*mdl_by_definition(rows[:k]), here, *mdl_by_definition(rows[k:])]


@settings(max_examples=300, deadline=None)
@given(hnp.arrays(np.int64, st.tuples(st.integers(1, 7), st.integers(2, 3)), elements=st.integers(0, 12)))
def test_mdl_cuts_equal_the_definition(counts):
    rows = [(k, c) for k, line in enumerate(counts) for c, count in enumerate(line) for _ in range(count)]
    assert list(mdl_cuts(counts)) == mdl_by_definition(rows)


def test_mdl_cuts_do_not_change_when_classes_trade_places():
    counts = np.random.default_rng(1).integers(0, 9, (40, 3))
    counts[:15, 0] += 9
    assert len(mdl_cuts(counts)) > 0
    assert list(mdl_cuts(counts)) == list(mdl_cuts(counts[:, ::-1]))


def test_mdl_makes_no_cut_where_there_is_nothing_to_find():
    assert list(mdl_cuts(np.array([[5, 0], [3, 0]]))) == []
    assert list(mdl_cuts(np.zeros((4, 2), dtype=np.int64))) == []
    assert list(mdl_cuts(np.array([[50, 50]]))) == []


def test_mdl_cuts_the_middle_of_empty_bins():
    assert list(mdl_cuts(np.array([[50, 0], [0, 0], [0, 0], [0, 50]]))) == [1]


def groups(counts, positions):
    return [part.sum() for part in np.split(counts, np.asarray(positions, dtype=int) + 1)]


@settings(max_examples=200, deadline=None)
@given(st.lists(st.integers(0, 30), min_size=1, max_size=8), st.integers(2, 5))
def test_frequency_cuts_have_the_least_sum_of_squares(counts, k):
    counts = np.array(counts)
    found = frequency_cuts(counts, k)
    assert len(found) < k
    assert list(found) == sorted(set(found))
    assert all(groups(counts, found)) or not counts.any()
    best = min(
        sum(size**2 for size in groups(counts, cut))
        for m in range(k)
        for cut in combinations(range(len(counts) - 1), m)
    )
    assert sum(size**2 for size in groups(counts, found)) == best


def test_a_spike_stands_alone_and_the_others_stay_equal():
    counts = np.array([900, *[10] * 10])
    assert groups(counts, frequency_cuts(counts, 3)) == [900, 50, 50]


def test_fine_cuts_use_all_their_bins():
    cuts = fine_cuts(np.arange(256.0), np.full(256, 2), 255)
    assert len(cuts) == 254


def test_frequency_cuts_of_equal_bins_are_equal():
    assert list(frequency_cuts(np.ones(100, dtype=int), 5)) == [19, 39, 59, 79]


def test_width_cuts_of_an_even_grid():
    # Values 0 to 24: five equal widths end at 4.8, 9.6, 14.4, 19.2.
    cuts = np.arange(24) + 0.5
    positions = width_cuts(cuts, np.ones(25, dtype=int), 5)
    assert list(cuts[positions]) == [4.5, 9.5, 14.5, 19.5]


def test_width_cuts_stay_inside_the_training_rows():
    cuts = np.arange(9) + 0.5
    counts = np.array([0, 0, 5, 5, 5, 5, 0, 0, 0, 0])
    assert list(width_cuts(cuts, counts, 2)) == [3]
    assert list(width_cuts(cuts, np.eye(10, dtype=int)[4], 4)) == []
    assert list(width_cuts(np.array([3.0]), np.array([2, 2]), 3)) == [0]


def test_fine_cuts_are_exact_up_to_the_limit():
    values = np.array([1.0, 2.0, 4.0])
    assert list(fine_cuts(values, np.array([1, 5, 1]), 3)) == [1.5, 3.0]
    assert list(fine_cuts(values[:1], np.array([3]), 3)) == []


@settings(max_examples=100, deadline=None)
@given(st.lists(st.integers(1, 20), min_size=1, max_size=7), st.integers(1, 5))
def test_fine_cuts_fill_the_bins_as_evenly_as_promised(weights, limit):
    weights = np.array(weights)
    values = np.arange(len(weights)) * 1.0
    bins = np.searchsorted(fine_cuts(values, weights, limit), values)
    assert len(set(bins)) == min(limit, len(values))

    def needed(most):
        """Count the bins of at most ``most`` rows, or of one value, that all values need (brute force)."""
        sizes = (
            m + 1
            for m in range(len(weights))
            for cut in combinations(range(len(weights) - 1), m)
            if all(len(part) == 1 or part.sum() <= most for part in np.split(weights, np.array(cut, dtype=int) + 1))
        )
        return min(sizes)

    if len(weights) > limit:
        heaviest = max((weights[bins == k].sum() for k in set(bins) if (bins == k).sum() > 1), default=0)
        smallest = next(most for most in range(1, weights.sum() + 1) if needed(most) <= limit)
        assert heaviest <= smallest


def test_a_spike_does_not_cost_the_other_values_their_bins():
    weights = np.ones(1001, dtype=int)
    weights[1000] = 100_000
    cuts = fine_cuts(np.arange(1001.0), weights, 101)
    assert len(cuts) == 100
    assert cuts[-1] == 999.5
    assert np.diff(cuts).max() == 10
    assert np.diff(cuts).min() == 10


@given(st.sets(st.floats(-1e308, 1e308), min_size=2, max_size=30))
def test_a_cut_keeps_its_neighbours_apart(values):
    values = np.array(sorted(values)) + 0.0
    values = np.unique(values)
    with np.errstate(over="ignore"):
        values = values[np.append(True, np.diff(values) > 1e-15 * np.abs(values[:-1]))]
    cuts = fine_cuts(values, np.ones(len(values), dtype=int), 255)
    assert list(np.searchsorted(cuts, values, side="left")) == list(range(len(values)))


@pytest.mark.parametrize(
    ("text", "expected"),
    [
        ("auto", ("auto", 0)),
        ("mdl", ("mdl", 0)),
        ("frequency:5", ("frequency", 5)),
        ("width:255", ("width", 255)),
        ("mdl+frequency:5", ("mdl+frequency", 5)),
    ],
)
def test_parse_bins(text, expected):
    assert parse_bins(text) == expected


@pytest.mark.parametrize("text", ["", "MDL", "frequency", "frequency:1", "width:256", "width:-3", "mdl:4", "width:2.5"])
def test_parse_bins_refuses(text):
    with pytest.raises(SettingError) as caught:
        parse_bins(text)
    assert str(caught.value) == (
        f"--bins: {text!r} cannot be used; give auto, mdl, frequency:K, width:K or mdl+frequency:K with K from 2 to 255"
    )


@settings(deadline=None, max_examples=150)
@given(hnp.arrays(np.int64, st.integers(0, 60), elements=st.integers(1, 40)), st.integers(1, 20))
def test_sorted_rows_are_cut_like_distinct_values_with_weights(weights, limit):
    values = np.arange(len(weights)) ** 2 / 3
    cuts = ordered_cuts(np.repeat(values, weights), len(values), limit)
    assert cuts.tolist() == fine_cuts(values, weights, limit).tolist()


def joined_by_definition(values):
    """Number the groups: a value that differs from the first of its group by 2^-50 of that at most belongs to it."""
    numbers, first = [], None
    for value in values:
        if first is None or value - first > abs(first) * 2.0**-50:
            first, numbers = value, [*numbers, (numbers[-1] + 1 if numbers else 0)]
        else:
            numbers = [*numbers, numbers[-1]]
    return numbers


@settings(deadline=None, max_examples=200)
@given(
    st.lists(st.tuples(st.integers(-4, 4), st.integers(0, 20)), min_size=1, max_size=40, unique=True),
    st.integers(1, 20),
    st.data(),
)
def test_values_that_differ_by_rounding_only_share_a_bin(places, limit, data):
    values = np.unique([whole / 3 + steps * np.spacing(whole / 3) for whole, steps in places if whole])
    weights = np.array(data.draw(st.lists(st.integers(1, 5), min_size=len(values), max_size=len(values))), np.int64)
    numbers = np.array(joined_by_definition(values.tolist()), np.int64)
    groups = int(numbers[-1]) + 1 if len(values) else 0
    rows = np.repeat(values, weights)
    cuts = ordered_cuts(rows, len(values), limit)
    assert rows.tolist() == np.repeat(values, weights).tolist(), "rows are as they were"
    assert cuts.tolist() == fine_cuts(values, weights, limit).tolist()
    assert len(cuts) == max(min(groups, limit) - 1, 0)
    bins = np.searchsorted(cuts, values)
    assert all(len(set(bins[numbers == number])) == 1 for number in range(groups))


def test_cut_points_of_huge_numbers_do_not_overflow():
    values = np.array([-1.7e308, -1e300, -1e-300, 0.0, 1e-300, 1e300, 1.7e308])
    rows = np.ones(7, dtype=int)
    cuts = fine_cuts(values, rows, 255)
    assert np.isfinite(cuts).all()
    assert list(np.searchsorted(cuts, values)) == list(range(7))
    # Middles run from -1.275e308 to 1.275e308; a quarter of that range is cut near -6.4e307, 0 and 6.4e307.
    assert [float(cuts[k]) for k in width_cuts(cuts, rows, 4)][::2] == pytest.approx([-8.5e307, 8.5e307])
    assert list(fine_cuts(np.array([-1.5e308, 1.5e308]), rows[:2], 255)) == [0.0]
    assert str(fine_cuts(np.array([-1.0, 1.0]), rows[:2], 255)[0]) == "0.0"


def test_an_outlier_takes_widths_away_but_leaves_no_bin_without_rows():
    values = np.append(np.arange(100) / 100, 1e6)
    rows = np.ones(101, dtype=int)
    cuts = fine_cuts(values, rows, 255)
    assert all(groups(rows, width_cuts(cuts, rows, 5)))
    assert 1 < len(groups(rows, width_cuts(cuts, rows, 5))) <= 5
    assert groups(rows, frequency_cuts(rows, 5)) == [20, 20, 20, 20, 21]


def test_half_of_the_rows_at_one_value():
    # Only -0.5, 0 and 0.5 share the other half: bins must neither be empty nor stand twice.
    counts = np.array([10, 50, 20, 20])
    assert groups(counts, frequency_cuts(counts, 5)) == [10, 50, 20, 20]
    counts = np.append(np.full(25, 2), [50])
    assert groups(counts, frequency_cuts(counts, 5)) == [12, 12, 12, 14, 50]
