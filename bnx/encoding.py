"""Raw rows to codes of domains that are given: a shipped structure meets new data."""

from collections.abc import Callable, Iterator, Sequence

import numpy as np
import pyarrow as pa

from bnx.blocks import array_numbers, array_texts, typed_number
from bnx.domains import Domain
from bnx.reading import Source

__all__ = ["encode"]

Encoder = Callable[[pa.Array], np.ndarray]


def encode(
    source: Source, domains: Sequence[Domain], extra: Sequence[str] = ()
) -> Iterator[tuple[np.ndarray, pa.RecordBatch]]:
    """Code new rows block by block: codes (n, N) int32 under ``domains``, with the batch that they come from.

    -1 stands for what a domain does not hold: a level never seen (unless the domain has a pooled one), a blank cell
    where there was none before, a text in a numeric column. The batch holds the columns of the domains, then ``extra``.

    Raises:
        DataError: a column is missing, or the file is malformed.
    """
    encoders = [_number_encoder(domain) if domain.numeric else _text_encoder(domain) for domain in domains]
    names = [domain.name for domain in domains]
    for batch in source.blocks([*names, *(name for name in extra if name not in names)]):
        codes = np.empty((len(domains), batch.num_rows), dtype=np.int32)
        for row, (name, encoder) in enumerate(zip(names, encoders, strict=True)):
            codes[row] = encoder(batch.column(name))
        yield codes, batch


def _number_encoder(domain: Domain) -> Encoder:
    cuts = np.array(domain.cuts, dtype=np.float64)
    blank = len(domain) - 1 if domain.blank else -1

    def encoder(array: pa.Array) -> np.ndarray:
        values, wrong = array_numbers(array, domain.name, padded=True)
        codes = np.where(np.isnan(values), blank, np.searchsorted(cuts, values, side="left"))
        return np.where(wrong, -1, codes)

    return encoder


def _text_encoder(domain: Domain) -> Encoder:
    regular = len(domain) - domain.pooled - domain.blank
    known = {text: code for code, text in enumerate(domain.levels[:regular])}
    other = regular if domain.pooled else -1
    blank = len(domain) - 1 if domain.blank else -1

    def encoder(array: pa.Array) -> np.ndarray:
        texts, codes = array_texts(array, domain.name)
        typed = typed_number(array.type)

        def code(text: str | None) -> int:
            if text is None:
                return blank
            # A typed 3 may have been written 3.0 in the file that the levels come from.
            return known.get(text, known.get(f"{text}.0", other) if typed else other)

        return np.take(np.array([code(text) for text in texts], dtype=np.int32), codes)

    return encoder
