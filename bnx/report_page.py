"""The page as one file: templates, styles and scripts joined, and a policy that lets nothing else run or load."""

from collections.abc import Iterable

import jinja2
from markupsafe import Markup

from bnx.palette import PALETTES
from bnx.report_data import digest

__all__ = ["SCRIPTS", "STYLES", "page_html"]

STYLES = (
    *("base", "controls", "answer", "structures", "scores", "pairs", "triangle", "pair_panel", "attributes"),
    "records",
    "print",
)
"""Style sheets in the order in which they are joined."""
SCRIPTS = (
    *("page", "theme", "box_edges", "words", "edges", "late_edges", "fold_dots", "pair_tables", "pair_panel", "links"),
    *("drawing", "sifting", "compare", "structures", "metrics", "pair_data", "ledger_rows", "ledger_choice", "ledger"),
    *("triangle", "start"),
)
"""Scripts in the order in which they are joined."""

_UNPRINTABLE = {code: "\ufffd" for code in (*range(32), *range(127, 160)) if chr(code) not in "\t\n\r"}


def page_html(report: object, pictures_styles: Iterable[str], blocks: Iterable[Markup]) -> str:
    """Render the page.

    report: what the templates show; pictures_styles: style rules of the drawings; blocks: data for the scripts.
    Control characters become a sign that can be seen.
    """
    loader = jinja2.PackageLoader("bnx", "templates")
    engine = jinja2.Environment(
        loader=loader,
        autoescape=True,
        undefined=jinja2.StrictUndefined,
        trim_blocks=True,
        lstrip_blocks=True,
    )
    sheets = (engine.get_template(f"styles/{name}.css.j2").render(palettes=PALETTES) for name in STYLES)
    style = "".join([*sheets, *pictures_styles])
    scripts = (loader.get_source(engine, f"scripts/{name}.js")[0] for name in SCRIPTS)
    script = "\n".join(["(() => {", '"use strict";', *scripts, "})();"])
    html = engine.get_template("report.html.j2").render(
        report=report,
        style=Markup(style),
        style_digest=digest(style),
        script=Markup(script),
        script_digest=digest(script),
        blocks=tuple(blocks),
    )
    return html.translate(_UNPRINTABLE)
