"""Listening to a port for a while: over loopback, a pseudo-terminal and a file; let go of at once, nothing written."""

import os
import socket
import threading
import time
from collections.abc import Callable, Iterator
from pathlib import Path

import pytest

from eastfall.io.checksum import with_checksum
from eastfall.io.emulator import demo_site
from eastfall.io.sitefile import LinkSettings
from eastfall.io.trial import KEPT, POLL, RELEASED_IN, Heard, LineReader, Trial
from eastfall.physics.errors import ParameterError

pytestmark = pytest.mark.invariant
PATIENCE = 10.0


def wait(trial: Trial, wanted: Callable[[Heard], bool]) -> Heard:
    """Return what was heard as soon as it is what is wanted."""
    end = time.monotonic() + PATIENCE
    while not wanted(heard := trial.heard()):
        assert time.monotonic() < end, heard
        threading.Event().wait(0.01)
    return heard


@pytest.fixture(autouse=True)
def busy_machine(monkeypatch: pytest.MonkeyPatch) -> None:
    """Give a stop the time that a busy machine takes; what it waits for by itself is shorter than it says."""
    assert POLL < RELEASED_IN
    monkeypatch.setattr("eastfall.io.trial.RELEASED_IN", PATIENCE)


@pytest.fixture
def server() -> Iterator[socket.socket]:
    """Listen on loopback."""
    with socket.create_server(("127.0.0.1", 0)) as listening:
        listening.settimeout(PATIENCE)
        yield listening


def test_lines_come_as_they_are_and_the_rest_is_pending(server: socket.socket) -> None:
    """Raw bytes are kept to the byte; what has no line end yet is told apart; the connection is closed after a stop."""
    trial = Trial(LinkSettings(url=f"socket://127.0.0.1:{server.getsockname()[1]}"))
    trial.start()
    there, _ = server.accept()
    with there:
        there.sendall(b"1.0,0.1,0.2\r\n\x1b[2Jx\xff\r\n3.")
        heard = wait(trial, lambda one: one.count == 2 and one.pending == b"3.")
        assert heard.lines == (b"1.0,0.1,0.2", b"\x1b[2Jx\xff")
        assert heard.state == "open"
        assert trial.stop()
        there.settimeout(PATIENCE)
        assert there.recv(10) == b""
    assert trial.heard().state == "closed"


def test_silent_port_is_let_go_of_without_waiting_for_bytes(server: socket.socket) -> None:
    """None ever comes: after the stop thread and connection are gone."""
    trial = Trial(LinkSettings(url=f"socket://127.0.0.1:{server.getsockname()[1]}"))
    trial.start()
    there, _ = server.accept()
    with there:
        wait(trial, lambda one: one.state == "open")
        assert trial.stop()
        there.settimeout(PATIENCE)
        assert there.recv(10) == b""
    assert not any(one.name == "port trial" for one in threading.enumerate())


@pytest.mark.skipif(os.name != "posix", reason="pseudo-terminals")
def test_serial_device_is_free_again_after_a_stop() -> None:
    """A second trial opens the same device: the first held it alone and let go of it."""
    import pty
    import tty

    ours, theirs = pty.openpty()
    tty.setraw(theirs)  # else the terminal sends back what it is sent
    try:
        for line in (b"first", b"second"):
            trial = Trial(LinkSettings(url=os.ttyname(theirs)))
            trial.start()
            wait(trial, lambda one: one.state == "open")
            os.write(ours, line + b"\n")
            heard = wait(trial, lambda one: one.count == 1)
            assert heard.lines == (line,)
            assert trial.stop()
    finally:
        os.close(ours)
        os.close(theirs)


def test_file_comes_whole_and_ends(tmp_path: Path) -> None:
    """A capture is read to its end, a last line without an end included; only the newest lines are kept."""
    path = tmp_path / "capture.txt"
    path.write_bytes(b"".join(b"%d\n" % number for number in range(1000)) + b"last")
    trial = Trial(LinkSettings(url=str(path)))
    trial.start()
    heard = wait(trial, lambda one: one.state == "ended")
    assert heard.count == 1001
    assert heard.lines[-2:] == (b"999", b"last")
    assert len(heard.lines) == KEPT
    assert trial.stop()


@pytest.mark.parametrize(
    ("url", "says"),
    [
        ("/dev/no-such-port", "no such device"),
        ("-", "standard input is the keyboard here"),
        ("emulate:", "no site to emulate"),
        ("gopher://x", "unknown kind of link"),
    ],
)
def test_port_that_cannot_be_opened_is_told_in_words(url: str, says: str) -> None:
    """No exception leaves the thread; the link's own line says what is wrong."""
    trial = Trial(LinkSettings(url=url))
    trial.start()
    assert says in wait(trial, lambda one: one.state == "lost").trouble
    assert trial.stop()


def test_emulated_link_of_a_site_can_be_tried() -> None:
    """With the site at hand its emulated instrument answers, and its form reads all lines."""
    site = demo_site("guided")
    trial = Trial(site.links[0], site)
    trial.start()
    heard = wait(trial, lambda one: one.count >= 3)
    assert trial.stop()
    reader = LineReader(site.links[0])
    assert [one.verdict for one in reader.read(heard.lines[:3])] == ["good"] * 3


def test_stop_before_the_start_is_harmless() -> None:
    """A screen that is left before anything was opened has nothing to let go of."""
    assert Trial(LinkSettings(url="x")).stop()


def test_line_is_read_with_units_or_its_fault_is_told() -> None:
    """Each line gets its values in words, or what is wrong and what was expected, and is counted."""
    form = LinkSettings(
        url="x", columns=("time_s", "depth_m", "tilt_a_deg", "tilt_b_deg", "temperature_c", "supply_v")
    )
    reader = LineReader(form)
    good, short, word, empty = reader.read(
        [b"12.5,100.25,0.0125,-0.5,14.26,12.5", b"12.6,100.3", b"12.7,deep,0,0,14,12", b""]
    )
    assert (good.verdict, good.words) == (
        "good",
        "time 12.500 s  depth 100.250 m  A 0.0125°  B -0.5000°   14.3 °C   12.50 V",
    )
    assert (short.verdict, short.words) == (
        "bad",
        "wrong number of fields; expected as many fields as the site file names",
    )
    assert word.words == "not a number; expected decimal numbers"
    assert empty.verdict == "unused"
    assert (reader.good, reader.bad, reader.unused) == (1, 2, 1)
    assert reader.faults == {"wrong number of fields": 1, "not a number": 1}


def test_offsets_and_face_are_shown_in_their_units() -> None:
    """Direct offsets read in millimetres, face and azimuth in degrees."""
    form = LinkSettings(url="x", columns=("depth_m", "east_mm", "north_mm", "azimuth_deg", "face_deg"))
    (one,) = LineReader(form).read([b"420,-29.28,4.06,271.5,180"])
    assert one.words == "depth 420.000 m  east -29.3 mm  north 4.1 mm  azimuth 271.5°  face 180°"


def test_sentence_waits_for_its_partner() -> None:
    """The depth sentence is counted good when its tilts come, and bad when another depth comes instead."""
    depth = with_checksum("xor", b"$SDDPT,100.0,0.0,")
    tilts = with_checksum("xor", b"$WIXDR,A,0.5,D,A,A,-0.25,D,B")
    reader = LineReader(LinkSettings(url="x", form="iec61162"))
    assert [one.verdict for one in reader.read([depth, tilts])] == ["waiting", "good"]
    assert (reader.good, reader.bad) == (2, 0)
    assert [one.verdict for one in reader.read([depth, depth, tilts])] == ["waiting", "waiting", "good"]
    assert (reader.good, reader.bad) == (4, 1)


def test_form_that_cannot_be_used_is_refused() -> None:
    """A repeated column is no form."""
    with pytest.raises(ParameterError, match="columns"):
        LineReader(LinkSettings(url="x", columns=("depth_m", "depth_m")))


def test_what_waited_in_a_buffer_does_not_quicken_the_rate(server: socket.socket) -> None:
    """Eighty old lines at once and then one a second are one line a second; before that no rate is told."""
    now = [0.0]
    trial = Trial(LinkSettings(url=f"socket://127.0.0.1:{server.getsockname()[1]}"), clock=lambda: now[0])
    trial.start()
    there, _ = server.accept()
    with there:
        there.sendall(b"old\n" * 80)
        wait(trial, lambda one: one.count == 80)
        now[0] = 1.0
        assert trial.heard().rate is None
        for second in range(2, 7):
            now[0] = float(second)
            there.sendall(b"new\n")
            wait(trial, lambda one, count=79 + second: one.count == count)
        assert trial.heard().rate == pytest.approx(1.0)
        assert trial.stop()


def test_a_file_has_no_rate(tmp_path: Path) -> None:
    """Its lines come as fast as they are read."""
    path = tmp_path / "capture.txt"
    path.write_bytes(b"1,2,3\n" * 100)
    now = [0.0]
    trial = Trial(LinkSettings(url=str(path)), clock=lambda: now[0])
    trial.start()
    wait(trial, lambda one: one.state == "ended")
    now[0] = 60.0
    assert trial.heard().rate is None
    assert trial.stop()
