"""Faults of the feed made for real: cables pulled, ports busy, rubbish, servers that reset, clocks that step back."""

import os
import pty
import select
import signal
import socket
import struct
import subprocess
import sys
import threading
import time
import tracemalloc
from collections.abc import Callable, Iterator
from pathlib import Path

import numpy as np
import pytest

sys.path.insert(0, str(Path(__file__).parents[1] / "io"))

from live_help import LONG_ENOUGH, FedLink, HandClock, Openers, live_threads, site, until

from eastfall.io.checksum import with_checksum
from eastfall.io.errors import LinkError
from eastfall.io.reader import Backoff
from eastfall.io.run import LINK_LOST, Run, RunUpdate

TIMED = '[[link]]\nurl = "test"\ncolumns = ["time_s", "depth_m", "tilt_a_deg", "tilt_b_deg"]\n'
CHECKED = '[[link]]\nurl = "test"\nchecksum = "crc16-modbus"\n'


def wait_for(done: Callable[[], bool]) -> None:
    """Wait until something is so, within bounds."""
    deadline = time.monotonic() + LONG_ENOUGH
    while not done():
        assert time.monotonic() < deadline
        threading.Event().wait(0.005)


def good(begin: int, count: int) -> bytes:
    """Return good lines of a probe going down."""
    return b"".join(b"%.2f,0.010,-0.020\r\n" % (0.1 * i) for i in range(begin, begin + count))


def frames(count: int) -> Callable[[RunUpdate], bool]:
    """Return whether so many readings were used."""
    return lambda update: update.health.frames >= count


def lines(count: int) -> Callable[[RunUpdate], bool]:
    """Return whether so many lines came and were all taken."""
    return lambda update: update.health.links[0].lines >= count


@pytest.fixture(autouse=True)
def nothing_left() -> Iterator[None]:
    """Fail a test that leaves a thread or a descriptor."""
    descriptors = Path("/proc/self/fd")
    before = len(list(descriptors.iterdir())) if descriptors.is_dir() else 0
    yield
    assert live_threads() == []
    if before:
        assert len(list(descriptors.iterdir())) <= before


class Cable:
    """A serial device at a path that stays: a pseudo-terminal behind a symbolic link, pulled and put back."""

    def __init__(self, folder: Path) -> None:
        self.path = folder / "ttyProbe"
        self._ends: tuple[int, int] | None = None

    def plug(self) -> None:
        """Put a fresh pseudo-terminal behind the path."""
        self._ends = pty.openpty()
        os.set_blocking(self._ends[0], False)
        self.path.symlink_to(os.ttyname(self._ends[1]))

    def pull(self) -> None:
        """Take it away: the path is gone, and what holds the other end gets an error."""
        self.path.unlink()
        assert self._ends is not None
        for one in self._ends:
            os.close(one)
        self._ends = None

    def send(self, data: bytes) -> None:
        """Write all of it, as fast as the other end reads."""
        assert self._ends is not None
        while data:
            assert select.select([], [self._ends[0]], [], LONG_ENOUGH)[1]
            data = data[os.write(self._ends[0], data[:256]) :]


@pytest.fixture
def cable(tmp_path: Path) -> Iterator[Cable]:
    """Yield a plugged cable."""
    one = Cable(tmp_path)
    one.plug()
    yield one
    if one._ends is not None:
        one.pull()


def test_a_serial_line_pulled_in_the_middle_of_a_line_and_put_back_goes_on(cable: Cable) -> None:
    """What came before and after the break is used, the half line is counted, the loss is shown and then over."""
    with Run(site(), links=[str(cable.path)], log=None) as run:
        cable.send(good(0, 20) + b"7.7")
        until(run, lambda update: update.health.frames == 20 and run._readers[0]._splitter.pending == b"7.7")
        cable.pull()
        lost = until(run, lambda update: update.health.links[0].retry_in is not None)[-1]
        assert [one.name for one in lost.alarms] == [LINK_LOST]
        assert "lost" in lost.health.links[0].last_fault
        cable.plug()
        back = until(run, lambda update: update.health.links[0].state == "open")[-1]
        cable.send(good(20, 20))
        update = until(run, frames(40))[-1]
    assert back.time > lost.time
    assert dict(update.health.faults) == {"line cut short": 1}
    assert update.health.links[0].state == "open"


def test_a_port_that_another_program_holds_is_busy(cable: Cable) -> None:
    """A second run at the same port is refused in one line, and the first goes on."""
    with Run(site(), links=[str(cable.path)], log=None) as run:
        with pytest.raises(LinkError, match="busy: another program holds it; close that one first"):
            Run(site(), links=[str(cable.path)], log=None).start()
        cable.send(good(0, 5))
        until(run, frames(5))


def test_a_port_is_free_as_soon_as_the_run_has_stopped(cable: Cable) -> None:
    """Nothing comes that would wake the reader; stopping releases the port all the same, and the next run opens it."""
    for _ in range(3):
        run = Run(site(), links=[str(cable.path)], log=None)
        run.start()
        run.stop()
        wait_for(lambda: live_threads() == [])


@pytest.mark.skipif(os.name != "posix", reason="permissions of device files")
def test_a_port_without_permission_says_so(cable: Cable) -> None:
    """A user who may not open the device gets one line that says where to look, in a process of its own."""
    cable.path.resolve().chmod(0o600)
    script = (
        "import os, sys\n"
        "from eastfall.io.links import open_link\n"
        "from eastfall.io.sitefile import LinkSettings\n"
        "import serial, termios\n"
        "os.geteuid() or os.setuid(65534)\n"
        "open_link(LinkSettings(url=sys.argv[1]))\n"
    )
    device = str(cable.path.resolve()) if os.geteuid() == 0 else "/dev/console"
    done = subprocess.run(
        [sys.executable, "-c", script, device], capture_output=True, text=True, timeout=30, check=False
    )
    assert "permission denied; may this user read it?" in done.stderr.splitlines()[-1]


def test_the_rubbish_of_a_wrong_speed_is_counted_and_costs_no_good_line(cable: Cable) -> None:
    """Ten thousand random bytes before and between good lines: none of them a reading, all good lines used."""
    rubbish = np.random.default_rng(1).bytes(10_000)
    with Run(site(), links=[str(cable.path)], log=None) as run:
        cable.send(rubbish + b"\n" + good(0, 50) + rubbish + b"\n" + good(50, 50))
        update = until(run, lambda update: update.health.frames >= 100 and run._inbox.empty)[-1]
    ends = rubbish.replace(b"\r\n", b"\n").replace(b"\r", b"\n").split(b"\n")
    assert update.health.frames == 100
    assert update.health.rejected == 2 * sum(bool(one.strip(b" \t")) for one in ends)


def test_control_bytes_reach_the_counts_and_never_the_screen(cable: Cable) -> None:
    """NUL, escape sequences and bells are faults, quoted as visible escapes."""
    nasty = b"\x00\x00\n1.0,\x1b]0;title\x07,0.0\n\x9b2J\n"
    with Run(site(), links=[str(cable.path)], log=None) as run:
        cable.send(good(0, 2) + nasty + good(2, 2))
        update = until(run, frames(4))[-1]
    assert dict(update.health.faults) == {"not plain text": 3}
    assert update.health.links[0].last_fault.isprintable()


FEEDS: dict[str, tuple[bytes, dict[str, int], int]] = {
    "half lines": (good(0, 3) + b"1.0,0.0\n" + b"0.0\n" + good(3, 3), {"wrong number of fields": 2}, 6),
    "no line end": (good(0, 3) + b"7" * 5000 + b"\n" + good(3, 3), {"line too long": 1}, 6),
    "duplicated lines": (good(0, 3) * 2, {}, 6),
    "the same byte for ever": (b"U" * 100_000 + b"\n" + good(0, 3), {"line too long": 1}, 3),
    "lone carriage returns": (good(0, 6).replace(b"\r\n", b"\r"), {}, 6),
}


@pytest.mark.parametrize("name", FEEDS)
@pytest.mark.parametrize("piece", [1, 7, 100_000])
def test_damaged_feeds_are_counted_by_kind(name: str, piece: int) -> None:
    """Half, endless, repeated and oddly ended lines are counted for what they are, however the bytes come."""
    feed, faults, used = FEEDS[name]
    if piece == 1:
        feed = feed.replace(b"U" * 100_000, b"U" * 5000)
    link = FedLink(items=tuple(feed[i : i + piece] for i in range(0, len(feed), piece)))
    with Run(site(), log=None, opener=Openers(link)) as run:
        update = until(run, frames(used))[-1]
        assert (update.health.frames, dict(update.health.faults)) == (used, faults)


def most_held(path: Path, feed: bytes) -> tuple[RunUpdate, int]:
    """Return what comes of a run over a file, and the most memory that it held at a time [bytes]."""
    path.write_bytes(feed)
    tracemalloc.start()
    try:
        with Run(site(), links=[str(path)], log=None) as run:
            update = until(run, lambda _: run.ended)[-1]
        return update, tracemalloc.get_traced_memory()[1]
    finally:
        tracemalloc.stop()


def test_lines_of_a_megabyte_are_held_in_bounded_memory(tmp_path: Path) -> None:
    """Twenty lines of a megabyte and good lines between them: every good one is used, none of the others held."""
    path = tmp_path / "capture.txt"
    most_held(path, good(0, 20))  # whatever is loaded at a first run
    _, usual = most_held(path, good(0, 20))
    update, most = most_held(path, b"".join(b"9" * 1_000_000 + b"\n" + good(i, 1) for i in range(20)))
    assert (update.health.frames, dict(update.health.faults)) == (20, {"line too long": 20})
    assert most - usual < 1_000_000  # [bytes]


def test_a_storm_of_wrong_checksums_lets_the_right_ones_through() -> None:
    """Nineteen of twenty lines with a wrong checksum: all counted, every right one used."""
    rng = np.random.default_rng(4)
    feed, right = [], 0
    for number in range(2000):
        line = with_checksum("crc16-modbus", b"%.2f,0.010,-0.020" % (0.01 * number))
        if rng.random() < 0.95:
            line = line[:-1] + (b"0" if line[-1:] != b"0" else b"F")
        else:
            right += 1
        feed.append(line + b"\n")
    link = FedLink(items=(b"".join(feed),))
    with Run(site(CHECKED), log=None, opener=Openers(link)) as run:
        update = until(run, frames(right))[-1]
    assert dict(update.health.faults) == {"checksum wrong": 2000 - right}


def test_a_clock_stepped_back_and_lines_out_of_order_keep_time_from_falling() -> None:
    """Reordered lines keep the time ahead of them; a clock started anew goes on; both are counted and used."""
    feed = (
        b"10.0,1,0,0\n10.2,1.2,0,0\n10.1,1.1,0,0\n10.3,1.3,0,0\n"  # two changed places
        b"0.1,1.4,0,0\n0.2,1.5,0,0\n"  # the probe was started again
    )
    with Run(site(TIMED), log=None, opener=Openers(FedLink(items=(feed,)))) as run:
        updates = until(run, frames(6))
    times = np.concatenate([one.rows.column("time") for update in updates for one in update.findings])
    assert (np.diff(times) >= 0.0).all()
    assert times[-1] == pytest.approx(10.4)
    assert dict(updates[-1].health.faults) == {"clock stepped back": 1, "clock set back": 1}


def test_a_depth_counter_set_back_is_told_and_the_sum_goes_on() -> None:
    """The counter begins again at 0 in the middle of a shaft: an alarm, no reading lost, nothing summed across."""
    clock, link = HandClock(), FedLink()
    with Run(site(), log=None, clock=clock, opener=Openers(link)) as run:
        updates = []
        for number in range(60):  # 2 m/s, from 40 m on; after half of it 0 m is where 46 m was
            depth = 40.0 + 0.2 * number - (46.0 if number >= 30 else 0.0)
            link.put(b"%.2f,0.100,0.000\r\n" % depth)
            clock.time += 0.1
            updates += until(run, frames(number + 1))
    changes = [one for update in updates for part in update.findings for one in part.alarms]
    assert (changes[0].name, changes[0].new) == ("depth jump", "active")
    assert "from 45.80 m to 0.00 m" in changes[0].message
    north = np.concatenate([part.rows.column("measured_north") for one in updates for part in one.findings])
    # 58 steps of 0.2 m at 0.1 deg: all but the one across the jump.
    assert north[-1] == pytest.approx(58 * 0.2 * np.radians(0.1), rel=1e-5)
    assert (updates[-1].health.frames, dict(updates[-1].health.faults)) == (60, {})


def test_silence_is_an_alarm_by_the_clock_alone() -> None:
    """With no line at all the feed-silent alarm comes when its time is up, not before."""
    clock, link = HandClock(), FedLink(items=(good(0, 3),))
    with Run(site(), log=None, clock=clock, opener=Openers(link)) as run:
        until(run, frames(3))
        clock.time += 1.9
        assert run.step(0.0).alarms == ()
        clock.time += 0.2
        update = run.step(0.0)
        assert [one.name for one in update.alarms] == ["feed silent"]
        assert update.health.links[0].silent_for == pytest.approx(2.1)


def test_ten_times_the_normal_rate_loses_nothing(cable: Cable) -> None:
    """Two thousand lines sent as fast as the port takes them are all used."""
    with Run(site(), links=[str(cable.path)], log=None) as run:
        cable.send(good(0, 2000))
        update = until(run, frames(2000))[-1]
    assert update.health.links[0].queue_dropped == 0
    assert dict(update.health.faults) == {}


class Server:
    """A TCP device server on the loopback that is there, or not."""

    def __init__(self) -> None:
        self.peer: socket.socket | None = None
        self._listener: socket.socket | None = None
        self.port = 0
        self.rise()

    @property
    def url(self) -> str:
        """Return where it is."""
        return f"socket://127.0.0.1:{self.port}"

    def rise(self) -> None:
        """Listen, at the same port as before."""
        self._listener = socket.create_server(("127.0.0.1", self.port))
        self._listener.settimeout(LONG_ENOUGH)
        self.port = self._listener.getsockname()[1]

    def accept(self) -> socket.socket:
        """Return the next connection."""
        assert self._listener is not None
        self.peer, _ = self._listener.accept()
        return self.peer

    def reset(self) -> None:
        """Throw the connection away without a farewell."""
        assert self.peer is not None
        self.peer.setsockopt(socket.SOL_SOCKET, socket.SO_LINGER, struct.pack("ii", 1, 0))
        self.peer.close()

    def fall(self) -> None:
        """Be gone."""
        assert self._listener is not None
        self._listener.close()
        if self.peer is not None:
            self.peer.close()


@pytest.fixture
def server() -> Iterator[Server]:
    """Yield a server that listens."""
    one = Server()
    yield one
    one.fall()


def test_a_server_that_refuses_at_the_start_is_an_error(server: Server) -> None:
    """Nothing listens: one clear line before the run begins."""
    server.fall()
    with pytest.raises(LinkError, match="connection refused: nothing listens there"):
        Run(site(), links=[server.url], log=None).start()


def test_a_server_that_resets_in_the_middle_of_a_line_is_connected_again(server: Server) -> None:
    """The half line is a fault and not the start of the next one; what comes after is used."""
    with Run(site(), links=[server.url], log=None) as run:
        server.accept().sendall(good(0, 10) + b"51")
        until(run, frames(10))
        server.reset()
        until(run, lambda update: update.health.links[0].state == "lost")
        server.accept().sendall(b"2.30,0.010,-0.020\r\n" + good(10, 10))
        update = until(run, frames(21))[-1]
    assert dict(update.health.faults) == {"line cut short": 1}
    assert update.health.frames == 21


def test_a_server_that_is_gone_for_a_while_is_found_again(server: Server) -> None:
    """While nothing listens the pauses grow; when it is back, so is the feed."""
    with Run(site(), links=[server.url], log=None) as run:
        server.accept().sendall(good(0, 5))
        until(run, frames(5))
        server.fall()
        refused = until(run, lambda update: "connection refused" in update.health.links[0].last_fault)[-1]
        assert [one.name for one in refused.alarms] == [LINK_LOST]
        server.rise()
        server.accept().sendall(good(5, 5))
        update = until(run, frames(10))[-1]
    assert update.health.links[0].state == "open"


def test_a_slow_server_loses_nothing(server: Server) -> None:
    """Lines that come a few bytes at a time are whole in the end."""
    feed = good(0, 10)
    with Run(site(), links=[server.url], log=None) as run:
        peer = server.accept()
        peer.setsockopt(socket.IPPROTO_TCP, socket.TCP_NODELAY, 1)
        for begin in range(0, len(feed), 5):
            peer.sendall(feed[begin : begin + 5])
            run.step(0.001)
        update = until(run, frames(10))[-1]
    assert dict(update.health.faults) == {}


def test_a_run_that_waits_for_a_lost_server_does_not_wait_with_its_end(
    server: Server, monkeypatch: pytest.MonkeyPatch
) -> None:
    """Stopped in a pause before a retry that would outlast this test many times, it ends."""
    monkeypatch.setattr("eastfall.io.reader.Backoff", lambda: Backoff(first=100.0 * LONG_ENOUGH))
    run = Run(site(), links=[server.url], log=None)
    run.start()
    server.accept()
    server.fall()
    until(run, lambda update: update.health.links[0].retry_in is not None)
    run.stop()
    wait_for(lambda: live_threads() == [])


EMULATED = """
import os, pty, sys, tty
master, slave = pty.openpty()
tty.setraw(slave)
print(os.ttyname(slave), flush=True)
sys.stdin.readline()
bad = [b"", b"1,2", b"#,#,#", b"\\x00\\x1b[2J", b"1,91,0", b"nan,0,0"]
for number in range(100):
    os.write(master, b"%.2f,0.010,-0.020\\r\\n" % (0.1 * number))
    os.write(master, bad[number % len(bad)] + b"\\r\\n")
print("sent", flush=True)
sys.stdin.readline()
"""


def test_another_process_at_a_pseudo_terminal_no_good_line_lost_every_bad_one_counted() -> None:
    """A separate program sends a hundred good lines with a hundred broken ones between: each is where it belongs."""
    with subprocess.Popen(
        [sys.executable, "-c", EMULATED], stdin=subprocess.PIPE, stdout=subprocess.PIPE, text=True
    ) as other:
        assert other.stdin is not None
        assert other.stdout is not None
        path = other.stdout.readline().strip()
        with Run(site(), links=[path], log=None) as run:
            other.stdin.write("go\n")
            other.stdin.flush()
            until(run, lines(200))
            update = until(run, frames(100))[-1]
        other.send_signal(signal.SIGKILL)
    assert update.health.frames == 100
    assert update.health.rejected == sum(update.health.faults.values()) == 83
    assert dict(update.health.faults) == {
        "wrong number of fields": 17,
        "not a number": 33,
        "not plain text": 17,
        "tilt out of range": 16,
    }
