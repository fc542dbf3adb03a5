"""The whole command against one cross-validation of scikit-learn: from Parquet, from CSV, and naive alone."""

from functools import partial
from pathlib import Path

import numpy as np
import pyarrow.csv
from child import learn, python
from joblib.externals.loky import get_reusable_executor
from make_table import ROWS, BenchTable, make_table, write_table
from setting import Setting
from sklearn.model_selection import StratifiedKFold, cross_val_predict
from sklearn.naive_bayes import CategoricalNB
from timing import Figures, side_by_side

__all__ = ["STEPS", "scikit_log_loss", "scikit_parallel"]

FOLDS = 10
SCIKIT = "scikit-learn, CategoricalNB alone, cross-validated"


def scikit_log_loss(table: BenchTable) -> float:
    """Cross-validate scikit-learn's CategoricalNB in one process, on small integers; mean log loss in bits.

    With codes of 8 bits it takes less time than with codes of 64: taking out the rows of a fold then costs little.
    """
    rows, truth = np.ascontiguousarray(table.codes.T), table.target
    total = 0.0
    for train, test in StratifiedKFold(FOLDS, shuffle=True, random_state=1).split(rows[:, :1], truth):
        model = CategoricalNB(alpha=1, min_categories=table.sizes).fit(rows[train], truth[train])
        p = model.predict_proba(rows[test])
        total -= float(np.log2(p[np.arange(len(test)), truth[test]]).sum())
    return total / len(truth)


def scikit_parallel(table: BenchTable) -> float:
    """Do the same through ``cross_val_predict`` with two processes."""
    p = cross_val_predict(
        CategoricalNB(alpha=1, min_categories=table.sizes),
        np.ascontiguousarray(table.codes.T),
        table.target,
        cv=StratifiedKFold(FOLDS, shuffle=True, random_state=1),
        n_jobs=2,
        method="predict_proba",
    )
    get_reusable_executor().shutdown(wait=True)  # processor time of a process counts once it has ended
    return float(-np.log2(p[np.arange(len(p)), table.target]).mean())


def default(setting: Setting) -> Figures:
    """Run the default command from Parquet and from CSV beside scikit-learn and a plain reading of the CSV."""
    table, parquet, csv = _files(setting)
    results = setting.folder / "results"
    times = side_by_side(
        {
            "bnx learn from Parquet": partial(learn, parquet, results),
            "bnx learn from CSV": partial(learn, csv, results),
            SCIKIT: lambda: scikit_log_loss(table),
            f"{SCIKIT}, two processes": lambda: scikit_parallel(table),
            "pyarrow reads the CSV, no more": lambda: pyarrow.csv.read_csv(csv),
        },
        setting.runs,
    )
    return {"rows": len(table.target), "csv_bytes": csv.stat().st_size, "times": times}


def naive(setting: Setting) -> Figures:
    """Run naive Bayes alone as a whole command, and what a process takes to import the same and do nothing."""
    table, parquet, _ = _files(setting)
    results = setting.folder / "results"
    times = side_by_side(
        {
            "bnx learn --structures naive": partial(learn, parquet, results, "--structures", "naive"),
            "importing what it imports, no more": lambda: python("import bnx.cli.learn"),
            SCIKIT: lambda: scikit_log_loss(table),
        },
        setting.runs,
    )
    return {"times": times}


def stages(setting: Setting) -> Figures:
    """Ask the default command how long its stages take."""
    _, parquet, _ = _files(setting)
    return {"stages": learn(parquet, setting.folder / "results", "--timings").stages()}


def _files(setting: Setting) -> tuple[BenchTable, Path, Path]:
    """Draw the table and write it as Parquet and CSV, unless they are there; compile what is timed."""
    rows = setting.rows(ROWS)
    table = make_table(rows)
    parquet, csv = (setting.folder / f"table{rows}.{kind}" for kind in ("parquet", "csv"))
    for path in (parquet, csv):
        if not path.exists():
            write_table(table, path)
    small = setting.folder / "small.parquet"
    write_table(make_table(3_000), small)
    for options in ((), ("--structures", "naive")):
        learn(small, setting.folder / "results", *options)
    return table, parquet, csv


STEPS = {"default": default, "naive": naive, "stages": stages}
