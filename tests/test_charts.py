"""Where the marks of the charts stand, and pictures made fit for a page."""

import copy
from html.parser import HTMLParser

import pytest
from smallrun import small_run

from bnx.embedding import embed
from bnx.metric_charts import metric_charts
from bnx.ticks import round_ticks


@pytest.mark.parametrize("key", ["log_loss", "brier", "accuracy", "balanced_accuracy", "auc", "calibration_error"])
def test_folds_are_paired_with_the_same_fold_of_the_baseline_in_every_score(key: str) -> None:
    document = small_run().comparison
    chart = next(one for one in metric_charts(document) if one.metric.key == key)
    naive, tan = document["structures"][:2]
    row = next(row for row in chart.rows if row.name == "tan")
    both = [(mine[key], base[key]) for mine, base in zip(tan["by_fold"], naive["by_fold"], strict=True)]
    assert [told for _, told in row.points] == [
        f"fold {fold + 1}: tan {own:.3f}, naive {base:.3f}: {own - base:+.3f}" for fold, (own, base) in enumerate(both)
    ]
    far, (own, base) = max(enumerate(both), key=lambda one: abs(one[1][0] - one[1][1]))
    scale = (row.points[far][0] - chart.zero) / (own - base)
    for (x, _), (own, base) in zip(row.points, both, strict=True):
        assert x == pytest.approx(chart.zero + scale * (own - base), abs=0.8)
        assert 0 <= x <= chart.width
    against = tan["against_baseline"]["by_metric"][key]
    low, high = against["interval"]
    assert row.told == f"{against['difference']:+.3f} [{low:+.3f}, {high:+.3f}]"
    for x, value in ((row.low, low), (row.mean, against["difference"]), (row.high, high)):
        assert x == pytest.approx(chart.zero + scale * value, abs=1.5)
    assert chart.metric.lower_is_better == (key in {"log_loss", "brier", "calibration_error"})
    assert chart.region == ("" if against["region"] is None else f"{against['region']:.2g}")


def test_verdicts_of_differences_know_which_side_is_better() -> None:
    document = copy.deepcopy(small_run().comparison)
    tan = document["structures"][1]["against_baseline"]["by_metric"]
    tan["log_loss"] |= {"interval": [-0.2, -0.1], "region": 0.01}
    tan["accuracy"] |= {"interval": [-0.2, -0.1], "region": 0.01}
    tan["brier"] |= {"interval": [-0.2, 0.1], "region": None}
    tan["balanced_accuracy"] |= {"interval": [-0.008, 0.009], "region": 0.01}
    tan["auc"] |= {"difference": None, "interval": None}
    rows = {one.metric.key: next(row for row in one.rows if row.name == "tan") for one in metric_charts(document)}
    assert rows["log_loss"].verdict == "better"
    assert rows["accuracy"].verdict == "worse"
    assert rows["brier"].verdict == "can be chance"
    assert rows["balanced_accuracy"].verdict == "too little to matter"
    assert (rows["auc"].verdict, rows["auc"].told, rows["auc"].mean) == ("", "no figure in some fold", None)


def test_folds_without_a_figure_are_counted_and_one_structure_has_no_charts() -> None:
    document = copy.deepcopy(small_run().comparison)
    document["structures"][1]["by_fold"][0]["auc"] = None
    chart = next(one for one in metric_charts(document) if one.metric.key == "auc")
    assert chart.left_out == 1
    for fold in document["structures"][0]["by_fold"]:
        fold["auc"] = None
    assert next(one for one in metric_charts(document) if one.metric.key == "auc").rows == ()
    document |= {"structures": document["structures"][:1], "mix": None}
    assert metric_charts(document) == ()


@pytest.mark.parametrize(
    ("low", "high", "expected"),
    [(0, 0.1, [0, 0.02, 0.04, 0.06, 0.08, 0.1]), (-0.09, 0.01, [-0.08, -0.06, -0.04, -0.02, 0]), (0, 7, [0, 2, 4, 6])],
)
def test_ticks_are_round(low: float, high: float, expected: list[float]) -> None:
    assert round_ticks(low, high) == pytest.approx(expected)


class Elements(HTMLParser):
    """Lists elements with their attributes, as a page's parser would see them."""

    def __init__(self, markup: str) -> None:
        super().__init__()
        self.found: list[tuple[str, dict[str, str]]] = []
        self.feed(markup)

    def handle_starttag(self, tag: str, attrs: list[tuple[str, str | None]]) -> None:
        self.found.append((tag, {key: value or "" for key, value in attrs}))


def test_an_embedded_picture_keeps_nothing_that_could_run_or_load() -> None:
    svg = (
        '<svg xmlns="http://www.w3.org/2000/svg" xmlns:xlink="http://www.w3.org/1999/xlink" width="200pt" height="9pt" '
        'viewBox="0 0 200 100" onload="x()"><style>.a{fill:red}</style><style>b&lt;/style&gt;</style>'
        '<script>x()</script><defs><path id="p"/></defs>'
        '<g id="g" clip-path="url(#p)" aria-labelledby="p g"><use xlink:href="#p"/>'
        '<a href="https://example.invalid/"><text onclick="x()" style="fill:url(#p)">5 &lt; 6</text></a></g></svg>'
    )
    one = embed(svg, "k2")
    assert one.styles == (".a{fill:red}",)
    found = Elements(one.markup).found
    assert [tag for tag, _ in found] == ["svg", "defs", "path", "g", "use", "a", "text"]
    assert found[0][1] == {"viewbox": "0 0 200 100", "width": "230"}
    assert found[3][1] == {"id": "k2-g", "clip-path": "url(#k2-p)", "aria-labelledby": "k2-p k2-g"}
    assert found[4][1] == {"href": "#k2-p"}
    assert found[5][1] == found[6][1] == {}
    assert "5 &lt; 6" in one.markup
