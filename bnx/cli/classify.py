"""bnx classify: class probabilities for new records."""

import io
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
from bnx.text import count_of, quoted

__all__ = ["run"]


def run(
    structure: StructureFile,
    data: Annotated[str, typer.Argument(metavar="DATA", help="Table of new records; - for standard input.")],
    output: Annotated[
        str,
        typer.Option("-o", "--output", metavar="FILE", help="Result: .csv or .parquet; - for CSV on standard output."),
    ],
    overwrite: Overwrite = False,
    quiet: Quiet = False,
) -> None:
    """Give every class's probability for each record, and the most probable class, by a structure or a mix.

    The result has the columns row (0-based line of data), most_probable, and p:LEVEL for each level of the class.
    Values that the structure does not know are left out of the evidence, with a note.

    A probability is not a decision. The structure shows dependences, not causes; the table that it was learnt from may
    carry bias in who was recorded and how; rare classes make every figure soft. Where a decision touches health,
    safety, credit, work or rights: validate locally, follow the local rules, and leave the decision to those licensed
    to make it.
    """
    _check_output(output, overwrite)
    source = open_source(data)
    check_spared(output, source)
    _, classifier = opened_mix(structure) or opened(structure)
    result, unknown = _classified(classifier, source)
    if output == "-":
        typer.echo(result.to_csv(index=False), nl=False)
    else:
        write_bytes(output, _content(result, output), overwrite)
        say(f"{count_of(len(result), 'record')} classified into {output}", quiet)
    if unknown:
        say(
            "note: cells that are blank or hold a value not known from training were left out of the evidence: "
            f"{quoted(unknown)}",
            quiet,
        )


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
    parts, unknown = [], np.zeros(len(classifier.domains), np.int64)
    for codes, _ in encode(source, classifier.domains):
        parts.append(classifier.probabilities(codes))
        unknown += (codes < 0).sum(axis=1)
    p = np.concatenate(parts)
    columns = {"row": np.arange(len(p)), "most_probable": classifier.labels(p)}
    columns |= {f"p:{level}": p[:, c] for c, level in enumerate(classifier.target.levels)}
    counts = zip(classifier.domains, unknown.tolist(), strict=True)
    return pd.DataFrame(columns), [f"{domain.name} ({count_of(n, 'record')})" for domain, n in counts if n]


def _content(result: pd.DataFrame, output: str) -> bytes:
    """Write a table as bytes of CSV or Parquet."""
    content = io.BytesIO()
    if Path(output).suffix.lower() == ".csv":
        result.to_csv(content, index=False)
    else:
        result.to_parquet(content, index=False)
    return content.getvalue()
