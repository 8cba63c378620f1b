"""Writing to a terminal or pipe that may stop taking anything: who writes waits for a moment at most, never for ever.

A terminal takes nothing while its window is frozen, its output stopped or its line down; a pipe, while its reader is
busy. A plain write waits as long as that lasts, and with it whatever else its thread does: recording, heeding signals.
"""

import os
import threading
import time
from collections import deque
from collections.abc import Callable
from contextlib import suppress
from typing import TextIO

from eastfall.io.safetext import safe
from eastfall.tui.letters import in_ascii
from eastfall.tui.saying import plain

HOLD = 1.0
"""Seconds without a byte taken after which nobody waits any more."""
ROOM = 4096
"""Bytes that may wait before who writes has to."""
_PIECE = 128
"""Bytes written in one go: within `HOLD` a line of 1200 baud takes so many."""


class PatientWriter:
    """Writes to a descriptor in a thread of its own.

    Parameters
    ----------
    descriptor : int
        Where to; it stays open.
    room : int
        Bytes that may wait.
    hold : float
        How long a write waits for room while nothing is taken [s]; after that it is left out, whole.
    through : callable, optional
        Called in the writing thread when something was left out and all the rest has been taken since.

    Attributes
    ----------
    error : OSError or None
        Why nothing can be written any more: all is left out from then on.
    """

    def __init__(
        self,
        descriptor: int,
        *,
        room: int = ROOM,
        hold: float = HOLD,
        through: Callable[[], None] = lambda: None,
    ) -> None:
        self.error: OSError | None = None
        self._descriptor = descriptor
        self._room = room
        self._hold = hold
        self._through = through
        self._pieces: deque[bytes] = deque()
        self._waiting = 0
        """Bytes in `_pieces`."""
        self._under_way = 0
        """Bytes of the piece that is being written."""
        self._moved = time.monotonic()
        """When a piece was taken last, or the first one came after a rest."""
        self._gap = False
        self._over = False
        self._changed = threading.Condition()
        # A daemon: when the program ends it may still wait for a terminal that takes nothing.
        threading.Thread(target=self._run, name="eastfall output", daemon=True).start()

    def write(self, data: bytes, *, always: bool = False) -> bool:
        """Write; return False for what is left out: nothing is taken, or what waits from before a gap is not through.

        Parameters
        ----------
        data : bytes
            What belongs together.
        always : bool
            Put it behind what waits, however much that is.
        """
        with self._changed:
            while not always and not self._gap and self._full() and self._wait(self._hold):
                pass
            if self._over or self.error or (not always and (self._full() or (self._gap and self._pending()))):
                self._gap = True
                return False
            if not self._pending():
                self._moved = time.monotonic()
            self._pieces.extend(data[i : i + _PIECE] for i in range(0, len(data), _PIECE))
            self._waiting += len(data)
            self._changed.notify_all()
            return True

    def drop(self) -> bool:
        """Leave out what waits, a text half written too; return whether there was any."""
        with self._changed:
            some = bool(self._pieces)
            self._pieces.clear()
            self._waiting = 0
            self._gap = False
            return some

    def drain(self, patience: float = HOLD) -> bool:
        """Wait until all is written; give up, and return False, when nothing is taken for `patience` [s]."""
        with self._changed:
            while self._pending() and self._wait(patience):
                pass
            return not self._pending()

    def close(self) -> None:
        """Let the thread end once it has written what waits."""
        with self._changed:
            self._over = True
            self._changed.notify_all()

    def _pending(self) -> int:
        return self._waiting + self._under_way

    def _full(self) -> bool:
        return self._pending() >= self._room

    def _wait(self, patience: float) -> bool:
        """Wait for a change; return False without one in sight: an error, or nothing taken for so long."""
        left = self._moved + patience - time.monotonic()
        if self.error or left <= 0.0:
            return False
        self._changed.wait(min(left, threading.TIMEOUT_MAX))
        return True

    def _run(self) -> None:
        while piece := self._next():
            try:
                while piece:
                    piece = piece[os.write(self._descriptor, piece) :]
            except OSError as error:
                self._failed(error)
                return
            if self._taken():
                self._through()

    def _next(self) -> bytes:
        """Return the next piece as soon as there is one; none after the end."""
        with self._changed:
            while not self._pieces and not self._over:
                self._changed.wait()
            piece = self._pieces.popleft() if self._pieces else b""
            self._waiting -= len(piece)
            self._under_way = len(piece)
            return piece

    def _taken(self) -> bool:
        """Note that a piece was taken; return whether that ended a gap."""
        with self._changed:
            self._under_way = 0
            self._moved = time.monotonic()
            through = self._gap and not self._pieces
            self._gap = self._gap and not through
            self._changed.notify_all()
            return through

    def _failed(self, error: OSError) -> None:
        with self._changed:
            self.error = error
            self._pieces.clear()
            self._waiting = self._under_way = 0
            self._changed.notify_all()


class PatientLines:
    """Lines of text to standard output or error; while nobody takes them they are left out, and that is told later.

    Parameters
    ----------
    file : TextIO
        Where to. One without a descriptor, or of Windows, whose consoles have their own way, is written as it is.
    """

    def __init__(self, file: TextIO) -> None:
        file.flush()
        self._file = file
        self._plain = plain(file)
        self._writer: PatientWriter | None = None
        if os.name == "posix":
            with suppress(OSError):
                self._writer = PatientWriter(file.fileno(), hold=0.0)
        self._left_out = 0
        self._keep = False

    @property
    def error(self) -> OSError | None:
        """Why nothing can be written any more."""
        return self._writer.error if self._writer is not None else None

    def keep_all(self) -> None:
        """Leave out no more: these are the last lines."""
        self._keep = True

    def line(self, text: str) -> None:
        """Write a line for a person."""
        gap = f"({self._left_out} lines left out: nobody took them)\n" if self._left_out else ""
        words = f"{gap}{in_ascii(safe(text)) if self._plain else safe(text)}\n"
        if self._put(
            words.encode(self._file.encoding or "ascii", self._file.errors or "strict"), always=self._keep
        ):
            self._left_out = 0
        else:
            self._left_out += 1

    def path(self, path: str) -> None:
        """Write the path of a file as it is, for another program or a shell to take up; it is never left out."""
        self._put(os.fsencode(path) + b"\n", always=True)

    def _put(self, data: bytes, *, always: bool) -> bool:
        if self._writer is not None:
            return self._writer.write(data, always=always)
        self._file.write(data.decode(self._file.encoding or "ascii", "replace"))
        self._file.flush()
        return True

    def end(self, patience: float = HOLD) -> None:
        """Wait until all is written; give up when nothing is taken for `patience` [s].

        Raises
        ------
        OSError
            Something could not be written.
        """
        if self._writer is None:
            return
        self._writer.drain(patience)
        self._writer.close()
        if self._writer.error is not None:
            raise self._writer.error
