"""A program in a pseudo-terminal of a given size, its screen read back by an independent terminal emulator."""

import fcntl
import os
import pty
import select
import signal
import struct
import subprocess
import sys
import termios
import time
from collections.abc import Callable, Sequence
from typing import Self

import pyte

PATIENCE = 20.0
EASTFALL = (sys.executable, "-c", "from eastfall.tui.main import main; main()")


class Terminal:
    """Runs a command and shows what a person would see.

    Parameters
    ----------
    command : sequence of str
        Program and arguments.
    columns, rows : int
        Size in cells.
    environment : str
        Further variables; an empty value takes one away.
    """

    def __init__(self, command: Sequence[str], columns: int, rows: int, **environment: str) -> None:
        self.raw = bytearray()
        self._fed = 0
        self.screen = pyte.Screen(columns, rows)
        self._stream = pyte.ByteStream(self.screen)
        self._ours, theirs = pty.openpty()
        self._size(columns, rows)
        wanted = {"TERM": "xterm-256color", "COLORTERM": "truecolor", "NO_COLOR": ""} | environment
        kept = {name: value for name, value in (os.environ | wanted).items() if value}
        self.process = subprocess.Popen(
            list(command), stdin=theirs, stdout=theirs, stderr=theirs, env=kept, start_new_session=True
        )
        os.close(theirs)

    def _size(self, columns: int, rows: int) -> None:
        fcntl.ioctl(self._ours, termios.TIOCSWINSZ, struct.pack("HHHH", rows, columns, 0, 0))

    def resize(self, columns: int, rows: int) -> None:
        """Change the window."""
        self._size(columns, rows)
        _ = self.text  # what came so far belongs to the old size
        self.screen.resize(rows, columns)
        self.process.send_signal(signal.SIGWINCH)

    def press(self, keys: str) -> None:
        """Type."""
        os.write(self._ours, keys.encode())

    def read(self, seconds: float) -> int:
        """Take what comes within a time, and return how many bytes came."""
        ready, _, _ = select.select([self._ours], [], [], seconds)
        if not ready:
            return 0
        try:
            data = os.read(self._ours, 65536)
        except OSError:
            return 0
        self.raw += data
        return len(data)

    @property
    def text(self) -> str:
        """The screen as lines."""
        self._stream.feed(bytes(self.raw[self._fed :]))
        self._fed = len(self.raw)
        return "\n".join(line.rstrip() for line in self.screen.display)

    def wait(self, wanted: str | Callable[[str], bool], seconds: float = PATIENCE) -> str:
        """Return the screen as soon as it shows what is wanted."""
        test = (lambda text: wanted in text) if isinstance(wanted, str) else wanted
        end = time.monotonic() + seconds
        while time.monotonic() < end:
            if test(self.text):
                return self.text
            if not self.read(0.05) and self.process.poll() is not None and not self.read(0.05):
                break
        if test(self.text):
            return self.text
        raise AssertionError(f"{wanted} is not on the screen:\n{self.text}")

    def ended(self, seconds: float = PATIENCE) -> int:
        """Wait for the end of the program, reading on, and return its exit status."""
        end = time.monotonic() + seconds
        while self.process.poll() is None:
            assert time.monotonic() < end, f"still running:\n{self.text}"
            self.read(0.05)
        while self.read(0.05):
            pass
        return self.process.returncode

    def close(self) -> None:
        """End the program and let go of the terminal."""
        if self.process.poll() is None:
            self.process.kill()
            self.process.wait(PATIENCE)
        os.close(self._ours)

    def __enter__(self) -> Self:
        return self

    def __exit__(self, *_: object) -> None:
        self.close()
