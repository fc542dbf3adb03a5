"""bnx draw: one structure as a picture."""

import math
from dataclasses import replace
from pathlib import Path
from typing import Annotated, cast

import typer

from bnx.cli.shared import Overwrite, StructureFile, Theme, colours, opened, opened_mix, say
from bnx.documents import picture_of
from bnx.drawing import Form, render
from bnx.errors import SettingError
from bnx.files import check_free, write_bytes
from bnx.formats.dot import dot_source
from bnx.picture import Picture

__all__ = ["run"]


def run(
    structure: StructureFile,
    output: Annotated[str, typer.Option("-o", "--output", metavar="FILE", help="Picture: .svg, .png, .pdf or .dot.")],
    theme: Theme = None,
    least_bits: Annotated[
        float, typer.Option(metavar="BITS", help="Leave out edges below so many bits given the class.")
    ] = 0.0,
    least_gain: Annotated[
        float | None,
        typer.Option(
            metavar="BITS",
            help="Leave out edges whose held-out gain is less, or was never judged; may be below 0.",
        ),
    ] = None,
    everything: Annotated[bool, typer.Option("--everything", help="Draw all edges, however many.")] = False,
    overwrite: Overwrite = False,
) -> None:
    """Draw a structure as SVG, PNG, PDF or DOT; of a mix every member, into a file of its own."""
    form = Path(output).suffix.lower().removeprefix(".")
    if form not in ("svg", "png", "pdf", "dot"):
        raise SettingError(f"-o {output}: the ending says nothing that can be drawn; use .svg, .png, .pdf or .dot")
    if not (math.isfinite(least_bits) and least_bits >= 0):
        raise SettingError(f"--least-bits: {least_bits:g} cannot be used; give 0 or a number above")
    if least_gain is not None and not math.isfinite(least_gain):
        raise SettingError(f"--least-gain: {least_gain:g} cannot be used; give a number, which may be below 0")
    shades = colours(theme, f".{form}")
    pictures = _pictures(structure, Path(output))
    for place, _ in pictures:
        check_free(place, overwrite)
    for place, picture in pictures:
        dot = dot_source(picture, shades, least_bits, everything, least_gain)
        write_bytes(place, dot.encode() if form == "dot" else render(dot, cast(Form, form)), overwrite)
        say(f"{place} written")


def _pictures(structure: str, output: Path) -> list[tuple[str, Picture]]:
    """List what is drawn into which file: a structure, or the members of a mix with their weights."""
    mix = opened_mix(structure)
    if mix is None:
        return [(str(output), picture_of(opened(structure)[0]))]
    found = []
    for one in mix[0]["members"]:
        picture = picture_of(one["structure"])
        subtitle = ", ".join(part for part in (picture.subtitle, f"weight {one['weight']:.2f} of a mix") if part)
        place = output.with_name(f"{output.stem}-{one['name']}{output.suffix}")
        found.append((str(place), replace(picture, subtitle=subtitle)))
    return found
