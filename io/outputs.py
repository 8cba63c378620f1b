"""Put a finished text into a file: never over another unless told so, and never half of it."""

import os
from pathlib import Path
from typing import BinaryIO

from eastfall.io.errors import OutputError


def write_text(path: Path, text: str, *, force: bool = False) -> None:
    """Write a text file, UTF-8 with plain line feeds.

    Parameters
    ----------
    path : Path
        Must not exist, unless `force` is given; then it is replaced in one stroke.
    text : str
        What goes in.
    force : bool
        Replace a file that stands there.

    Raises
    ------
    OutputError
        Something stands there, or the file cannot be written; nothing is left half done.
    """
    data = text.encode("utf-8", "backslashreplace")
    try:
        (_replace if force else _create)(path, data)
    except FileExistsError as cause:
        raise OutputError(f"{path}: stands already; expected a new name, or --force to replace it") from cause
    except OSError as cause:
        raise OutputError(f"{path}: cannot be written: {cause.strerror or cause}") from cause


def refuse_existing(path: Path) -> None:
    """Raise `OutputError` if something stands at `path`."""
    if path.exists() or path.is_symlink():
        raise OutputError(f"{path}: stands already; expected a new name, or --force to replace it")


def refuse_sources(path: Path, *sources: Path) -> None:
    """Raise `OutputError` if `path` is one of the files that the output is made from, under whatever name."""
    if any(_same(path, one) for one in sources):
        raise OutputError(f"{path}: is what this is made from; expected another name, forced or not")


def _same(path: Path, other: Path) -> bool:
    try:
        return path.samefile(other)
    except (OSError, ValueError):  # one of the two is no file
        return False


def _create(path: Path, data: bytes) -> None:
    with path.open("xb") as file:
        try:
            _put(file, data)
        except OSError:
            path.unlink(missing_ok=True)
            raise


def _replace(path: Path, data: bytes) -> None:
    part = path.with_name(f".{path.name[:100]}.{os.getpid()}.part")
    try:
        with part.open("xb") as file:
            _put(file, data)
        part.replace(path)
    finally:
        part.unlink(missing_ok=True)


def _put(file: BinaryIO, data: bytes) -> None:
    file.write(data)
    file.flush()
    os.fsync(file.fileno())
