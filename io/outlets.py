"""Where an emulated instrument's bytes come out: a pseudo-terminal or a TCP port; what is sent is up to `io.serve`.

An outlet never waits for a client: who does not read loses lines (pseudo-terminal) or the connection (TCP).
"""

import contextlib
import errno
import os
import select
import socket
import time
from collections.abc import Callable
from pathlib import Path
from typing import Protocol

from eastfall.io.errors import LinkError, OutputError

_SETTLE = 0.25
"""A client empties its buffer when it opens a device: what was sent before that would be lost [s]."""
_UNREAD = 1 << 16
"""What may wait for a client [bytes]."""

Clock = Callable[[], float]


class Outlet(Protocol):
    """Where the lines of one link go."""

    address: str
    """What a user gives to the program as the link's URL."""

    def heard(self) -> bool:
        """Look after the clients; return whether any is there to take lines."""
        ...

    def send(self, data: bytes) -> bool:
        """Hand a line to every client; return whether at least one took it."""
        ...

    def close(self) -> None:
        """Give the port back."""
        ...


class PtyOutlet:
    """One end of a pseudo-terminal; the other is a device that a program opens like a serial port.

    Parameters
    ----------
    link_path : Path, optional
        A name for the device, made as a symbolic link.
    clock : callable
        Monotonic time [s].

    Raises
    ------
    LinkError
        On a system without pseudo-terminals.
    OutputError
        If `link_path` stands already, or cannot be made.
    """

    def __init__(self, link_path: Path | None = None, clock: Clock = time.monotonic) -> None:
        self._clock = clock
        self._since: float | None = None
        self._pending = b""
        self._link_path = link_path
        self._master, device = _open_raw_pty()
        self.address = device
        if link_path is not None:
            try:
                _link(link_path, device)
            except OutputError:
                os.close(self._master)
                raise
            self.address = str(link_path)

    def heard(self) -> bool:
        """Return whether a program has had the device open for long enough to be listening."""
        if self._hung_up():
            self._since, self._pending = None, b""
            return False
        if self._since is None:
            self._since = self._clock()
        self._swallow()
        self._flush()
        return self._clock() - self._since >= _SETTLE

    def send(self, data: bytes) -> bool:
        """Send a line whole, or not at all where the reader has fallen too far behind."""
        if len(self._pending) + len(data) > _UNREAD:
            return False
        self._pending += data
        self._flush()
        return True

    def close(self) -> None:
        """Remove the name and close the device."""
        if self._link_path is not None:
            self._link_path.unlink(missing_ok=True)
        os.close(self._master)

    def _hung_up(self) -> bool:
        poll = select.poll()
        poll.register(self._master, 0)
        return any(what & select.POLLHUP for _, what in poll.poll(0))

    def _swallow(self) -> None:
        """Take what the program writes to the instrument, which has no use for it."""
        with contextlib.suppress(OSError):
            while os.read(self._master, 4096):
                pass

    def _flush(self) -> None:
        try:
            while self._pending:
                self._pending = self._pending[os.write(self._master, self._pending) :]
        except OSError as error:
            if error.errno not in (errno.EAGAIN, errno.EIO):
                raise


def _open_raw_pty() -> tuple[int, str]:
    """Open a pseudo-terminal that changes no byte; return the near end and the far end's path."""
    try:
        import tty  # noqa: PLC0415 (not on every system)
    except ImportError as error:
        raise LinkError("no pseudo-terminals on this system; expected --tcp") from error
    master, slave = os.openpty()
    tty.setraw(slave)
    device = os.ttyname(slave)
    os.close(slave)  # from now on the near end can tell whether a program has the far end open
    os.set_blocking(master, False)
    return master, device


def _link(path: Path, device: str) -> None:
    if path.is_symlink() and not path.exists():
        path.unlink()  # what an emulator that was killed left behind; it points nowhere
    try:
        path.symlink_to(device)
    except OSError as error:
        raise OutputError(f"{path}: {error.strerror or error}; expected a path that is free") from error


class TcpOutlet:
    """A listening TCP port with any number of clients.

    Parameters
    ----------
    host : str
        Address to listen on.
    port : int
        0 takes a free one.

    Raises
    ------
    LinkError
        If the address cannot be listened on.
    """

    def __init__(self, host: str = "127.0.0.1", port: int = 0) -> None:
        try:
            family = socket.getaddrinfo(host, port, type=socket.SOCK_STREAM)[0][0]
            self._listener = socket.create_server((host, port), family=family)
        except (OSError, OverflowError) as error:
            reason = getattr(error, "strerror", None) or error
            raise LinkError(
                f"{host}:{port}: {reason}; expected an address and port free to listen on"
            ) from error
        self._listener.setblocking(False)
        shown = f"[{host}]" if ":" in host else host
        self.address = f"socket://{shown}:{self._listener.getsockname()[1]}"
        self._clients: dict[socket.socket, bytes] = {}

    def heard(self) -> bool:
        """Take new clients, drop those that have gone, and return whether any is left."""
        with contextlib.suppress(OSError):
            while True:
                client, _ = self._listener.accept()
                client.setblocking(False)
                self._clients[client] = b""
        for client in list(self._clients):
            if self._gone(client):
                self._drop(client)
            else:
                self._flush(client)
        return bool(self._clients)

    def send(self, data: bytes) -> bool:
        """Send a line to every client; drop one that has left too much unread."""
        for client, pending in list(self._clients.items()):
            if len(pending) + len(data) > _UNREAD:
                self._drop(client)
            else:
                self._clients[client] = pending + data
                self._flush(client)
        return bool(self._clients)

    def close(self) -> None:
        """Drop all clients and release the port."""
        for client in list(self._clients):
            self._drop(client)
        self._listener.close()

    def _gone(self, client: socket.socket) -> bool:
        try:
            while client.recv(4096):
                pass
        except BlockingIOError:
            return False
        except OSError:
            return True
        return True

    def _flush(self, client: socket.socket) -> None:
        try:
            sent = client.send(self._clients[client]) if self._clients[client] else 0
            self._clients[client] = self._clients[client][sent:]
        except BlockingIOError:
            pass
        except OSError:
            self._drop(client)

    def _drop(self, client: socket.socket) -> None:
        del self._clients[client]
        client.close()
