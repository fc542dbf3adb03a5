"""What the page says about wide and tall tables, and what is required of them."""

from setting import Claim, number
from timing import Figures

__all__ = ["tall_claims", "tall_page", "wide_claims", "wide_page"]

GB = 1e9


def wide_page(figures: Figures) -> list[str]:
    """Write the section on wide tables."""
    titles = {
        "vocabulary": "words of a vocabulary, drawn",
        "bitmap": "pictures of digits, 20 x 20",
        "digits": "pictures of digits, 28 x 28",
    }
    found = {titles[step]: one for step, one in figures.items()}
    if not found:
        return []
    return [
        "## Wide tables",
        "",
        *_runs(found),
        "",
        "One run each, two threads, every attribute binary. Words (`tests/speed/make_wide.py`): topics and copied "
        "words make them dependent within a class. Pictures of 20 x 20: scikit-learn's digits of 8 x 8, enlarged by "
        "lines between pixels and cut at half; of 28 x 28: `mnist5k_binary`.",
        "",
        *_all_stages(found),
    ]


def tall_page(figures: Figures) -> list[str]:
    """Write the section on tall tables."""
    found = {f"{one['rows']:,} rows": one for one in figures.values()}
    if not found:
        return []
    sizes = "; ".join(
        f"{name}: {one['file_bytes'] / GB:.2f} GB of Parquet, {one['code_bytes'] / GB:.2f} GB of codes"
        for name, one in found.items()
    )
    return [
        "## Tall tables",
        "",
        *_runs(found),
        "",
        f"One run each, two threads, codes kept in a file (`--spill`). {sizes}. Anonymous memory belongs to no file: "
        "what the system cannot drop and read again. It is looked at a hundred times a second. The command takes some "
        "seconds however few the rows are (imports, choices on samples, drawings), which hides growth: it is asked of "
        "the rest.",
        "",
        *_all_stages(found),
    ]


def wide_claims(figures: Figures) -> list[Claim]:
    """List the requirements on 20,000 x 10,000; these limits are absolute, and meant for two processors."""
    if "vocabulary" not in figures:
        return _picture_claims(figures)
    one = figures["vocabulary"]
    size = f"{one['rows']:,} rows x {one['attributes']:,} binary attributes"
    return [
        Claim(f"{size}, three structures", one["seconds"], 180, False, "s"),
        Claim(f"{size}, all resident memory", one["resident"] / GB, 4, False, "GB"),
        *_picture_claims(figures),
    ]


def _picture_claims(figures: Figures) -> list[Claim]:
    """Require that all seven structures of pictures are learnt in minutes."""
    found = [figures[step] for step in ("bitmap", "digits") if step in figures]
    return [
        Claim(f"{one['rows']:,} rows x {one['attributes']} pixels, default", one["seconds"] / 60, 30, False, "minutes")
        for one in found
    ]


def tall_claims(figures: Figures) -> list[Claim]:
    """List the requirements on 100 million rows."""
    found = []
    if "whole" in figures:
        one = figures["whole"]
        text = f"{one['rows']:,} rows x {one['attributes']} attributes, anonymous memory"
        found.append(Claim(text, one["anonymous"] / GB, 3, False, "GB"))
    if {"few", "tenth", "whole"} <= set(figures):
        few, tenth, whole = (figures[step]["seconds"] for step in ("few", "tenth", "whole"))
        ratio = (whole - few) / (tenth - few)
        text = f"time for ten times the rows, after what {figures['few']['rows']:,} rows take"
        found += [Claim(text, ratio, 8, True), Claim(text, ratio, 12, False)]
    return found


def _runs(found: dict[str, Figures]) -> list[str]:
    """Lay out runs of the command."""
    rows = [
        f"| {name} | {one['rows']:,} | {one['attributes']:,} | `bnx learn{_space(one)}` | {number(one['seconds'])} | "
        f"{number(one['processor'])} | {one['anonymous'] / GB:.2f} | {one['resident'] / GB:.2f} |"
        for name, one in found.items()
    ]
    heading = (
        "| table | rows | attributes | command | seconds | processor seconds | anonymous GB, at most "
        "| all resident GB, at most |"
    )
    return [heading, "|---|---|---|---|---|---|---|---|", *rows]


def _space(one: Figures) -> str:
    return f" {one['options']}" if one["options"] else ""


def _all_stages(found: dict[str, Figures]) -> list[str]:
    """Lay out seconds of every stage, a column a run."""
    stages = {name: {stage: wall for stage, wall, _ in one["stages"]} for name, one in found.items()}
    order = list(dict.fromkeys(stage for one in stages.values() for stage in one if stage != "all"))
    rows = [
        f"| {stage} | {' | '.join(f'{one[stage]:.1f}' if stage in one else '' for one in stages.values())} |"
        for stage in [*order, "all"]
    ]
    return [f"| seconds of the stage | {' | '.join(stages)} |", "|---|" + "---|" * len(stages), *rows, ""]
