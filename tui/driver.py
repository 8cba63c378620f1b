"""The screen library's way to a POSIX terminal, made to outlive trouble with the terminal.

As it comes, its output thread dies with the first failed write, and the application then waits for ever for room in
that thread's queue; so it does while a terminal takes nothing (a frozen window, a stopped output), and is then deaf to
keys and signals, SIGTERM too. Its input thread ends the application at a byte that is not UTF-8, such as an accented
letter of another locale. A SIGCONT that follows no SIGTSTP (the system sends one with the SIGHUP of a closed window)
starts its threads a second time and leaves one running for ever. A run must survive all of it. And where no SIGHUP
comes with the end of the window, since that was not the controlling terminal of the program, the input thread would
read nothing for ever, at the cost of a core.
"""

import os
import select
import termios
from collections.abc import Callable
from contextlib import suppress
from typing import Any

from textual.drivers.linux_driver import LinuxDriver

from eastfall.tui.patient import PatientWriter

_LOOK = 0.5
"""Seconds between two looks whether the terminal is still there."""
_GIVE_WAY = 0.3
"""Seconds that the last picture has to be taken before the terminal is given back without it."""
_CANCEL = "\x18"
"""Ends an escape sequence that was cut (ECMA-48, CAN)."""


class PatientDriver(LinuxDriver):
    """The stock driver over a patient writer, reading on after bytes that it cannot understand."""

    def __init__(self, *arguments: Any, **options: Any) -> None:
        super().__init__(*arguments, **options)
        self._terminal: Any = self._file
        self._out: PatientWriter | None = None
        self._giving_back = False
        self._hung_up = select.poll()
        self._hung_up.register(self.fileno, 0)  # what is asked for is nothing; a hang-up is told all the same
        self._loop.call_later(_LOOK, self._look)

    def _look(self) -> None:
        """End the application when its terminal is gone, as SIGHUP does."""
        if self._hung_up.poll(0):
            self._app.exit(0)
        else:
            self._loop.call_later(_LOOK, self._look)

    # Pictures that nobody takes are left out. They tell only what has changed: once they are taken again, the terminal
    # is set up anew and drawn whole.

    def write(self, data: str) -> None:
        """Write, or leave out."""
        if self._out is not None:
            coded = data.encode(self._terminal.encoding or "ascii", self._terminal.errors or "strict")
            self._out.write(coded)

    def start_application_mode(self) -> None:
        """Take the terminal."""
        self._giving_back = False
        self._out = PatientWriter(self._terminal.fileno(), through=lambda: self._soon(self._redraw))
        super().start_application_mode()  # type: ignore[no-untyped-call]  # the library's has no types

    def stop_application_mode(self) -> None:
        """Give the terminal back, and what waits to be drawn up."""
        self._giving_back = True
        if self._out is not None:
            cut = self._out.drop()
            if not self._out.drain(_GIVE_WAY):
                cut = True
                with suppress(
                    termios.error
                ):  # what lies between program and window makes room for the last words
                    termios.tcflush(self._terminal.fileno(), termios.TCOFLUSH)
            if cut:
                self.write(_CANCEL)
        super().stop_application_mode()

    def close(self) -> None:
        """Let go of the output; what it does not take now it may never."""
        super().close()
        if self._out is not None:
            self._out.drain()
            self._out.close()

    def _redraw(self) -> None:
        if not self._giving_back:
            self._retake()

    # A signal may come while the output is locked by the very thread that handles it: letting go of the terminal,
    # which writes, has to wait until the event loop comes round.

    def _sigtstp_application(self, *_: Any) -> None:
        self._soon(super()._sigtstp_application)

    def _sigcont_application(self, *_: Any) -> None:
        self._soon(self._retake)

    def _soon(self, action: Callable[[], None]) -> None:
        with suppress(RuntimeError):  # the loop is closed
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
