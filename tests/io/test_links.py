"""Opening links: what a URL opens, and the one clear line for each that cannot be opened."""

import os
import pty
import re
import socket
import stat
from collections.abc import Iterator
from contextlib import closing
from pathlib import Path

import pytest
from live_help import site
from record_help import written

from eastfall.io.errors import LinkError
from eastfall.io.links import FileLink, Link, SerialLink, StreamLink, open_link
from eastfall.io.sitefile import LinkSettings
from eastfall.io.sockets import SocketLink


def opened(url: str, **more: object) -> Link:
    """Open a URL with the default settings."""
    return open_link(LinkSettings(url=url), site(), **more)  # type: ignore[arg-type]


def everything(link: Link, wanted: int) -> bytes:
    """Read until `wanted` bytes have come, or the end."""
    got = b""
    for _ in range(200):
        data = link.read(0.05) if len(got) < wanted else None
        if data is None:
            return got
        got += data
    raise AssertionError(f"{len(got)} bytes of {wanted}")


@pytest.fixture
def terminal() -> Iterator[tuple[int, str]]:
    """Yield the master's descriptor and the slave's path of a fresh pseudo-terminal."""
    master, slave = pty.openpty()
    yield master, os.ttyname(slave)
    os.close(master)
    os.close(slave)


@pytest.fixture
def server() -> Iterator[socket.socket]:
    """Yield a listening socket on the loopback."""
    with socket.create_server(("127.0.0.1", 0)) as one:
        yield one


def test_a_device_path_opens_a_serial_link(terminal: tuple[int, str]) -> None:
    """Bytes of a pseudo-terminal come out as they went in, control bytes too."""
    master, path = terminal
    with closing(opened(path)) as link:
        assert isinstance(link, SerialLink)
        assert link.read(0.01) == b""
        os.write(master, b"1,2\x00\xff\x1b\r\n")
        assert everything(link, 8) == b"1,2\x00\xff\x1b\r\n"


def test_a_device_that_is_in_use_is_busy(terminal: tuple[int, str]) -> None:
    """A second program at the same port gets one clear line, and the first keeps it."""
    _, path = terminal
    with closing(opened(path)), pytest.raises(LinkError, match=f"{path}: busy: another program holds it"):
        opened(path)


def test_a_device_that_is_unplugged_says_so_in_plain_words() -> None:
    """The far end of the line goes: one short line without the serial library's own wording."""
    master, slave = pty.openpty()
    path = os.ttyname(slave)
    with closing(opened(path)) as link:
        os.close(slave)
        os.close(master)
        with pytest.raises(LinkError) as lost:
            everything(link, 1)
    assert str(lost.value) == f"{path}: lost: unplugged, or another program reads it"


def test_a_socket_url_reads_a_device_server(server: socket.socket) -> None:
    """All that a server sends comes out, also what it sent right before it closed."""
    port = server.getsockname()[1]
    with closing(opened(f"socket://127.0.0.1:{port}")) as link:
        assert isinstance(link, SocketLink)
        peer, _ = server.accept()
        assert link.read(0.01) == b""
        peer.sendall(b"x" * 200_000)
        peer.close()
        assert everything(link, 200_000) == b"x" * 200_000
        with pytest.raises(LinkError, match="lost: the device server closed the connection"):
            link.read(0.1)


def test_a_connection_is_given_up_when_asked() -> None:
    """While an address does not answer, stopping does not wait for it."""
    with socket.socket() as silent:
        silent.bind(("127.0.0.1", 0))
        silent.listen(0)
        address = silent.getsockname()
        crowd = [socket.socket() for _ in range(3)]  # fills the queue, so that the next connection hangs
        for one in crowd:
            one.setblocking(False)
            one.connect_ex(address)
        with pytest.raises(LinkError):
            SocketLink(f"socket://127.0.0.1:{address[1]}", within=5.0, cancelled=lambda: True)
        for one in crowd:
            one.close()


def test_a_server_that_does_not_answer_times_out() -> None:
    """The wait for a connection is bounded, and the line says what to look at."""
    with socket.socket() as silent:
        silent.bind(("127.0.0.1", 0))
        silent.listen(0)
        address = silent.getsockname()
        crowd = [socket.socket() for _ in range(3)]
        for one in crowd:
            one.setblocking(False)
            one.connect_ex(address)
        with pytest.raises(LinkError, match="no answer; is the device server on"):
            SocketLink(f"socket://127.0.0.1:{address[1]}", within=0.2)
        for one in crowd:
            one.close()


def test_loop_is_pyserials() -> None:
    """The loop:// handler opens and is silent."""
    with closing(opened("loop://")) as link:
        assert isinstance(link, SerialLink)
        assert link.read(0.01) == b""


def test_a_capture_is_read_to_its_end(tmp_path: Path) -> None:
    """A file gives its bytes and then its end."""
    path = tmp_path / "capture.txt"
    path.write_bytes(b"1,2,3\n" * 50_000)
    with closing(opened(str(path))) as link:
        assert isinstance(link, FileLink)
        assert everything(link, 1 << 30) == b"1,2,3\n" * 50_000
        assert link.read(0.0) is None


def test_a_run_log_gives_its_raw_lines(tmp_path: Path) -> None:
    """Of a run log the lines of the link come, and no record around them."""
    with closing(opened(str(written(tmp_path)))) as link:
        data = everything(link, 1 << 30)
    assert data.count(b"\n") == 120
    assert data.startswith(b"0.00,0.000,-0.010\n")


def test_a_named_pipe_ends_with_its_writer(tmp_path: Path) -> None:
    """A pipe gives what is written and ends when the writer closes it; it is patient, so nothing is dropped."""
    path = tmp_path / "pipe"
    os.mkfifo(path)
    writer = os.open(path, os.O_RDWR)
    with closing(opened(str(path))) as link:
        assert isinstance(link, StreamLink)
        assert link.patient
        os.write(writer, b"1,2\n")
        assert link.read(1.0) == b"1,2\n"
        assert link.read(0.01) == b""
        os.close(writer)
        assert link.read(1.0) is None


def test_emulate_opens_the_emulator() -> None:
    """An emulate: URL needs no port."""
    with closing(opened("emulate:?rate=10&seed=1")) as link:
        assert link.read(0.5) is not None


NOT_THERE = "/dev/eastfall-no-such-port"


@pytest.mark.parametrize(
    ("url", "words"),
    [
        (NOT_THERE, f"{NOT_THERE}: no such device or file; `eastfall ports` lists"),
        ("COM77", "COM77: no such device"),
        ("no/such/capture.txt", "no/such/capture.txt: no such device or file"),
        ("/", "/: neither a device nor a file"),
        ("socket://", "no host and port in it; expected socket://host:port"),
        ("socket://host:99999999", "no host and port in it"),
        ("socket://[::1", "no host and port in it"),
        ("socket://eastfall.invalid:4001", "the host's name cannot be resolved"),
        ("rfc2217://", "cannot be opened|no host"),
        ("spy://loop://", "unknown kind of link; expected a serial device"),
        ("http://127.0.0.1/", "unknown kind of link"),
        ("emulate:?speed=fast", "unknown option 'speed'"),
        ("bad\x00name", r"bad\\x00name: "),
        ("esc\x1b[2Jape", r"esc\\x1b\[2Jape: no such device"),
    ],
)
def test_what_cannot_be_opened_says_so_in_one_line(url: str, words: str) -> None:
    """The line names the link, what is wrong and what was expected, and holds no control character."""
    with pytest.raises(LinkError, match=words) as caught:
        opened(url)
    assert str(caught.value).isprintable()
    assert not re.search(r"Errno|Traceback", str(caught.value))


def test_a_refused_connection_says_what_to_look_at(server: socket.socket) -> None:
    """Nothing listens: connection refused."""
    port = server.getsockname()[1]
    server.close()
    for scheme in ("socket", "rfc2217"):
        with pytest.raises(LinkError, match="connection refused: nothing listens there"):
            opened(f"{scheme}://127.0.0.1:{port}")


@pytest.mark.skipif(os.geteuid() == 0, reason="root may read everything")
def test_a_file_without_permission_says_so(tmp_path: Path) -> None:
    """Permission denied, and where to look."""
    path = tmp_path / "capture.txt"
    path.touch(mode=0)
    with pytest.raises(LinkError, match="permission denied; may this user read it"):
        opened(str(path))


def test_permission_denied_is_told_from_the_error(monkeypatch: pytest.MonkeyPatch, tmp_path: Path) -> None:
    """An EACCES of the system call becomes the clear line, for a port and for a file alike."""
    path = tmp_path / "capture.txt"
    path.touch()

    def refuse(*_args: object, **_more: object) -> int:
        raise PermissionError(13, "Permission denied", str(path))

    monkeypatch.setattr(Path, "open", refuse)
    with pytest.raises(LinkError, match="permission denied; may this user read it"):
        opened(str(path))
    monkeypatch.setattr(os, "open", refuse)
    monkeypatch.setattr(Path, "stat", lambda _self: os.stat_result((stat.S_IFCHR, *[0] * 9)))
    with pytest.raises(LinkError, match="permission denied; may this user read it"):
        opened("/dev/ttyUSB7")


def test_an_emulated_link_needs_a_site() -> None:
    """Without a site there is nothing to emulate."""
    with pytest.raises(LinkError, match="no site to emulate"):
        open_link(LinkSettings(url="emulate:"))
