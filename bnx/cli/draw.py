"""bnx draw: one structure as a picture."""

import math
from pathlib import Path
from typing import Annotated, cast

import typer

from bnx.cli.shared import Overwrite, StructureFile, Theme, colours, opened, say
from bnx.documents import picture_of
from bnx.drawing import Form, render
from bnx.errors import SettingError
from bnx.files import check_free, write_bytes
from bnx.formats.dot import dot_source

__all__ = ["run"]


def run(
    structure: StructureFile,
    output: Annotated[str, typer.Option("-o", "--output", metavar="FILE", help="Picture: .svg, .png, .pdf or .dot.")],
    theme: Theme = None,
    least_bits: Annotated[
        float, typer.Option(metavar="BITS", help="Leave out edges below so many bits given the class.")
    ] = 0.0,
    everything: Annotated[bool, typer.Option("--everything", help="Draw all edges, however many.")] = False,
    overwrite: Overwrite = False,
) -> None:
    """Draw a structure as SVG, PNG, PDF or DOT."""
    form = Path(output).suffix.lower().removeprefix(".")
    if form not in ("svg", "png", "pdf", "dot"):
        raise SettingError(f"-o {output}: the ending says nothing that can be drawn; use .svg, .png, .pdf or .dot")
    if not (math.isfinite(least_bits) and least_bits >= 0):
        raise SettingError(f"--least-bits: {least_bits:g} cannot be used; give 0 or a number above")
    shades = colours(theme, f".{form}")
    check_free(output, overwrite)
    document, _ = opened(structure)
    dot = dot_source(picture_of(document), shades, least_bits, everything)
    write_bytes(output, dot.encode() if form == "dot" else render(dot, cast(Form, form)), overwrite)
    say(f"{output} written")
