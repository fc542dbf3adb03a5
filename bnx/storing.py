"""Where arrays with a value per row live: in memory, or in files that are mapped into it."""

import errno
import mmap
import os
import shutil
import tempfile
import threading
from collections.abc import Iterator
from math import prod
from pathlib import Path
from weakref import WeakValueDictionary

import numpy as np
from numpy.typing import DTypeLike

from bnx.errors import DataError

__all__ = ["MEMORY", "Memory", "Spill", "Store", "available_memory"]

_PAGE = mmap.PAGESIZE
_FIRST, _LONGEST = 1 << 24, 1 << 30  # bytes of a file: each is twice as long as the one before, up to a limit

_NO_ROOM = {errno.ENOSPC, errno.EDQUOT, errno.EFBIG}


def available_memory() -> int | None:
    """Look up the bytes of memory that a program can take now, None where the system does not tell."""
    try:
        lines = Path("/proc/meminfo").read_text(encoding="utf-8").splitlines()
        return next(1024 * int(line.split()[1]) for line in lines if line.startswith("MemAvailable:"))
    except (OSError, StopIteration):
        pass
    try:
        return os.sysconf("SC_PHYS_PAGES") * os.sysconf("SC_PAGE_SIZE")
    except (AttributeError, ValueError, OSError):
        return None


class Memory:
    """Keeps arrays in memory."""

    def empty(self, shape: tuple[int, ...], kind: DTypeLike) -> np.ndarray:
        """Make an array of any content."""
        return np.empty(shape, kind)

    def let_go(self, array: np.ndarray) -> None:
        """Hear that an array is not read for a while."""

    def room(self) -> int | None:
        """Look up how many bytes can be kept, None where the system does not tell."""
        return available_memory()


class Spill:
    """Keeps arrays in files of a folder, so that tables larger than memory can be counted.

    The files have no name, so that nothing is left of them when the program ends, however it ends. A file is given back
    once no array in it is in use.
    """

    def __init__(self, folder: str) -> None:
        """Check that files can be made there.

        Raises:
            DataError: there is no such folder, or nothing can be written there.
        """
        if not folder or not Path(folder).is_dir():
            raise DataError(f"--spill {folder}: there is no such folder; make it, or give another one")
        self._folder = folder
        self._lock = threading.Lock()
        self._maps: WeakValueDictionary[int, mmap.mmap] = WeakValueDictionary()  # by the address of the first byte
        self._length = _FIRST
        self._map = self._new_map(_PAGE)
        self._used = _PAGE

    def empty(self, shape: tuple[int, ...], kind: DTypeLike) -> np.ndarray:
        """Make an array of any content.

        Raises:
            DataError: the disk has no room for it.
        """
        values = prod(shape)
        size = -(-values * np.dtype(kind).itemsize // _PAGE) * _PAGE
        with self._lock:
            if self._used + size > len(self._map):
                self._map, self._used = self._new_map(max(size, self._length)), 0
                self._length = min(2 * self._length, _LONGEST)
            place, self._used = self._used, self._used + size
            return np.frombuffer(self._map, kind, values, place if size else 0).reshape(shape)

    def let_go(self, array: np.ndarray) -> None:
        """Take an array out of the resident memory; its values are read again from the disk when they are wanted."""
        if not hasattr(mmap, "MADV_DONTNEED"):
            return
        first = array.__array_interface__["data"][0]
        for address, one in self._held():
            start, stop = -(-(first - address) // _PAGE) * _PAGE, (first - address + array.nbytes) // _PAGE * _PAGE
            if 0 <= start < stop <= len(one):
                one.madvise(mmap.MADV_DONTNEED, start, stop - start)

    def room(self) -> int | None:
        """Look up how many bytes can be kept."""
        return shutil.disk_usage(self._folder).free

    def _held(self) -> Iterator[tuple[int, mmap.mmap]]:
        with self._lock:
            yield from list(self._maps.items())

    def _new_map(self, size: int) -> mmap.mmap:
        """Make a file whose room on the disk is taken at once: writing to a full disk later would end the program."""
        try:
            with tempfile.TemporaryFile(dir=self._folder) as file:
                if hasattr(os, "posix_fallocate"):
                    os.posix_fallocate(file.fileno(), 0, size)
                else:
                    file.truncate(size)
                one = mmap.mmap(file.fileno(), size)
        except OSError as error:
            raise self._refusal(error, size) from None
        self._maps[np.frombuffer(one, np.uint8).__array_interface__["data"][0]] = one
        return one

    def _refusal(self, error: OSError, size: int) -> DataError:
        """Say why no file can be made."""
        why = error.strerror or str(error)
        if error.errno not in _NO_ROOM:
            return DataError(f"--spill {self._folder}: no file can be made there ({why}); give another folder")
        free = shutil.disk_usage(self._folder).free
        return DataError(
            f"--spill {self._folder}: a file of {size:,} bytes cannot be made there, where {free:,} are free ({why}); "
            "give a folder with more room"
        )


Store = Memory | Spill
MEMORY = Memory()
