import csv
import gzip
import hashlib
import os
import subprocess
import sys
import threading

import pyarrow as pa
import pyarrow.parquet
import pytest
from hypothesis import HealthCheck, given, settings
from hypothesis import strategies as st

from bnx.errors import DataError, SettingError
from bnx.reading import open_source

LEVELS = ["01", "1", "1.0", "001", "10", "true", "True", "NA", "None", "null", "nan", "", "1e5", "é"]
TEXT = "code;kind\n" + "".join(f"{level};k\n" for level in LEVELS)


def cells(source, column):
    return [cell for batch in source.blocks([column]) for cell in batch.column(column).to_pylist()]


def write(folder, name, content):
    path = folder / name
    path.write_bytes(content if isinstance(content, bytes) else content.encode())
    return str(path)


def zstd(content):
    sink = pa.BufferOutputStream()
    with pa.CompressedOutputStream(sink, "zstd") as stream:
        stream.write(content)
    return sink.getvalue().to_pybytes()


def arrow_file(path, table):
    with pa.OSFile(str(path), "wb") as sink, pa.ipc.new_file(sink, table.schema) as writer:
        writer.write_table(table)


@pytest.mark.parametrize(
    ("name", "content"),
    [
        ("a.csv", TEXT.encode()),
        ("a.csv", TEXT.replace(";", ",").encode()),
        ("a.tsv", TEXT.replace(";", "\t").encode()),
        ("a.txt", TEXT.replace(";", "|").encode()),
        ("a.csv", TEXT.replace("\n", "\r\n").encode()),
        ("a.csv", b"\xef\xbb\xbf" + TEXT.encode()),
        ("a.csv", TEXT.encode("utf-16")),
        ("a.csv", b"\xfe\xff" + TEXT.encode("utf-16-be")),
        ("a.csv", TEXT.encode("utf-16-le")),
        ("a.csv.gz", gzip.compress(TEXT.encode())),
        ("a.csv.gz", gzip.compress(TEXT.encode("utf-16"))),
        ("named_wrongly.csv", gzip.compress(TEXT.encode())),
        ("a.csv.zst", zstd(TEXT.encode())),
        ("a.csv", ("\n\n" + TEXT).encode()),
        (
            "a.csv",
            "\n".join(";".join(f'"{cell}"' for cell in line.split(";")) for line in TEXT.split("\n")[:-1]).encode(),
        ),
    ],
)
def test_text_stays_text_in_every_form_of_delimited_file(tmp_path, name, content):
    source = open_source(write(tmp_path, name, content))
    assert source.columns == ("code", "kind")
    assert cells(source, "code") == LEVELS
    assert cells(source, "code") == LEVELS  # a second pass


def test_parquet_and_arrow_hold_the_same(tmp_path):
    table = pa.table({"code": LEVELS, "kind": ["k"] * len(LEVELS)})
    pa.parquet.write_table(table, tmp_path / "a.parquet")
    arrow_file(tmp_path / "a.arrow", table)
    (tmp_path / "folder" / "inner").mkdir(parents=True)
    pa.parquet.write_table(table.slice(0, 5), tmp_path / "folder" / "1.parquet")
    pa.parquet.write_table(table.slice(5), tmp_path / "folder" / "inner" / "2.parquet")
    (tmp_path / "folder" / "_metadata.parquet").write_bytes(b"")
    for name in ("a.parquet", "a.arrow", "folder"):
        source = open_source(str(tmp_path / name))
        assert source.columns == ("code", "kind")
        assert cells(source, "code") == LEVELS


def test_large_arrow_batches_come_in_blocks(tmp_path):
    arrow_file(tmp_path / "a.feather", pa.table({"x": list(range(100_000))}))
    source = open_source(str(tmp_path / "a.feather"))
    assert [batch.num_rows for batch in source.blocks(["x"])] == [65_536, 34_464]


def test_columns_come_in_the_order_asked_for(tmp_path):
    source = open_source(write(tmp_path, "a.csv", "a,b,c\n1,2,3\n"))
    (batch,) = source.blocks(["c", "a"])
    assert batch.to_pydict() == {"c": ["3"], "a": ["1"]}
    pa.parquet.write_table(pa.table({"a": ["1"], "b": ["2"], "c": ["3"]}), tmp_path / "a.parquet")
    (batch,) = open_source(str(tmp_path / "a.parquet")).blocks(["c", "a"])
    assert batch.to_pydict() == {"c": ["3"], "a": ["1"]}


def test_standard_input_is_read_more_than_once_and_leaves_nothing_behind(tmp_path):
    script = (
        "from bnx.reading import open_source\n"
        "source = open_source('-')\n"
        "print(source.name, source.columns, [b.to_pydict() for b in source.blocks(['b'])])\n"
        "print([b.to_pydict() for b in source.blocks(['a'])])\n"
    )
    done = subprocess.run(
        [sys.executable, "-W", "error", "-c", script],
        input=gzip.compress(b"a,b\n1,2\n"),
        capture_output=True,
        env=os.environ | {"TMPDIR": str(tmp_path)},
        check=True,
    )
    assert done.stdout.decode().splitlines() == ["standard input ('a', 'b') [{'b': ['2']}]", "[{'a': ['1']}]"]
    assert done.stderr == b""
    assert list(tmp_path.iterdir()) == []


def test_a_pipe_is_read(tmp_path):
    pipe = tmp_path / "pipe.csv"
    os.mkfifo(pipe)
    writer = threading.Thread(target=lambda: pipe.write_bytes(b"a,b\n1,2\n"))
    writer.start()
    source = open_source(str(pipe))
    writer.join()
    assert cells(source, "b") == ["2"]


def test_quotes_newlines_and_doubled_quotes_in_cells(tmp_path):
    source = open_source(write(tmp_path, "a.csv", 'a,"b ""x"""\n"1,5","two\nlines"\n"say ""so""",5" pipe\n'))
    assert source.columns == ("a", 'b "x"')
    assert cells(source, "a") == ["1,5", 'say "so"']
    assert cells(source, 'b "x"') == ["two\nlines", '5" pipe']


def test_a_given_delimiter_wins(tmp_path):
    path = write(tmp_path, "a.csv", "a:b,c:d\n1:2,3:4\n")
    assert open_source(path).columns == ("a:b", "c:d")
    assert open_source(path, ":").columns == ("a", "b,c", "d")
    assert open_source(write(tmp_path, "b.csv", "a,b\tc\n1,2\t3\n"), "tab").columns == ("a,b", "c")
    with pytest.raises(SettingError) as caught:
        open_source(path, "::")
    assert str(caught.value) == "delimiter is '::'; it must be one character, or tab, \\t, comma, semicolon, pipe"


def test_a_header_longer_than_the_first_look(tmp_path):
    names = [f"attribute_{k}" for k in range(20_000)]
    source = open_source(write(tmp_path, "wide.csv", ",".join(names) + "\n" + ",".join("x" * 20_000) + "\n"))
    assert source.columns == tuple(names)
    assert cells(source, names[-1]) == ["x"]


def test_a_pass_that_stops_early_does_no_harm(tmp_path):
    source = open_source(write(tmp_path, "a.csv", "a,b\n" + "1,2\n" * 1_000_000))
    blocks = source.blocks(["a"])
    assert next(blocks).num_rows > 100_000
    blocks.close()
    assert sum(batch.num_rows for batch in source.blocks(["b"])) == 1_000_000


def test_sha256_is_that_of_the_bytes_on_disk(tmp_path):
    content = gzip.compress(b"a,b\n1,2\n")
    assert open_source(write(tmp_path, "a.csv.gz", content)).sha256() == hashlib.sha256(content).hexdigest()
    folder = tmp_path / "folder"
    folder.mkdir()
    for name, value in (("2.parquet", "y"), ("1.parquet", "x")):
        pa.parquet.write_table(pa.table({"a": [value]}), folder / name)
    joined = (folder / "1.parquet").read_bytes() + (folder / "2.parquet").read_bytes()
    assert open_source(str(folder)).sha256() == hashlib.sha256(joined).hexdigest()


def read_through(path, delimiter=None):
    source = open_source(path, delimiter)
    return [batch.num_rows for batch in source.blocks(source.columns)]


def refusal(path, delimiter=None):
    with pytest.raises(DataError) as caught:
        read_through(path, delimiter)
    return str(caught.value)


@pytest.mark.parametrize(
    ("name", "content", "sentence"),
    [
        ("a.csv", b"", "{} is empty; it must hold a header and at least one row"),
        ("a.csv", b"\xef\xbb\xbf \n\n", "{} is empty; it must hold a header and at least one row"),
        ("a.csv", b"a,b\n", "{} holds a header but no row below it; it must hold at least one row"),
        ("a.csv", b"a,b", "{} holds a header but no row below it; it must hold at least one row"),
        (
            "a.csv",
            b'a,b\n1,"2\n2"\n\n3\n',
            "{}, line 5: 1 cell where the header has 2; every row must have as many cells as the header",
        ),
        (
            "a.csv",
            b"a,b\n1,2\n1,2,3\n",
            "{}, line 3: 3 cells where the header has 2; every row must have as many cells as the header",
        ),
        (
            "a.csv.gz",
            gzip.compress(b"a,b\n1,2\n1,2,3\n"),
            "{}, line 3: 3 cells where the header has 2; every row must have as many cells as the header",
        ),
        (
            "a.csv",
            b"a,b,a\n1,2,3\n",
            "{} has two columns named 'a' (columns 1 and 3); give every column a name of its own",
        ),
        ("a.csv", b"a,,c\n1,2,3\n", "column 2 of {} has no name; give every column a name in the header"),
        (
            "a.csv",
            "a,b\n1,x\n2,é\n".encode("latin-1"),
            "{}, line 3: byte 11 of the file (0xe9) is not UTF-8; save the file as UTF-8",
        ),
        (
            "a.csv",
            b"a,b\n" + b"1,2\n" * 500_000 + b"3,\xff\n" + b"1,2\n" * 9,
            "{}, line 500002: byte 2,000,007 of the file (0xff) is not UTF-8; save the file as UTF-8",
        ),
        ("a.csv", b'a,b\n1,2\n"3,4\n5,6\n', "{}, line 3: a quote is opened in this record and never closed"),
        ("a.csv", b'a,b\n1,2\n3,"4\n5,6\n', "{}, line 3: a quote is opened in this record and never closed"),
        (
            "a.csv",
            b'a,b\n1,2\n3,"4\n' + b"5,6\n" * 500_000,
            "{}, line 3: a cell has more than 131,072 characters; a quote is probably never closed",
        ),
        (
            "a.csv",
            b'a,b\n1,2\n"x"y"\n',
            "{}, line 3: 1 cell where the header has 2; every row must have as many cells as the header",
        ),
        (
            "a.csv.gz",
            gzip.compress(os.urandom(100) + b"a,b\n1,2\n" * 9)[:-30],
            "{} cannot be read, it may be damaged or cut short: Truncated compressed stream",
        ),
        (
            "a.xlsx",
            b"PK\x03\x04",
            "{} ends in .xlsx, which is not a form of table that can be read; "
            "give .csv, .tsv, .txt (also .gz, .zst), .parquet, .arrow or .feather",
        ),
        ("a.parquet", b"no", "{} ends in .parquet but is not a Parquet file; its first bytes are b'no'"),
        ("a.feather", b"no", "{} ends in .feather but is not an Arrow IPC file; its first bytes are b'no'"),
    ],
)
def test_refusals_of_files(tmp_path, name, content, sentence):
    path = write(tmp_path, name, content)
    assert refusal(path) == sentence.format(path)


@pytest.mark.parametrize("name", ["a.parquet", "a.arrow"])
def test_a_damaged_columnar_file_is_refused_in_one_sentence(tmp_path, name):
    table = pa.table({"a": [str(k) for k in range(999)]})
    (pa.parquet.write_table(table, tmp_path / name) if "parquet" in name else arrow_file(tmp_path / name, table))
    whole = (tmp_path / name).read_bytes()
    sentence = refusal(write(tmp_path, name, whole[: len(whole) // 2]))
    assert sentence.startswith(f"{tmp_path / name} cannot be read, it may be damaged or cut short: ")
    assert "\n" not in sentence


def test_columnar_files_without_rows_are_refused(tmp_path):
    table = pa.table({"a": pa.array([], pa.string())})
    pa.parquet.write_table(table, tmp_path / "a.parquet")
    arrow_file(tmp_path / "a.arrow", table)
    for name in ("a.parquet", "a.arrow"):
        expected = f"{tmp_path / name} holds columns but no row; it must hold at least one row"
        assert refusal(str(tmp_path / name)) == expected


def test_refusals_of_places(tmp_path):
    assert refusal(str(tmp_path / "no.csv")) == (
        f"there is no file {tmp_path / 'no.csv'}; give a table that exists, or - for standard input"
    )
    assert refusal(str(tmp_path)) == (
        f"the folder {tmp_path} holds no Parquet file; give a folder of .parquet files, or one file"
    )


def test_refusals_of_folders_that_do_not_fit_together(tmp_path):
    pa.parquet.write_table(pa.table({"a": ["x"], "b": [1]}), tmp_path / "1.parquet")
    pa.parquet.write_table(pa.table({"a": ["x"], "c": [1]}), tmp_path / "2.parquet")
    must = "all files of a folder must have the same columns"
    assert refusal(str(tmp_path)) == f"2.parquet has no column 'b', which 1.parquet has; {must}"
    pa.parquet.write_table(pa.table({"a": ["x"], "b": ["y"]}), tmp_path / "2.parquet")
    assert refusal(str(tmp_path)) == f"column 'b' is string in 2.parquet but int64 in 1.parquet; {must}"
    pa.parquet.write_table(pa.table({"b": [1.5], "a": ["x"]}), tmp_path / "2.parquet")
    assert cells(open_source(str(tmp_path)), "b") == [1, 1.5]
    (tmp_path / "site=north").mkdir()
    pa.parquet.write_table(pa.table({"a": ["x"], "b": [1]}), tmp_path / "site=north" / "3.parquet")
    assert refusal(str(tmp_path)) == (
        f"the folder {tmp_path} keeps values in the names of subfolders (site=north); "
        "write that column into the files, or give one of the subfolders"
    )


@settings(max_examples=300, deadline=None, suppress_health_check=[HealthCheck.function_scoped_fixture])
@given(st.lists(st.sampled_from([b"a", b",", b'"', b"\n", b"\r\n", b"\r", b"\xc3\xa9", b"\xff", b"\x00"]), max_size=14))
def test_no_bytes_lead_to_anything_but_rows_or_a_sentence(tmp_path, tokens):
    path = write(tmp_path, "a.csv", b"a,b\n" + b"".join(tokens))
    try:
        told = ""
        assert sum(read_through(path)) > 0
    except DataError as error:
        told = str(error)
    assert "damaged" not in told
    assert "\n" not in told


CELL = st.text(st.sampled_from('ab1.,;\t|" \né'), max_size=5)


@settings(max_examples=200, deadline=None, suppress_health_check=[HealthCheck.function_scoped_fixture])
@given(st.lists(st.tuples(CELL, CELL, CELL), min_size=1, max_size=8), st.sampled_from(",;\t|"))
def test_what_the_csv_module_writes_is_read_back(tmp_path, rows, delimiter):
    with (tmp_path / "a.csv").open("w", newline="") as file:
        writer = csv.writer(file, delimiter=delimiter, quoting=csv.QUOTE_ALL)
        writer.writerows([("one", "two", "three"), *rows])
    source = open_source(str(tmp_path / "a.csv"))
    assert [tuple(row.values()) for batch in source.blocks(source.columns) for row in batch.to_pylist()] == rows


def test_an_unknown_column_is_answered_with_the_nearest(tmp_path):
    path = write(tmp_path, "a.csv", "arrival,route\n1,2\n")
    with pytest.raises(DataError, match=r"has no column 'arival'; did you mean arrival\?$"):
        open_source(path).check(["arival"])
