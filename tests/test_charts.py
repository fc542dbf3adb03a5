"""Where the marks of the charts stand, and pictures made fit for a page."""

from html.parser import HTMLParser

import pytest
from smallrun import small_run

from bnx.charts import fold_chart, round_ticks
from bnx.embedding import embed


def test_folds_are_paired_with_the_same_fold_of_the_baseline() -> None:
    document = small_run().comparison
    chart = fold_chart(document)
    assert chart is not None
    naive, tan = document["structures"][:2]
    row = next(row for row in chart.rows if row.name == "tan")
    differences = [
        mine["log_loss"] - base["log_loss"] for mine, base in zip(tan["by_fold"], naive["by_fold"], strict=True)
    ]
    assert [told for _, told in row.points] == [
        f"repeat 1, fold {fold + 1}: {value:+.3f} bits" for fold, value in enumerate(differences)
    ]
    order = sorted(range(len(differences)), key=differences.__getitem__)
    assert order == sorted(range(len(differences)), key=lambda k: row.points[k][0])
    assert all(0 <= x <= chart.width for x, _ in row.points)
    assert row.low is not None
    assert row.mean is not None
    assert row.high is not None
    assert 0 <= row.low <= row.mean <= row.high <= chart.width


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
