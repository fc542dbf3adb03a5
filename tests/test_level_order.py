"""Ordered levels: how an order is written, what scores it gives, and that trends are tested with them."""

import numpy as np
import pandas as pd
import pytest
from probed import probed
from scipy.stats import chi2

from bnx.domains import Domain
from bnx.errors import DataError, SettingError
from bnx.level_order import level_scores, parse_ordered
from bnx.ordered import generalised_cmh

SIZES = ("small", "medium", "large")


def test_an_order_is_a_name_alone_or_levels_from_low_to_high() -> None:
    columns = ("size", "count", "a=b", "x<y")
    assert parse_ordered([], columns) == {}
    assert parse_ordered(["count", "size=small < medium<large"], columns) == {"count": (), "size": SIZES}
    assert parse_ordered(["a=b"], columns) == {"a=b": ()}
    assert parse_ordered(["size=on=1<off=2"], columns) == {"size": ("on=1", "off=2")}


@pytest.mark.parametrize(
    ("values", "message"),
    [
        (["size", "size=small<large"], "--ordered names 'size' twice; name it once"),
        (["size=small"], "--ordered size=small: 'small' is no order of levels; write size=low<middle<high"),
        (["size="], "--ordered size=: '' is no order of levels; write size=low<middle<high"),
        (["size=a<<b"], "--ordered size=a<<b: 'a<<b' is no order of levels; write size=low<middle<high"),
        (["size=a<b<a"], "--ordered size=a<b<a: 'a<b<a' is no order of levels; write size=low<middle<high"),
    ],
)
def test_what_is_no_order(values: list[str], message: str) -> None:
    with pytest.raises(SettingError) as refused:
        parse_ordered(values, ("size",))
    assert str(refused.value) == message


def test_scores_follow_the_order_given_and_not_that_of_the_levels() -> None:
    domain = Domain("size", ("large", "medium", "small"))
    assert level_scores(domain, {}) is None
    assert level_scores(domain, {"other": SIZES}) is None
    assert np.array_equal(level_scores(domain, {"size": SIZES}), [3.0, 2.0, 1.0])


def test_numbers_are_ordered_by_value() -> None:
    assert np.array_equal(level_scores(Domain("n", ("-1", "10", "2.5", "9")), {"n": ()}), [1.0, 4.0, 2.0, 3.0])
    twice = Domain("n", ("10", "1", "1.0", "2"))
    assert np.array_equal(level_scores(twice, {"n": ()}), [3.0, 1.0, 1.0, 2.0]), "one number, one place"


def test_nan_is_no_number_that_has_a_place() -> None:
    with pytest.raises(DataError, match="are no numbers"):
        level_scores(Domain("n", ("3", "nan", "1", "2")), {"n": ()})


def test_intervals_are_ordered_by_themselves_and_blanks_and_pooled_levels_have_no_place() -> None:
    cut = Domain("n", ("<= 1", "1 to 2", "> 2", "(blank)"), numeric=True, cuts=(1.0, 2.0), blank=True)
    assert np.array_equal(level_scores(cut, {}), [1.0, 2.0, 3.0, np.nan], equal_nan=True)
    pooled = Domain("size", ("medium", "small", "(rare)", "(blank)"), pooled=True, blank=True)
    expected = [2.0, 1.0, np.nan, np.nan]
    assert np.array_equal(level_scores(pooled, {"size": ("small", "medium")}), expected, equal_nan=True)


@pytest.mark.parametrize(
    ("order", "message"),
    [
        (("small", "medium"), "--ordered size: the order leaves out large; give every level its place"),
        (("small", "medum", "large"), "--ordered size: 'medum' is not a level of it; did you mean medium?"),
        (
            (),
            "--ordered size: its levels (large, medium, small) are no numbers; give their order, from low to high, as "
            "in --ordered 'size=LOWEST<...<HIGHEST', with quotation marks",
        ),
    ],
)
def test_orders_that_do_not_fit_the_levels(order: tuple[str, ...], message: str) -> None:
    with pytest.raises(DataError) as refused:
        level_scores(Domain("size", ("large", "medium", "small")), {"size": order})
    assert str(refused.value) == message


def table(rows: int = 800, seed: int = 4) -> pd.DataFrame:
    """Draw records whose dose rises a little with their size, some sizes blank, and a class of three."""
    random = np.random.default_rng(seed)
    size = random.integers(0, 3, rows)
    dose = np.clip(np.round(size + random.normal(0, 3, rows)), 0, 11).astype(int)
    names = np.where(random.random(rows) < 0.1, "", np.array(SIZES)[size])
    columns = {
        "size": names,
        "dose": dose.astype(str),
        "way": random.choice(["by sea", "by road"], rows),
        "kind": random.choice(["good", "fair", "bad"], rows),
    }
    return pd.DataFrame(columns)


def linear_by_linear(u: pd.Series, v: pd.Series, by: pd.Series) -> tuple[float, float]:
    """Compute the statistic of Mantel 1963 from records: squared sum of covariances over the sum of their variances."""
    together = variance = across = along = 0.0
    for _, rows in u.groupby(by):
        x, y = rows.to_numpy(float), v[rows.index].to_numpy(float)
        x, y = x - x.mean(), y - y.mean()
        together += x @ y
        variance += (x @ x) * (y @ y) / (len(x) - 1)
        across, along = across + x @ x, along + y @ y
    return together**2 / variance, together / np.sqrt(across * along)


@pytest.mark.parametrize("turned", [False, True])
def test_the_trend_of_words_and_numbers_equals_its_definition_on_the_records(turned: bool) -> None:
    frame = table()
    order = SIZES[::-1] if turned else SIZES
    tests = probed(frame, "kind", ("size", "dose"), ordered={"size": order, "dose": ()})
    trend = tests.details["size", "dose"].trend
    kept = frame[frame["size"] != ""]
    ranks = {str(number): rank for rank, number in enumerate(sorted({int(dose) for dose in frame["dose"]}))}
    statistic, correlation = linear_by_linear(kept["size"].map(order.index), kept["dose"].map(ranks), kept["kind"])
    assert trend is not None
    assert (trend.kind, trend.df) == ("linear", 1)
    assert trend.statistic == pytest.approx(statistic, rel=1e-9)
    assert trend.correlation == pytest.approx(correlation, rel=1e-9)
    assert (trend.correlation < 0) == turned
    assert trend.p == pytest.approx(chi2.sf(statistic, 1), rel=1e-9)


def test_pooled_levels_take_no_part_in_a_trend() -> None:
    frame = table()
    tests = probed(frame, "kind", ("size", "dose"), ordered={"size": SIZES, "dose": ()}, max_levels=6)
    most = frame["dose"].value_counts().index
    domain = tests.details["size", "dose"].pair.b
    assert domain.pooled
    kept = frame[(frame["size"] != "") & frame["dose"].isin(domain.levels)]
    assert set(domain.levels[:-1]) <= set(most)
    ranks = {number: rank for rank, number in enumerate(sorted(set(kept["dose"]), key=int))}
    statistic, _ = linear_by_linear(kept["size"].map(SIZES.index), kept["dose"].map(ranks), kept["kind"])
    trend = tests.details["size", "dose"].trend
    assert trend is not None
    assert trend.statistic == pytest.approx(statistic, rel=1e-9)


def test_one_order_asks_for_mean_scores_and_none_for_general_association() -> None:
    frame = table()
    plain = probed(frame, "kind", ("size", "way")).details["size", "way"].trend
    one = probed(frame, "kind", ("size", "way"), ordered={"size": SIZES}).details["size", "way"].trend
    assert plain is not None
    tables = [pd.crosstab(rows["size"], rows["way"]) for _, rows in frame.groupby("kind")]
    assert plain.statistic == pytest.approx(generalised_cmh(np.array(tables)).statistic, rel=1e-9)
    assert (plain.kind, plain.df) == ("general", 3), "blank is a level of the table, but has no place in an order"
    assert one is not None
    assert (one.kind, one.df) == ("mean scores", 1)
    assert np.isnan(one.correlation)
    kept = frame[frame["size"] != ""]
    statistic, _ = linear_by_linear(kept["size"].map(SIZES.index), (kept["way"] == "by sea").astype(int), kept["kind"])
    assert one.statistic == pytest.approx(statistic, rel=1e-9), "with two ways the mean scores are a trend"


def test_numeric_columns_need_no_order_to_show_a_trend() -> None:
    random = np.random.default_rng(8)
    first = random.normal(0, 1, 600)
    columns = {
        "first": first.round(3),
        "second": (-first + random.normal(0, 1, 600)).round(3),
        "kind": random.choice(["k", "m"], 600),
    }
    trend = probed(pd.DataFrame(columns), "kind", ("first", "second")).details["first", "second"].trend
    assert trend is not None
    assert trend.kind == "linear"
    assert trend.correlation < -0.5


def test_an_order_changes_nothing_but_the_trend() -> None:
    frame = table()
    plain = probed(frame, "kind", ("size", "dose"))
    told = probed(frame, "kind", ("size", "dose"), ordered={"size": SIZES, "dose": ()})
    assert [one.to_dict() for one in told.results] == [one.to_dict() for one in plain.results]


def test_a_weak_trend_is_seen_where_the_whole_table_shows_nothing() -> None:
    """Of twelve doses by three sizes the trend is one of 22 or more degrees of freedom: that is where its power is."""
    frame = table(rows=250, seed=1)
    tests = probed(frame, "kind", ("size", "dose"), ordered={"size": SIZES, "dose": ()})
    trend = tests.details["size", "dose"].trend
    assert trend is not None
    assert trend.p < 0.01 < tests.results[0].p_value
