"""Rows in files: the same values, nothing left behind, one sentence when there is no room."""

import errno
import os
import signal
import subprocess
import sys
from pathlib import Path

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from bnx import cells, storing
from bnx.cells import Cells, stretches
from bnx.errors import DataError
from bnx.storing import MEMORY, Spill, Store


@pytest.mark.parametrize("kind", [np.uint8, np.uint16, np.float64])
def test_spilled_arrays_keep_their_values_after_their_pages_are_dropped(tmp_path: Path, kind: type) -> None:
    store = Spill(str(tmp_path))
    shapes = [(3,), (0,), (5, 70_001), (1 << 20,), (7, 1 << 21), (2, 3, 4)]
    arrays = [store.empty(shape, kind) for shape in shapes]
    for number, array in enumerate(arrays):
        assert type(array) is np.ndarray
        assert (array.shape, array.dtype, array.flags.c_contiguous) == (shapes[number], kind, True)
        array[...] = np.arange(array.size).reshape(array.shape) % 251 + number
    for number, array in enumerate(arrays):
        store.let_go(array)
        store.let_go(array[:1])
        assert np.array_equal(array, np.arange(array.size).reshape(array.shape) % 251 + number)


def test_nothing_of_a_spill_has_a_name(tmp_path: Path) -> None:
    store = Spill(str(tmp_path))
    array = store.empty((1 << 22,), np.uint8)
    array[:] = 1
    assert list(tmp_path.iterdir()) == []


def test_resident_memory_falls_when_an_array_is_let_go(tmp_path: Path) -> None:
    store = Spill(str(tmp_path))
    array = store.empty((1 << 26,), np.uint8)
    array[:] = 1
    full = resident()
    store.let_go(array)
    assert resident() < full - (1 << 25)
    assert int(array.sum(dtype=np.int64)) == 1 << 26


def resident() -> int:
    """Read the bytes of mapped files that are in memory now."""
    lines = Path("/proc/self/status").read_text().splitlines()
    return next(1024 * int(line.split()[1]) for line in lines if line.startswith("RssFile"))


def test_a_file_is_given_back_once_no_array_in_it_is_in_use(tmp_path: Path) -> None:
    store = Spill(str(tmp_path))
    first = store.empty((1 << 25,), np.uint8)
    second = store.empty((1 << 25,), np.uint8)
    held = open_files(tmp_path)
    del first
    assert open_files(tmp_path) == held - 1
    second[:] = 2
    assert second.min() == 2


def open_files(folder: Path) -> int:
    """Count the files of a folder that this process holds, named or not."""
    names = [str(path.readlink()) for path in Path("/proc/self/fd").iterdir() if path.is_symlink()]
    return sum(name.startswith(str(folder)) for name in names)


def test_a_killed_program_leaves_nothing(tmp_path: Path) -> None:
    script = (
        "import os, signal, sys; import numpy as np; from bnx.storing import Spill\n"
        "array = Spill(sys.argv[1]).empty((1 << 24,), np.uint8); array[:] = 1\n"
        "os.kill(os.getpid(), signal.SIGKILL)\n"
    )
    done = subprocess.run([sys.executable, "-c", script, str(tmp_path)], check=False)
    assert done.returncode == -signal.SIGKILL
    assert list(tmp_path.iterdir()) == []


@pytest.mark.parametrize("folder", ["", "nowhere", "file"])
def test_a_folder_must_be_there(tmp_path: Path, folder: str) -> None:
    (tmp_path / "file").write_text("x")
    place = str(tmp_path / folder) if folder else ""
    with pytest.raises(DataError) as caught:
        Spill(place)
    assert str(caught.value) == f"--spill {place}: there is no such folder; make it, or give another one"


def test_too_little_room_is_one_sentence(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    store = Spill(str(tmp_path))

    def full(file: int, start: int, size: int) -> None:
        raise OSError(errno.ENOSPC, os.strerror(errno.ENOSPC))

    monkeypatch.setattr(storing.os, "posix_fallocate", full)
    with pytest.raises(DataError, match=r"a file of 134,217,728 bytes cannot be made there, where [0-9,]+ are free"):
        store.empty((1 << 27,), np.uint8)


def test_a_folder_that_takes_no_files_is_refused(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    def closed(**_: object) -> None:
        raise PermissionError(errno.EACCES, os.strerror(errno.EACCES))

    monkeypatch.setattr(storing.tempfile, "TemporaryFile", closed)
    with pytest.raises(DataError) as caught:
        Spill(str(tmp_path))
    assert (
        str(caught.value) == f"--spill {tmp_path}: no file can be made there (Permission denied); give another folder"
    )


@st.composite
def batches(draw: st.DrawFn) -> list[np.ndarray]:
    """Draw blocks of values of any length."""
    random = np.random.default_rng(draw(st.integers(0, 1000)))
    return [random.integers(0, 200, size) for size in draw(st.lists(st.integers(0, 40), max_size=8))]


@given(batches(), st.sampled_from([1, 4, 7, 64]), st.sampled_from([0, 5, 1000]))
@settings(max_examples=80, deadline=None)
def test_cells_hold_what_was_added_in_any_stretches(blocks: list[np.ndarray], stretch: int, expected: int) -> None:
    with pytest.MonkeyPatch.context() as patch:
        patch.setattr(cells, "STRETCH", stretch)
        patch.setattr(cells, "_LONGEST", 4 * stretch)
        line = filled(blocks, MEMORY, expected)
        whole = np.concatenate([np.zeros(0, int), *blocks])
        assert len(line) == len(whole)
        for rows in stretches(len(line)):
            assert np.array_equal(line.part(rows), whole[rows])
        wider = line.to(np.float64, np.arange(200) / 8)
        assert (len(line), wider.kind) == (0, np.float64)
        for rows in stretches(len(wider)):
            assert np.array_equal(wider.part(rows), whole[rows] / 8)


def filled(blocks: list[np.ndarray], store: Store, expected: int) -> Cells:
    """Add blocks to a new line of cells."""
    line = Cells(store, np.uint8, expected)
    for block in blocks:
        for part, room in line.add(len(block)):
            room[:] = block[part]
    return line
