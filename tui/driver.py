"""The screen library's way to a POSIX terminal, made to outlive trouble: a window that is gone, bytes that are no text.

As it comes, its output thread dies with the first failed write, and the application then waits for ever for room in
that thread's queue; its input thread ends the application at a byte that is not UTF-8, such as an accented letter of
another locale; and a SIGCONT that follows no SIGTSTP (the system sends one with the SIGHUP of a closed window) starts
its threads a second time and leaves one running for ever. A run must survive all three. And where no SIGHUP comes with
the end of the window, since that was not the controlling terminal of the program, the input thread would read nothing
for ever, at the cost of a core.
"""

import os
import select
from collections.abc import Callable
from contextlib import suppress
from typing import Any, TextIO

from textual.drivers.linux_driver import LinuxDriver

_LOOK = 0.5
"""Seconds between two looks whether the terminal is still there."""


class PatientFile:
    """A terminal's output that takes everything, also when there is no terminal any more.

    Parameters
    ----------
    file : TextIO
        Where it goes while it can.
    """

    def __init__(self, file: TextIO) -> None:
        self._file = file

    def write(self, text: str) -> int:
        """Write, or drop."""
        with suppress(OSError):
            self._file.write(text)
        return len(text)

    def flush(self) -> None:
        """Flush, or drop."""
        with suppress(OSError):
            self._file.flush()

    def fileno(self) -> int:
        """Return the file's own number."""
        return self._file.fileno()

    def isatty(self) -> bool:
        """Tell whether the file is a terminal."""
        return self._file.isatty()


class PatientDriver(LinuxDriver):
    """The stock driver over a patient file, reading on after bytes that it cannot understand."""

    def __init__(self, *arguments: Any, **options: Any) -> None:
        super().__init__(*arguments, **options)
        self._file: Any = PatientFile(self._file)
        self._hung_up = select.poll()
        self._hung_up.register(self.fileno, 0)  # what is asked for is nothing; a hang-up is told all the same
        self._loop.call_later(_LOOK, self._look)

    def _look(self) -> None:
        """End the application when its terminal is gone, as SIGHUP does."""
        if self._hung_up.poll(0):
            self._app.exit(0)
        else:
            self._loop.call_later(_LOOK, self._look)

    # A signal may come while the output queue is locked by the very thread that handles it: letting go of the
    # terminal, which writes, has to wait until the event loop comes round.

    def _sigtstp_application(self, *_: Any) -> None:
        self._soon(super()._sigtstp_application)

    def _sigcont_application(self, *_: Any) -> None:
        self._soon(self._retake)

    def _soon(self, action: Callable[[], None]) -> None:
        if not self._loop.is_closed():
            self._loop.call_soon_threadsafe(action)

    def _retake(self) -> None:
        """Take the terminal again after a stop; SIGSTOP gave no chance to let go of it before."""
        if not os.isatty(self.fileno):
            return
        if not self._must_signal_resume:
            self.suspend_application_mode()
            self._must_signal_resume = True
        super()._sigcont_application()

    def run_input_thread(self) -> None:
        """Read keys until told to stop; the bytes read with one that is no text are left out."""
        while not self.exit_event.is_set():
            try:
                super().run_input_thread()
            except UnicodeDecodeError:
                continue
            except OSError:  # no terminal to read from: what is to be done about it, SIGHUP says
                return
