"""bnx show: a structure in the terminal."""

import json
from collections.abc import Sequence
from typing import Annotated, Any

import typer

from bnx.classifier import Classifier
from bnx.cli.shared import JsonOut, StructureFile, listed, opened, opened_mix
from bnx.errors import SettingError
from bnx.mixed_classifier import MixedClassifier
from bnx.showing import Separation, separation, structure_text, table_text

__all__ = ["run"]


def run(
    structure: StructureFile,
    attributes: Annotated[
        list[str] | None,
        typer.Argument(metavar="A B", help="Also show the tables of these attributes; with --separated two."),
    ] = None,
    separated: Annotated[
        bool, typer.Option("--separated", help="Does the structure make A and B independent given --given?")
    ] = False,
    given: Annotated[
        list[str] | None, typer.Option(metavar="Z,...", help="What is given; the class too has to be named.")
    ] = None,
    json_out: JsonOut = False,
) -> None:
    """Show a structure: parents, evidence on the edges, and tables."""
    names = attributes or []
    mix = opened_mix(structure)
    if mix:
        typer.echo(_mix_text(mix, names, separated or bool(given), json_out))
        return
    document, classifier = opened(structure)
    if given and not separated:
        raise SettingError("--given only goes with --separated; add --separated or drop it")
    if separated:
        answer = _separation(classifier, names, given)
        typer.echo(json.dumps(answer.to_dict(), ensure_ascii=False) if json_out else str(answer))
    elif json_out:
        if names:
            raise SettingError(f"--json prints the whole structure, but {names[0]} is named; drop the name or --json")
        typer.echo(json.dumps(document, ensure_ascii=False, allow_nan=False))
    else:
        typer.echo("\n\n".join([structure_text(document), *(table_text(classifier, name) for name in names)]))


def _mix_text(
    mix: tuple[dict[str, Any], MixedClassifier], names: Sequence[str], separated: bool, json_out: bool
) -> str:
    """Lay out the members of a mix, one after the other."""
    document, classifier = mix
    if separated:
        raise SettingError("--separated asks one structure, but this is a mix; bnx export a member and ask that")
    if json_out:
        if names:
            raise SettingError(f"--json prints the whole mix, but {names[0]} is named; drop the name or --json")
        return json.dumps(document, ensure_ascii=False, allow_nan=False)
    parts = [f"mix: {document['words']}"]
    for one, member in zip(document["members"], classifier.members, strict=True):
        head = f"weight {one['weight']:.3f}: {structure_text(one['structure'])}"
        parts += [head, *(table_text(member, name) for name in names)]
    return "\n\n".join(parts)


def _separation(classifier: Classifier, names: Sequence[str], given: Sequence[str] | None) -> Separation:
    if len(names) != 2:
        raise SettingError(f"--separated takes two attributes, not {len(names)}; write --separated A B --given Z")
    known = [classifier.target.name, *(domain.name for domain in classifier.domains)]
    return separation(classifier, names[0], names[1], listed("given", given, known))
