"""A TCP device server as a link; every other kind of link is in `io.links`."""

import errno
import os
import select
import socket
import time
from collections.abc import Callable
from typing import Any
from urllib.parse import urlsplit

from eastfall.io.errors import LinkError
from eastfall.io.linkerror import link_error
from eastfall.io.safetext import safe

CHUNK = 1 << 16
"""Bytes taken at a time."""
CONNECT_WITHIN = 5.0
"""Seconds that a device server may take to accept."""

Cancelled = Callable[[], bool]


class SocketLink:
    """A TCP device server; it is only listened to.

    pyserial's own `socket://` reads one byte at a time without waiting for more, 8 µs each, and when asked for more at
    once it throws away what it has when the server closes: so lines sent just before were lost.

    Parameters
    ----------
    url : str
        socket://host:port
    within : float
        Longest wait for the server to accept [s].
    cancelled : callable
        Asked while waiting; True gives up.
    """

    patient = False

    def __init__(
        self, url: str, *, within: float = CONNECT_WITHIN, cancelled: Cancelled = lambda: False
    ) -> None:
        self.name = url
        host, port = _address(url)
        try:
            self._socket = _connected(host, port, within, cancelled)
        except OSError as error:
            raise link_error(url, error) from error
        self._socket.setsockopt(socket.SOL_SOCKET, socket.SO_KEEPALIVE, 1)
        for option, seconds in (("TCP_KEEPIDLE", 10), ("TCP_KEEPINTVL", 5), ("TCP_KEEPCNT", 3)):
            if hasattr(socket, option):  # a server that lost its power sends no farewell: found out in 25 s
                self._socket.setsockopt(socket.IPPROTO_TCP, getattr(socket, option), seconds)

    def read(self, timeout: float) -> bytes | None:
        """Return what has come."""
        try:
            ready, _, _ = select.select([self._socket], [], [], timeout)
            if not ready:
                return b""
            data = self._socket.recv(CHUNK)
        except (OSError, ValueError) as error:
            raise LinkError(f"{self.name}: lost: {safe(str(error), 120)}") from error
        if not data:
            raise LinkError(f"{self.name}: lost: the device server closed the connection")
        return data

    def close(self) -> None:
        """Let go of the connection."""
        self._socket.close()


def _address(url: str) -> tuple[str, int]:
    try:
        parts = urlsplit(url)
        host, port = parts.hostname, parts.port
    except ValueError:
        host, port = None, None
    if not host or not port:
        raise LinkError(f"{safe(url, 80)}: no host and port in it; expected socket://host:port")
    return host, port


def _connected(host: str, port: int, within: float, cancelled: Cancelled) -> socket.socket:
    """Connect to the first address that accepts."""
    last: OSError = OSError(errno.EHOSTUNREACH, "no address")
    for family, kind, protocol, _, address in socket.getaddrinfo(host, port, type=socket.SOCK_STREAM):
        one = socket.socket(family, kind, protocol)
        try:
            _connect(one, address, within, cancelled)
        except OSError as error:
            one.close()
            last = error
        else:
            return one
    raise last


def _connect(one: socket.socket, address: Any, within: float, cancelled: Cancelled) -> None:
    """Connect without blocking for longer than a tenth of a second at a time."""
    one.setblocking(False)
    code = one.connect_ex(address)
    deadline = time.monotonic() + within
    while code in (errno.EINPROGRESS, errno.EWOULDBLOCK, errno.EALREADY):
        if cancelled():
            raise OSError(errno.ECANCELED, "given up")
        if time.monotonic() > deadline:
            raise OSError(errno.ETIMEDOUT, "no answer")
        _, writable, failed = select.select([], [one], [one], 0.1)
        if writable or failed:
            code = one.getsockopt(socket.SOL_SOCKET, socket.SO_ERROR)
    if code:
        raise OSError(code, os.strerror(code))
