"""What a run says of numeric columns in which the class finds no cut point."""

from bnx.coarsening import coarsen
from bnx.cut_trials import FILLED
from bnx.discretising import parse_bins
from bnx.domains import Schema
from bnx.engines import LocalEngine
from bnx.evaluation import Evaluation
from bnx.text import quoted

__all__ = ["cut_notes"]


def cut_notes(evaluation: Evaluation, schema: Schema, bins: str) -> list[str]:
    """Name the numeric columns without an MDL cut point in all rows, and say what became of them."""
    if bins != "auto" and not parse_bins(bins)[0].startswith("mdl"):
        return []
    names = _uncut(evaluation.engine, schema)
    if not names:
        return []
    has = "has" if len(names) == 1 else "have"
    return [f"{quoted(names)} {has} no MDL cut point{_fate(evaluation.choices[()].trial.bins, bins, len(names) == 1)}"]


def _fate(chosen: str, bins: str, one: bool) -> str:
    """Say what becomes of columns without a cut point where ``bins`` is asked for and ``chosen`` is taken."""
    it, kept = ("it", "it is kept") if one else ("them", "they are kept")
    silent = f"{'all its numbers' if one else 'the numbers of each'} are one level and say nothing"
    would = f"--bins {FILLED} would cut {it}"
    _, k = parse_bins(FILLED if chosen == "mdl" else chosen)
    equal = f"{k} bins of equal frequency"
    if bins == "mdl":
        return f", so {silent}; {would}"
    if bins != "auto":
        return f"; {kept} in {equal}"
    if chosen == "mdl":
        return f" and {equal} did not clearly lower the held-out loss, so {silent}; {would}"
    if chosen == FILLED:
        return f"; {kept} in {equal}, which lowered the held-out loss"
    return f"; every numeric column is cut into {equal}, which lowered the held-out loss"


def _uncut(engine: LocalEngine, schema: Schema) -> list[str]:
    """Name the columns of several values that MDL leaves without a cut in all rows."""
    numeric = [(i, domain) for i, domain in enumerate(schema.attributes) if domain.numeric and domain.cuts]
    return [
        domain.name
        for i, domain in numeric
        if not coarsen(domain, engine.margins[i].sum(axis=0).T, "mdl", len(domain)).domain.cuts
    ]
