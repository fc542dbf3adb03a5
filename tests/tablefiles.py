"""Small tables as files, and coded tables read back as text."""

import pyarrow as pa
import pyarrow.parquet

from bnx.reading import open_source

CLASSES = ["sound", "rejected"]


def source_of(folder, columns, name="table.csv"):
    """Write columns (dict of lists of text) as a quoted CSV."""
    lines = [columns.keys(), *zip(*columns.values(), strict=True)]
    text = "\n".join(",".join('"' + str(cell).replace('"', '""') + '"' for cell in line) for line in lines) + "\n"
    (folder / name).write_text(text)
    return open_source(str(folder / name))


def parquet_of(folder, columns, name="table.parquet"):
    pa.parquet.write_table(pa.table(columns), folder / name)
    return open_source(str(folder / name))


def with_class(columns, rows=None):
    rows = rows or len(next(iter(columns.values())))
    return columns | {"arrival": [CLASSES[k % 2] for k in range(rows)]}


def domain(coded, name):
    return next(item for item in coded.table.schema.attributes if item.name == name)


def texts(coded, name):
    """Decode a column."""
    position = coded.table.schema.names.index(name)
    return [coded.table.schema.attributes[position].levels[code] for code in coded.table.codes[position]]


def reasons(coded):
    return {item.name: item.reason for item in coded.left_out}
