"""Write one file: whole or not at all, and never over another unless told to."""

from pathlib import Path
from secrets import token_hex

from bnx.errors import DataError, SettingError
from bnx.unfinished import unfinished

__all__ = ["check_free", "hidden_beside", "write_bytes"]


def check_free(path: str, overwrite: bool, option: str = "-o") -> None:
    """Refuse a path that is taken.

    Raises:
        SettingError: there is a file and ``overwrite`` is off, or the path is empty or a folder. DataError: there is no
            such folder.
    """
    if not path:
        raise SettingError(f"{option} is empty; give the name of a file")
    if Path(path).is_dir():
        raise SettingError(f"{option} {path} is a folder, but a file is to be written; add a file name")
    if not Path(path).resolve().parent.is_dir():
        raise DataError(
            f"cannot write {path}: there is no folder {Path(path).parent}; make it, or give another {option}"
        )
    if Path(path).exists() and not overwrite:
        raise SettingError(
            f"the file {path} exists already; give another one with {option}, or --overwrite to replace it"
        )


def hidden_beside(place: Path) -> Path:
    """Name what is to take a place once it is finished: known before it is made, so that a signal can undo it."""
    return place.parent / f".{place.name[:80]}-{token_hex(8)}"


def write_bytes(path: str, content: bytes, overwrite: bool, option: str = "-o") -> None:
    """Write a file through a temporary neighbour; a link is followed, so that what it points to is replaced.

    Raises:
        SettingError: the path is taken. DataError: it cannot be written.
    """
    check_free(path, overwrite, option)
    place = Path(path).resolve()
    work = hidden_beside(place)

    def undo() -> None:
        work.unlink(missing_ok=True)

    with unfinished(undo):
        try:
            work.write_bytes(content)
            work.chmod(0o644)
            work.replace(place)
        except OSError as error:
            raise DataError(
                f"cannot write {path} ({error.strerror or error}); choose another place with {option}"
            ) from None
        finally:
            undo()
