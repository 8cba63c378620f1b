"""One file of a run log, open for writing: whole records or nothing, chained and sealed; when to seal is `runlog`'s."""

import contextlib
import os
from collections.abc import Sequence
from io import FileIO
from pathlib import Path

import msgspec

from eastfall.io.errors import OutputError
from eastfall.io.logformat import FIRST_SEAL, Header, SealRecord, checked, encode
from eastfall.io.seal import Chain

_COPY = 1 << 20


def refused(path: Path, cause: OSError) -> OutputError:
    """Return the error for a file that cannot be written, with the system's error number kept."""
    error = OutputError(f"{path}: cannot be written: {cause.strerror or cause}")
    error.errno = cause.errno
    return error


def sync_folder(folder: Path) -> None:
    """Force a folder's list of names to the device, where the system can."""
    with contextlib.suppress(OSError):
        handle = os.open(folder, os.O_RDONLY)
        try:
            os.fsync(handle)
        finally:
            os.close(handle)


def _write_whole(file: FileIO, data: bytes) -> None:
    view = memoryview(data)
    while view:
        view = view[file.write(view) or 0 :]


class LogPart:
    """A new file, begun with its header.

    Parameters
    ----------
    path : Path
        The file; must not exist.
    header : Header
        Its first record; names the part before, if there is one, and that part's final seal.

    Raises
    ------
    FileExistsError
        Something stands there already.
    OutputError
        The file cannot be made or written; none is left behind.
    """

    def __init__(self, path: Path, header: Header) -> None:
        try:
            self._file = FileIO(path, "x+")
        except FileExistsError:
            raise
        except OSError as cause:
            raise refused(path, cause) from cause
        self.path = path
        self.number = header.part
        self.seal = header.previous.seal if header.previous else FIRST_SEAL
        """The last seal of the chain."""
        self.size = 0
        self.lines = 0
        self._chain = Chain(self.seal)
        self._crc = 0
        self._torn = False
        line, crc = checked(encode(header), 0)
        try:
            self._put(line, crc, 1)
            self.sync()
        except OutputError:
            self.discard()
            raise
        sync_folder(path.parent)

    def next_seal(self) -> str:
        """Return the value of a seal put here."""
        return self._chain.value()

    def write(
        self,
        records: Sequence[msgspec.Struct],
        *,
        seal_at: float | None = None,
        end: str | None = None,
        following: str | None = None,
    ) -> None:
        """Add records in one piece, all of them or none.

        Parameters
        ----------
        records : sequence of Struct
            What to add.
        seal_at : float, optional
            Given, a seal over everything so far stands before them, with this time [s].
        end, following : str, optional
            Why this seal is the part's last, and the name of the next part.

        Raises
        ------
        OutputError
            None was added; the file is as it was, or will be before anything else is added.
        """
        seal = None if seal_at is None else self._chain.value()
        if seal is not None and seal_at is not None:
            records = [SealRecord(seal, seal_at, self.lines, end, following), *records]
        crc, lines = self._crc, []
        for one in records:
            line, crc = checked(encode(one), crc)
            lines.append(line)
        self._put(b"".join(lines), crc, len(lines), seal=seal)

    def _put(self, data: bytes, crc: int, lines: int, *, seal: str | None = None) -> None:
        self._mend()
        try:
            _write_whole(self._file, data)
        except OSError as cause:
            self._torn = True
            with contextlib.suppress(OutputError):
                self._mend()
            raise refused(self.path, cause) from cause
        if seal is not None:
            self.seal = seal
            self._chain.restart(seal)
        self._chain.add(data)
        self._crc = crc
        self.size += len(data)
        self.lines += lines

    def _mend(self) -> None:
        """Cut off what a failed write left behind the last whole record."""
        if not self._torn:
            return
        try:
            self._file.truncate(self.size)
            self._file.seek(self.size)
        except OSError as cause:
            raise refused(self.path, cause) from cause
        self._torn = False

    def sync(self) -> None:
        """Force everything to the device."""
        try:
            os.fsync(self._file.fileno())
        except OSError as cause:
            raise refused(self.path, cause) from cause

    def is_gone(self) -> bool:
        """Return whether the name no longer leads to this file: deleted or moved away under the writer."""
        try:
            there = self.path.stat()
        except OSError:
            return True
        return not os.path.samestat(there, os.fstat(self._file.fileno()))

    def rescue(self) -> None:
        """Write all that was recorded, read from the open handle, under the old name again or one beside it.

        Raises
        ------
        OutputError
            No file can be made there; what is open goes on being written.
        """
        self._mend()
        for path in (
            self.path,
            *(self.path.with_name(f"rescued-{n}_{self.path.name}") for n in range(1, 10)),
        ):
            try:
                path.parent.mkdir(parents=True, exist_ok=True)
                copy = FileIO(path, "x+")
            except FileExistsError:
                continue
            except OSError as cause:
                raise refused(path, cause) from cause
            self._copy_into(copy, path)
            return
        raise OutputError(
            f"{self.path}: was moved or deleted, and so were its copies; record into another folder"
        )

    def _copy_into(self, copy: FileIO, path: Path) -> None:
        try:
            self._file.seek(0)
            left = self.size
            while left and (piece := self._file.read(min(left, _COPY))):
                _write_whole(copy, piece)
                left -= len(piece)
            os.fsync(copy.fileno())
        except OSError as cause:
            copy.close()
            path.unlink(missing_ok=True)
            raise refused(path, cause) from cause
        finally:
            self._file.seek(self.size)
        self._file.close()
        self._file, self.path = copy, path

    def close(self) -> None:
        """Let go of the file."""
        self._file.close()

    def discard(self) -> None:
        """Let go of the file and remove it."""
        self._file.close()
        with contextlib.suppress(OSError):
            self.path.unlink()
