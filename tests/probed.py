"""Ways into ``bnx test``: a run on a frame, records drawn with a known dependence, and bits by other libraries."""

from collections.abc import Mapping, Sequence
from pathlib import Path
from tempfile import TemporaryDirectory

import numpy as np
import pandas as pd
from scipy.stats import chi2_contingency
from sklearn.metrics.cluster import expected_mutual_information

from bnx.pair_tests import Asked, PairTests, run_pair_tests
from bnx.reading import open_source
from bnx.recipe import Recipe

CLASSES = ("sound", "worn", "broken")


def probed(
    frame: pd.DataFrame,
    target: str,
    names: Sequence[str] = (),
    *,
    given: Sequence[str] = (),
    ordered: Mapping[str, tuple[str, ...]] | None = None,
    explain: bool = False,
    jobs: int = 1,
    **settings: object,
) -> PairTests:
    """Test the pairs of these names, or without any name all pairs, through a CSV file."""
    with TemporaryDirectory() as folder:
        path = Path(folder) / "table.csv"
        frame.to_csv(path, index=False)
        asked = Asked(tuple(names), tuple(given), not names, ordered or {}, explain)
        recipe = Recipe(target, **{"bins": "frequency:5"} | settings)  # type: ignore[arg-type]
        return run_pair_tests(open_source(str(path)), recipe, asked, jobs)


def corrected_bits(tables: Sequence[np.ndarray]) -> float:
    """Give the bits per record that tables without empty rows and columns share, less what chance alone would show.

    Chance is half the degrees of freedom where Cochran's rule holds for all of them (Miller 1955), and else the sum of
    records x scikit-learn's expected mutual information (Vinh, Epps & Bailey 2010).
    """
    several = [table for table in tables if min(table.shape) > 1]
    found = [chi2_contingency(table, correction=False, lambda_="log-likelihood") for table in several]
    expected = np.concatenate([np.zeros(0), *(one.expected_freq.ravel() for one in found)])
    if expected.size and expected.min() >= 1 and (expected < 5).mean() <= 0.2:
        chance = sum(one.dof for one in found) / 2
    else:
        chance = sum(table.sum() * expected_mutual_information(table, table.sum()) for table in several)
    nats = sum(one.statistic for one in found) / 2
    return float((nats - chance) / (sum(table.sum() for table in tables) * np.log(2)))


def words(codes: np.ndarray, start: str) -> list[str]:
    return [f"{start}{code}" for code in codes]


def copied(random: np.random.Generator, source: np.ndarray, levels: int, share: np.ndarray | float) -> np.ndarray:
    """Copy a column with this chance, else draw evenly."""
    return np.where(random.random(source.size) < share, source, random.integers(0, levels, source.size))


def planted(rows: int, seed: int, share: Mapping[str, float], levels: int = 3) -> pd.DataFrame:
    """Draw records in which ``right`` copies ``left`` with a chance that depends on the class; ``other`` is noise."""
    random = np.random.default_rng(seed)
    kind = random.integers(0, len(CLASSES), rows)
    left = random.integers(0, levels, rows)
    right = copied(random, left, levels, np.array([share.get(name, 0.0) for name in CLASSES])[kind])
    other = random.integers(0, 2, rows)
    return pd.DataFrame(
        {
            "left": words(left, "l"),
            "right": words(right, "r"),
            "other": words(other, "o"),
            "kind": [CLASSES[k] for k in kind],
        }
    )
