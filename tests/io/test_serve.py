"""Serving the emulated instrument: what clients receive is what was emulated, and nothing is left behind."""

import io
import json
import os
import signal
import socket
import subprocess
import sys
import threading
import time
from collections.abc import Callable, Iterator
from contextlib import contextmanager
from dataclasses import replace
from pathlib import Path

import pytest
import serial

from eastfall.io.emulator import Emulator, demo_site
from eastfall.io.errors import LinkError, OutputError
from eastfall.io.outlets import PtyOutlet, TcpOutlet
from eastfall.io.serve import Server, serve_pty, serve_tcp
from eastfall.io.sitefile import LinkSettings

PATIENCE = 20.0
"""How long a condition may take on a busy machine [s]."""


def wait_for(condition: Callable[[], object]) -> None:
    """Wait for a condition, within bounds."""
    end = time.monotonic() + PATIENCE
    while not condition():
        assert time.monotonic() < end, "waited in vain"
        time.sleep(0.005)


@contextmanager
def serving(serve: Callable[..., None], emulator: Emulator, **options: object) -> Iterator[list[str]]:
    """Serve from another thread; yield the addresses that were printed."""
    stop, out = threading.Event(), io.StringIO()
    thread = threading.Thread(
        target=serve, args=(emulator,), kwargs={"stop": stop.is_set, "out": out, **options}
    )
    thread.start()
    try:
        wait_for(lambda: out.getvalue().count("\n") == emulator.links)
        yield out.getvalue().split()
    finally:
        stop.set()
        thread.join(PATIENCE)
        assert not thread.is_alive()


def connect(address: str) -> socket.socket:
    """Open a TCP client of a served address."""
    host, port = address.removeprefix("socket://").rsplit(":", 1)
    return socket.create_connection((host, int(port)), timeout=PATIENCE)


def read_lines(client: socket.socket, count: int) -> list[bytes]:
    """Read whole lines from a TCP client."""
    data = b""
    while data.count(b"\n") < count:
        more = client.recv(4096)
        assert more, "the server hung up"
        data += more
    return data.splitlines(keepends=True)[:count]


def test_a_serial_client_of_the_pseudo_terminal_gets_every_byte_from_the_start(tmp_path: Path) -> None:
    """Opened late through its symbolic link, the device gives the emulator's lines, broken bytes untouched."""
    name, report = tmp_path / "instrument", tmp_path / "report.json"
    expected = Emulator(demo_site(), rate=100.0, broken=0.3, until=1.0)
    wanted = b"".join(data for _, data in expected.lines(0, 1.0))
    with serving(
        serve_pty, Emulator(demo_site(), rate=100.0, broken=0.3, until=1.0), link_path=name, report=report
    ) as addresses:
        assert addresses == [str(name)]
        with serial.Serial(addresses[0], timeout=0.1) as port:
            got = b""
            end = time.monotonic() + PATIENCE
            while len(got) < len(wanted) and time.monotonic() < end:
                got += port.read(4096)
    assert got == wanted
    assert not name.is_symlink()
    said = json.loads(report.read_text())
    counts = expected.counts(0)
    assert said["links"] == [
        {
            "address": str(name),
            "good": counts.pop("good"),
            "broken": dict(sorted(counts.items())),
            "unheard": 0,
        }
    ]
    assert said["truth"]["lean_east"] == expected.truth.lean_east


def test_two_tcp_clients_hear_the_same_live_stream_and_a_third_after_them_goes_on() -> None:
    """Clients at once get the same lines, one that comes later gets what is live then, and gone ones hurt nobody."""
    with serving(serve_tcp, Emulator(demo_site(), rate=200.0)) as (address,):
        assert address.startswith("socket://127.0.0.1:")
        with connect(address) as one:
            first = read_lines(one, 20)
            with connect(address) as other:
                later = read_lines(other, 40)
                assert len(read_lines(one, 20)) == 20
        with connect(address) as third:
            last = read_lines(third, 5)
    emulated = [data for _, data in Emulator(demo_site(), rate=200.0).lines(0, PATIENCE)]
    assert first == emulated[:20]
    at = emulated.index(later[0])
    assert later == emulated[at : at + 40]
    assert at > 0
    assert emulated.index(last[-1]) > at + 40


def test_every_link_of_a_site_has_an_outlet_of_its_own(tmp_path: Path) -> None:
    """Two links are two devices, the second named by .1, on one time axis and with their own columns."""
    site = demo_site()
    depth, tilt = (replace(site.links[0], columns=("time_s", one)) for one in ("depth_m", "tilt_a_deg"))
    emulator = Emulator(replace(site, links=(depth, tilt)), rate=50.0, until=1.0)
    with serving(serve_pty, emulator, link_path=tmp_path / "port") as addresses:
        assert addresses == [str(tmp_path / "port"), str(tmp_path / "port.1")]
        with (
            serial.Serial(addresses[0], timeout=5) as first,
            serial.Serial(addresses[1], timeout=5) as second,
        ):
            depths, tilts = [first.readline() for _ in range(40)], [second.readline() for _ in range(40)]
    assert len({line.split(b",")[0] for line in (*depths[-20:], *tilts[-20:])}) <= 21
    assert depths[-1].split(b",")[1] != tilts[-1].split(b",")[1]


class Ear:
    """An outlet that hears when told to."""

    address = "nowhere"

    def __init__(self) -> None:
        self.open = False
        self.got: list[bytes] = []

    def heard(self) -> bool:
        """Return whether anyone is there."""
        return self.open

    def send(self, data: bytes) -> bool:
        """Take a line."""
        self.got.append(data)
        return True

    def close(self) -> None:
        """Do nothing."""


def test_the_journey_waits_for_the_first_client_and_then_for_nobody() -> None:
    """Simulated time starts with the first client; lines that nobody hears later are counted and gone."""
    now, ear = [50.0], Ear()
    emulator = Emulator(demo_site(), rate=10.0)
    server = Server(emulator, [ear], pace=2.0, clock=lambda: now[0])
    for _ in range(5):
        now[0] += 1.0
        assert server.step() > 0.0
    assert emulator.counts(0)["good"] == 0
    ear.open = True
    server.step()
    for ear.open in (True, False, True):
        now[0] += 1.0
        server.step()
    assert [line.split(b",")[0] for line in ear.got] == [
        b"%.3f" % (k / 10) for k in (*range(20), *range(40, 60))
    ]
    assert server.unheard == [20]
    assert server.sent[0]["good"] == 40


def test_the_server_sleeps_no_longer_than_to_the_next_line_and_no_longer_than_a_tick() -> None:
    """Lines leave when they are due, to the precision of the sleep, and a signal is never waited on for long."""
    now, ear = [0.0], Ear()
    ear.open = True
    server = Server(Emulator(demo_site(), rate=100.0), [ear], clock=lambda: now[0])
    server.step()
    now[0] = 0.0075
    assert server.step() == pytest.approx(0.0025)
    slow = Server(Emulator(demo_site(), rate=0.1), [ear], clock=lambda: now[0])
    slow.step()
    assert slow.step() <= 0.05


def test_a_tcp_client_that_does_not_read_is_dropped_and_not_waited_for() -> None:
    """Sending goes on without blocking until the unread bytes outgrow the bound; then the client is gone."""
    outlet = TcpOutlet()
    with connect(outlet.address):
        wait_for(outlet.heard)
        began = time.monotonic()
        sent = 0
        while outlet.send(b"x" * 8191 + b"\n"):
            sent += 8192
            assert sent < 1 << 26, "64 MB went to a client that reads nothing"
        assert time.monotonic() - began < PATIENCE / 2
        assert not outlet.heard()
    outlet.close()


def test_a_pseudo_terminal_that_is_not_read_loses_whole_lines_only() -> None:
    """Without a reader sending goes on without blocking; what arrives when it reads again is whole lines."""
    outlet = PtyOutlet()
    port = os.open(outlet.address, os.O_RDWR | os.O_NOCTTY | os.O_NONBLOCK)
    wait_for(outlet.heard)
    line = b"0123456789" * 10 + b"\n"
    taken = sum(outlet.send(line) for _ in range(3000))
    assert 0 < taken < 3000
    data = b""
    while len(data) < taken * len(line):
        outlet.heard()
        data += os.read(port, 4096)
    assert data == line * taken
    os.close(port)
    wait_for(lambda: not outlet.heard())
    outlet.close()


def test_what_a_client_writes_to_the_instrument_is_swallowed() -> None:
    """A program that polls its instrument neither blocks it nor gets its own bytes back."""
    outlet = PtyOutlet()
    with serial.Serial(outlet.address, timeout=0.2) as port:
        for _ in range(20):
            port.write(b"?" * 1000)
            outlet.heard()
        wait_for(outlet.heard)
        outlet.send(b"1.0\n")
        assert port.read(100) == b"1.0\n"
    outlet.close()


SCRIPT = """
import sys
from pathlib import Path
from eastfall.io.emulator import Emulator, demo_site
from eastfall.io.serve import serve_pty, serve_tcp
emulator = Emulator(demo_site("guided"), rate=100.0, broken=0.2)
report = Path(sys.argv[2])
serve_tcp(emulator, report=report) if sys.argv[1] == "tcp" else serve_pty(emulator, report=report)
"""


@pytest.mark.parametrize(("way", "number"), [("tcp", signal.SIGINT), ("pty", signal.SIGTERM)])
def test_a_signal_ends_the_server_and_frees_the_port(
    way: str, number: signal.Signals, tmp_path: Path
) -> None:
    """In a process of its own, with a client listening, either signal ends it with status 0 and its report written."""
    report = tmp_path / "report.json"
    command = [sys.executable, "-c", SCRIPT, way, str(report)]
    with subprocess.Popen(command, stdout=subprocess.PIPE, stderr=subprocess.PIPE, text=True) as process:
        assert process.stdout is not None
        address = process.stdout.readline().strip()
        try:
            with serial.serial_for_url(address, timeout=PATIENCE) as port:
                heard = [port.readline() for _ in range(30)]
                process.send_signal(number)
                status = process.wait(PATIENCE)  # the feed itself would last for minutes
        finally:
            process.kill()
        rest = process.communicate(timeout=PATIENCE)
    assert (status, *rest) == (0, "", "")
    said = json.loads(report.read_text())["links"][0]
    assert said["good"] + sum(said["broken"].values()) >= len(heard)
    if way == "tcp":
        # At once, and on the same port: nothing is left listening there.
        TcpOutlet(port=int(address.rsplit(":", 1)[1])).close()


def test_busy_ports_and_taken_names_are_refused_in_one_line(tmp_path: Path) -> None:
    """Nothing that stands is replaced, and each message says what it is about."""
    emulator, taken = Emulator(demo_site()), tmp_path / "taken"
    taken.write_text("mine")
    busy = TcpOutlet()
    port = int(busy.address.rsplit(":", 1)[1])
    with pytest.raises(LinkError, match=f"127.0.0.1:{port}: Address already in use"):
        serve_tcp(emulator, port=port, stop=lambda: True)
    busy.close()
    with pytest.raises(OutputError, match="taken: File exists; expected a path that is free"):
        serve_pty(emulator, link_path=taken, stop=lambda: True)
    with pytest.raises(OutputError, match="taken: File exists; expected a path that is free"):
        serve_tcp(emulator, report=taken, stop=lambda: True)
    with pytest.raises(LinkError, match="pace is 3; expected 1"):
        serve_tcp(Emulator(replace(demo_site(), links=(LinkSettings(url="x"),))), pace=3.0, stop=lambda: True)
    assert taken.read_text() == "mine"


def test_a_name_left_by_a_killed_server_is_taken_over(
    tmp_path: Path, capsys: pytest.CaptureFixture[str]
) -> None:
    """A symbolic link that points nowhere is replaced; standard output names it; it is gone at the end."""
    name = tmp_path / "port"
    name.symlink_to("/dev/pts/999999")
    serve_pty(Emulator(demo_site()), link_path=name, stop=lambda: True)
    assert capsys.readouterr().out == f"{name}\n"
    assert not name.is_symlink()
