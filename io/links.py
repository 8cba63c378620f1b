"""Where bytes come from: one interface over serial ports, TCP device servers, files, pipes and the emulator.

A URL picks one. Serial devices and the `rfc2217`, `loop` and `hwgrep` schemes are pyserial's; what to do when a link
is lost is for `io.reader`.
"""

import contextlib
import os
import re
import select
import stat
import sys
import threading
import time
from collections.abc import Callable, Iterator
from pathlib import Path
from typing import Any, Protocol

from eastfall.io.errors import LinkError, LogError
from eastfall.io.linkerror import link_error, lost_error
from eastfall.io.safetext import safe
from eastfall.io.sitefile import HAND, LinkSettings, SiteFile
from eastfall.io.sockets import CHUNK, Cancelled, SocketLink

__all__ = ["Cancelled", "FileLink", "Link", "SerialLink", "SocketLink", "StreamLink", "open_link"]

_LOG_BEGINS = b'{"eastfall":"run log"'
_BY_PYSERIAL = ("rfc2217", "loop", "hwgrep")
_HAS_SCHEME = re.compile(r"emulate:|[A-Za-z][A-Za-z0-9]+://")
_DEVICE = re.compile(r"/dev/|COM\d+\Z|\\\\\.\\", re.IGNORECASE)
_SCHEMES = "a serial device, COM port, socket://host:port, rfc2217://host:port, emulate:, hand:, - or a file"


class Link(Protocol):
    """A source of bytes; one thread reads and closes it."""

    @property
    def name(self) -> str:
        """What to call it: its URL."""
        ...

    def read(self, timeout: float) -> bytes | None:
        """Return what has come after at most `timeout` [s]: b"" for nothing yet, None for the end of the input.

        Raises
        ------
        LinkError
            The link is lost.
        """
        ...

    def close(self) -> None:
        """Let go of it; a second call does nothing."""
        ...


def open_link(
    settings: LinkSettings,
    site: SiteFile | None = None,
    index: int = 0,
    *,
    clock: Callable[[], float] = time.monotonic,
    cancelled: Cancelled = lambda: False,
) -> Link:
    """Open a link.

    Parameters
    ----------
    settings : LinkSettings
        Its URL says what it is.
    site : SiteFile, optional
        What an `emulate:` link emulates.
    index : int
        The link's place in the site file.
    clock : callable
        Monotonic time [s], for the emulator.
    cancelled : callable
        Asked now and then while a connection is being made; True gives up.

    Raises
    ------
    LinkError
        With the URL, what is wrong and what to do.
    """
    url = settings.url
    scheme = url.partition(":")[0].lower() if _HAS_SCHEME.match(url) else ""
    if url == "-":
        return StreamLink(sys.stdin.fileno(), "-")
    if url == HAND:
        return HandLink()
    if scheme == "emulate":
        from eastfall.io.emulator import emulated_link  # noqa: PLC0415 (the emulator only where it is used)

        if site is None:
            raise LinkError(f"{url}: there is no site to emulate; expected a site file")
        return emulated_link(url, site, index, clock)
    if scheme == "socket":
        return SocketLink(url, cancelled=cancelled)
    if scheme in _BY_PYSERIAL:
        return SerialLink(settings)
    if scheme:
        raise LinkError(f"{safe(url, 80)}: unknown kind of link; expected {_SCHEMES}")
    return _open_path(settings, index)


def _open_path(settings: LinkSettings, index: int) -> Link:
    """Open what a plain path names: a device, a pipe, a run log or a capture."""
    url = settings.url
    try:
        mode = Path(url).stat().st_mode
    except (OSError, ValueError) as error:
        if _DEVICE.match(url):
            return SerialLink(settings)
        raise link_error(url, error) from error
    if stat.S_ISREG(mode):
        return FileLink(url, index)
    if stat.S_ISFIFO(mode):
        return StreamLink(_opened(url, os.O_RDONLY), url, own=True)
    if stat.S_ISCHR(mode):
        return SerialLink(settings)
    raise LinkError(f"{safe(url, 80)}: neither a device nor a file; expected {_SCHEMES}")


def _opened(path: str, flags: int) -> int:
    try:
        return os.open(path, flags)
    except OSError as error:
        raise link_error(path, error) from error


class SerialLink:
    """A serial device, or what pyserial makes look like one; eight data bits, no parity, one stop bit.

    Parameters
    ----------
    settings : LinkSettings
        URL and speed.
    """

    patient = False

    def __init__(self, settings: LinkSettings) -> None:
        import serial  # noqa: PLC0415 (only where a port is opened)

        self.name = settings.url
        # What a driver raises at a port that vanished is not always an OSError.
        self._troubles: tuple[type[Exception], ...] = (
            OSError,
            ValueError,
            TypeError,
            AttributeError,
            *_terminal_errors(),
        )
        options: dict[str, Any] = {"baudrate": settings.baud, "timeout": 0.1}
        if os.name == "posix" and ("://" not in settings.url or settings.url.startswith("hwgrep:")):
            options["exclusive"] = True
        try:
            self._port: Any = serial.serial_for_url(settings.url, **options)
        except self._troubles as error:
            raise link_error(settings.url, error) from error

    def read(self, timeout: float) -> bytes | None:
        """Return what has come."""
        try:
            if self._port.timeout != timeout:
                self._port.timeout = timeout
            return bytes(self._port.read(min(max(1, self._port.in_waiting), CHUNK)))
        except self._troubles as error:
            raise lost_error(self.name, error) from error

    def close(self) -> None:
        """Let go of the port."""
        with contextlib.suppress(*self._troubles):
            self._port.close()


def _terminal_errors() -> tuple[type[Exception], ...]:
    """Return what `termios` raises, where there is one; it is no OSError."""
    try:
        import termios  # noqa: PLC0415 (POSIX only)
    except ImportError:
        return ()
    return (termios.error,)


class StreamLink:
    """Standard input or a named pipe; it ends where the writer ends it.

    Parameters
    ----------
    descriptor : int
        An open file descriptor.
    name : str
        What to call it.
    own : bool
        Whether closing the link closes the descriptor.
    """

    patient = True
    """Whoever writes can wait: nothing need be dropped when the program is busy."""

    def __init__(self, descriptor: int, name: str, *, own: bool = False) -> None:
        self.name = name
        self._descriptor = descriptor
        self._own = own

    def read(self, timeout: float) -> bytes | None:
        """Return what has come."""
        try:
            # Only sockets can be waited for on Windows: there a read of standard input waits as long as it takes.
            if os.name == "posix" and not select.select([self._descriptor], [], [], timeout)[0]:
                return b""
            return os.read(self._descriptor, CHUNK) or None
        except (OSError, ValueError) as error:
            raise lost_error(self.name, error) from error

    def close(self) -> None:
        """Let go of the descriptor."""
        if self._own:
            self._own = False
            os.close(self._descriptor)


class HandLink:
    """A link that nothing comes over: a person types what they read."""

    name = HAND
    patient = True

    def __init__(self) -> None:
        self._closed = threading.Event()

    def read(self, timeout: float) -> bytes | None:
        """Wait."""
        self._closed.wait(timeout)
        return b""

    def close(self) -> None:
        """End the waiting."""
        self._closed.set()


class FileLink:
    """A capture, or the raw lines of a run log, read as fast as they are wanted.

    The lines arrive now: their host times are those of this reading. `replay` keeps the recorded ones.

    Parameters
    ----------
    path : str
        The file.
    index : int
        Which link's lines to take from a run log.
    """

    patient = True

    def __init__(self, path: str, index: int = 0) -> None:
        self.name = path
        try:
            self._file = Path(path).open("rb")  # noqa: SIM115 (closed by `close`)
            begin = self._file.read(len(_LOG_BEGINS))
            self._file.seek(0)
        except (OSError, ValueError) as error:
            raise link_error(path, error) from error
        self._pieces = self._log_lines(index) if begin == _LOG_BEGINS else self._capture()

    def _capture(self) -> Iterator[bytes]:
        while data := self._file.read(CHUNK):
            yield data

    def _log_lines(self, index: int) -> Iterator[bytes]:
        from eastfall.io.arrivals import LineBlock  # noqa: PLC0415 (a run log as a link is rare)
        from eastfall.io.runlog import read_log  # noqa: PLC0415 (as above)

        with read_log(Path(self.name)) as log:
            for one in log:
                if isinstance(one, LineBlock) and one.link == index:
                    yield one.data

    def read(self, timeout: float) -> bytes | None:
        """Return the next piece at once."""
        del timeout
        try:
            return next(self._pieces, None)
        except (OSError, LogError) as error:
            raise lost_error(self.name, error) from error

    def close(self) -> None:
        """Let go of the file."""
        self._pieces = iter(())
        self._file.close()
