"""bnx classify: class probabilities for new records."""

import io
from collections.abc import Mapping
from pathlib import Path
from typing import Annotated

import numpy as np
import pandas as pd
import typer

from bnx.classifier import Classifier
from bnx.cli.shared import Overwrite, Quiet, StructureFile, check_spared, opened, opened_mix, say
from bnx.encoding import encode
from bnx.errors import SettingError
from bnx.files import check_free, write_bytes
from bnx.mixed_classifier import MixedClassifier
from bnx.reading import Source, open_source
from bnx.rebasing import parse_prior, rebased
from bnx.summing_out import summing_notes
from bnx.text import count_of, quoted

__all__ = ["run"]


def run(
    structure: StructureFile,
    data: Annotated[str, typer.Argument(metavar="DATA", help="Table of new records; - for standard input.")],
    output: Annotated[
        str,
        typer.Option("-o", "--output", metavar="FILE", help="Result: .csv or .parquet; - for CSV on standard output."),
    ],
    prior: Annotated[
        list[str] | None,
        typer.Option(
            metavar="LEVEL=P,...",
            help="Shares of the classes where these records come from, if they differ from those in training.",
        ),
    ] = None,
    overwrite: Overwrite = False,
    quiet: Quiet = False,
) -> None:
    """Give every class's probability for each record, and the most probable class, by a structure or a mix.

    The result has the columns row (0-based line of data), most_probable, and p:LEVEL for each level of the class.
    Blank cells and values that the structure does not know are summed out along the structure, with a note. With
    --prior, columns prior:LEVEL repeat the shares that the probabilities are based on.

    A probability is not a decision. The structure shows dependences, not causes; the table that it was learnt from may
    carry bias in who was recorded and how; rare classes make every figure soft. Where a decision touches health,
    safety, credit, work or rights: validate locally, follow the local rules, and leave the decision to those licensed
    to make it.
    """
    _check_output(output, overwrite)
    source = open_source(data)
    check_spared(output, source)
    _, classifier = opened_mix(structure) or opened(structure)
    if prior is not None:
        shares = parse_prior(prior, classifier.target.levels)
        classifier = (
            classifier.rebased(shares) if isinstance(classifier, MixedClassifier) else rebased(classifier, shares)
        )
    result, notes = _classified(classifier, source)
    if output == "-":
        typer.echo(result.to_csv(index=False), nl=False)
    else:
        write_bytes(output, _content(result, output), overwrite)
        say(f"{count_of(len(result), 'record')} classified into {output}", quiet)
    for note in notes:
        say(f"note: {note}", quiet)


def _check_output(output: str, overwrite: bool) -> None:
    """Refuse a place that cannot take the result, before the work starts."""
    if output == "-":
        if overwrite:
            raise SettingError("--overwrite has nothing to replace with -o -, which is standard output; drop it")
        return
    if Path(output).suffix.lower() not in (".csv", ".parquet"):
        raise SettingError(f"-o {output}: the ending must be .csv or .parquet, or - for CSV on standard output")
    check_free(output, overwrite)


def _classified(classifier: Classifier | MixedClassifier, source: Source) -> tuple[pd.DataFrame, list[str]]:
    """Classify every record; also say, attribute by attribute, how many records hold something unknown."""
    parts, unknown, rough = [], np.zeros(len(classifier.domains), np.int64), 0
    for codes, _ in encode(source, classifier.domains):
        p, approximate = classifier.classified(codes)
        parts.append(p)
        unknown += (codes < 0).sum(axis=1)
        rough += int(approximate.sum())
    p = np.concatenate(parts)
    columns = {"row": np.arange(len(p)), "most_probable": classifier.labels(p)}
    columns |= {f"p:{level}": p[:, c] for c, level in enumerate(classifier.target.levels)}
    notes = summing_notes([domain.name for domain in classifier.domains], unknown, rough)
    if classifier.other_prior is not None:
        shares = dict(zip(classifier.target.levels, classifier.other_prior.tolist(), strict=True))
        columns |= {f"prior:{level}": np.full(len(p), share) for level, share in shares.items()}
        notes.append(_moved(classifier, shares))
    return pd.DataFrame(columns), notes


def _moved(classifier: Classifier | MixedClassifier, shares: Mapping[str, float]) -> str:
    """Say from where to where the class prior moved."""
    before = (classifier.class_counts / classifier.class_counts.sum()).tolist()
    told = [f"{level} {old:.4g} to {share:.4g}" for old, (level, share) in zip(before, shares.items(), strict=True)]
    return f"probabilities are based on another class prior than that of training: {quoted(told)}"


def _content(result: pd.DataFrame, output: str) -> bytes:
    """Write a table as bytes of CSV or Parquet."""
    content = io.BytesIO()
    if Path(output).suffix.lower() == ".csv":
        result.to_csv(content, index=False)
    else:
        result.to_parquet(content, index=False)
    return content.getvalue()
