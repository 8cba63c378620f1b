"""Faults of the terminal made for real: windows closed, shrunk and frozen, jobs stopped and killed, no colour, ASCII.

The program runs under a shell with job control in a pseudo-terminal, and reads numbered lines from a TCP server.
"""

import os
import random
import re
import signal
import socket
import sys
import threading
import time
from collections.abc import Callable, Iterator
from pathlib import Path

import pytest

pytest.importorskip("termios", reason="pseudo-terminals and job control are POSIX")
import termios

HERE = Path(__file__).parent
sys.path[:0] = [str(HERE), str(HERE.parent / "tui")]

import shell_help as shell  # noqa: E402 - the parts of these tests that stand in no package
from terminal_harness import EASTFALL, PATIENCE, Terminal  # noqa: E402

from eastfall.io.arrivals import LineBlock  # noqa: E402
from eastfall.io.errors import LogError  # noqa: E402
from eastfall.io.runlog import read_log, verify_log  # noqa: E402

pytestmark = pytest.mark.invariant

SITE = """\
[site]
name = "Tarn Howe"
latitude_deg = 54.6
[shaft]
depth_m = 900.0
[run]
kind = "guided"
[[link]]
url = "-"
"""
RATE = 100
"""Lines a second."""
STEP = 0.1
"""Depth from line to line [m]: the depth on the screen tells which line it has seen."""
ANSWER = re.compile(r"(?:WITHIN|OVER|UNDECIDED) (\d+\.\d) m")
COLOUR = re.compile(rb"\x1b\[[0-9;]*\b(?:3[0-7]|4[0-7]|38|48|9[0-7]|10[0-7])(?:;[0-9;]*)?m")


class Instrument(threading.Thread):
    """A TCP device server that sends line after line to each connection."""

    def __init__(self) -> None:
        super().__init__(daemon=True)
        self._listener = socket.create_server(("127.0.0.1", 0))
        self.url = f"socket://127.0.0.1:{self._listener.getsockname()[1]}"
        self._over = threading.Event()

    def run(self) -> None:
        """Serve one connection after the other."""
        while not self._over.is_set():
            try:
                peer, _ = self._listener.accept()
            except OSError:
                return
            with peer:
                self._serve(peer)

    def _serve(self, peer: socket.socket) -> None:
        number = 0
        while not self._over.wait(1.0 / RATE):
            try:
                peer.sendall(b"%.1f,0.00%02d,0.0010\r\n" % (number * STEP, number % 97))
            except OSError:
                return
            number += 1

    def close(self) -> None:
        """Stop serving."""
        self._over.set()
        self._listener.shutdown(socket.SHUT_RDWR)
        self._listener.close()
        self.join(PATIENCE)


class Window(Terminal):
    """A window with a shell in it that runs the program."""

    def __init__(self, folder: Path, *arguments: str, **environment: str) -> None:
        self._job = folder / "job"
        self._job.unlink(missing_ok=True)
        command = [sys.executable, shell.__file__, str(self._job), *EASTFALL, *arguments]
        super().__init__(command, 80, 24, **environment)
        self.closed = False
        self.before = termios.tcgetattr(self._ours)

    @property
    def job(self) -> int:
        """The process number of the program."""
        self.until(lambda: self._job.exists() and self._job.read_text().endswith("\n"))
        return int(self._job.read_text())

    def until(self, done: Callable[[], bool]) -> None:
        """Read on until something holds."""
        end = time.monotonic() + PATIENCE
        while not done():
            assert time.monotonic() < end, self.text
            self.read(0.02)

    def state(self) -> str:
        """Return the letter of the program's state, as the system gives it; X when there is none."""
        try:
            return Path(f"/proc/{self.job}/stat").read_text().rsplit(")", 1)[1].split()[0]
        except OSError:
            return "X"

    def flag(self, which: int) -> bool:
        """Tell whether a local mode of the terminal is on."""
        return bool(termios.tcgetattr(self._ours)[3] & which)

    def shown(self) -> float:
        """Return the depth that the screen answers for [m]; -1 without an answer."""
        found = ANSWER.search(self.text)
        return float(found[1]) if found else -1.0

    def hang_up(self) -> None:
        """Close the window."""
        os.close(self._ours)
        self.closed = True

    def close(self) -> None:
        """End what is left."""
        if self._job.exists() and self.state() not in "XZ":
            os.kill(self.job, signal.SIGKILL)
        if not self.closed:
            self.closed = True
            super().close()
        elif self.process.poll() is None:
            self.process.kill()
            self.process.wait(PATIENCE)


@pytest.fixture
def instrument() -> Iterator[Instrument]:
    """Yield a server of numbered lines."""
    one = Instrument()
    one.start()
    yield one
    one.close()


@pytest.fixture
def site(tmp_path: Path) -> Path:
    """Return a site file."""
    path = tmp_path / "tarn.toml"
    path.write_text(SITE, encoding="utf-8")
    return path


@pytest.fixture
def window(instrument: Instrument, site: Path, tmp_path: Path) -> Iterator[Callable[..., Window]]:
    """Open windows in which the instrument is watched, and close what is left."""
    opened: list[Window] = []

    def build(folder: Path | None = None, **environment: str) -> Window:
        into = folder or tmp_path / "runs"
        into.mkdir(exist_ok=True)
        arguments = ("watch", str(site), "--link", instrument.url, "--into", str(into))
        opened.append(Window(into, *arguments, **environment))
        return opened[-1]

    yield build
    for one in opened:
        one.close()


def log_of(folder: Path) -> Path | None:
    """Return the run log in a folder, if it was begun."""
    return next(iter(folder.glob("*.eastfall.jsonl")), None)


def recorded(path: Path) -> list[int]:
    """Return the numbers of the lines in a log."""
    with read_log(path) as reader:
        return [
            round(float(line.split(b",")[0]) / STEP)
            for one in reader
            if isinstance(one, LineBlock)
            for line in one.lines()
        ]


def assert_whole(folder: Path, shown: float, state: str) -> int:
    """Assert that a log holds every line from the first to the one on the screen at least; return how many."""
    path = log_of(folder)
    assert path is not None
    numbers = recorded(path)
    assert numbers == list(range(len(numbers)))
    assert len(numbers) * STEP > shown
    assert verify_log(path).state == state
    return len(numbers)


def test_a_closed_window_ends_the_run_and_closes_the_record(
    window: Callable[..., Window], tmp_path: Path
) -> None:
    """The terminal goes away under the program (SIGHUP, and every write fails): it ends, the log is sealed."""
    one = window()
    one.wait("WITHIN")
    job, shown = one.job, one.shown()
    one.hang_up()
    end = time.monotonic() + PATIENCE
    while one.state() not in "XZ":
        assert time.monotonic() < end, f"{job} still runs: {one.state()}"
        threading.Event().wait(0.02)
    assert_whole(tmp_path / "runs", shown, "intact")


def test_a_terminal_that_is_gone_without_a_signal_ends_the_run(
    instrument: Instrument, site: Path, tmp_path: Path
) -> None:
    """A terminal that is not the controlling one sends no SIGHUP; its end is noticed, and the log is sealed."""
    into = tmp_path / "runs"
    command = (*EASTFALL, "watch", str(site), "--link", instrument.url, "--into", str(into))
    one = Terminal(command, 80, 24)
    try:
        one.wait("WITHIN")
        found = ANSWER.search(one.text)
        os.close(one._ours)
        one.process.wait(PATIENCE)  # its status says nothing: where it would say so is gone
    finally:
        one.process.kill()
        one.process.wait(PATIENCE)
    assert found is not None
    assert_whole(into, float(found[1]), "intact")


@pytest.mark.parametrize("number", [signal.SIGTERM, signal.SIGHUP])
def test_a_signal_leaves_modes_and_record_in_order(
    window: Callable[..., Window], tmp_path: Path, number: signal.Signals
) -> None:
    """Told to end, the program gives the terminal back in the very modes it had, and seals the log."""
    one = window()
    one.wait("WITHIN")
    shown = one.shown()
    os.kill(one.job, number)
    one.wait(f"{shell.ENDED} 0")
    assert termios.tcgetattr(one._ours)[:4] == one.before[:4]
    assert_whole(tmp_path / "runs", shown, "intact")


@pytest.mark.parametrize("number", [signal.SIGTSTP, signal.SIGSTOP])
def test_a_job_stopped_and_sent_on_goes_on_recording(
    window: Callable[..., Window], tmp_path: Path, number: signal.Signals
) -> None:
    """Stopped politely the terminal is sane, stopped rudely it is not; sent on, picture and record are whole."""
    one = window()
    one.wait("WITHIN")
    os.kill(one.job, number)
    # The picture may have been cut in the middle of a sequence that swallows what the shell says: not on the screen.
    one.until(lambda: shell.STOPPED.encode() in one.raw)
    assert one.state() == "T"
    assert one.flag(termios.ICANON) == (number == signal.SIGTSTP)
    assert one.flag(termios.ECHO) == (number == signal.SIGTSTP)
    behind = one.shown()
    one.screen.reset()  # nothing of the picture is left to be mistaken for a new one
    one.press("\n")
    one.wait(lambda text: "? help" in text and "plan, " in text and one.shown() > behind + 50 * STEP)
    assert not one.flag(termios.ICANON)
    one.press("q")
    one.wait("Stop recording")
    one.press("y")
    one.wait(f"{shell.ENDED} 0")
    assert one.flag(termios.ICANON)
    assert_whole(tmp_path / "runs", behind, "intact")


def test_bytes_that_are_no_text_are_no_keys_and_end_nothing(
    window: Callable[..., Window], tmp_path: Path
) -> None:
    """Letters of another locale, rubbish and broken escape sequences on the keyboard: the run goes on, keys work."""
    one = window()
    one.wait("WITHIN")
    for rubbish in (b"\xe9", b"\xff\xfe\x00", b"\x1b[999;999;999z", b"\x1b[M\xff\xff\xff", os.urandom(200)):
        os.write(one._ours, rubbish.translate(None, b"qysnghj\x03\r\n"))
        one.read(0.1)
    seen = one.shown()
    one.wait(lambda _: one.shown() > seen + RATE * STEP)
    os.kill(one.job, signal.SIGTERM)
    one.wait(f"{shell.ENDED} 0")
    assert_whole(tmp_path / "runs", seen, "intact")


def test_a_frozen_window_does_not_hold_up_the_record(window: Callable[..., Window], tmp_path: Path) -> None:
    """While nobody reads what the program draws, two hundred more lines reach the log; then the picture catches up."""
    one = window()
    one.wait("WITHIN")
    path = log_of(tmp_path / "runs")
    assert path is not None
    before = len(recorded(path))
    end = time.monotonic() + PATIENCE
    while len(recorded(path)) < before + 2 * RATE:
        assert time.monotonic() < end
        threading.Event().wait(0.1)
    one.wait(lambda _: one.shown() > (before + 2 * RATE) * STEP)
    os.kill(one.job, signal.SIGTERM)
    one.wait(f"{shell.ENDED} 0")


PLAIN = {
    "TERM": "vt100",
    "NO_COLOR": "1",
    "COLORTERM": "",
    "LC_ALL": "C",
    "PYTHONCOERCECLOCALE": "0",
    "PYTHONUTF8": "0",
    "PYTHONIOENCODING": "",
}


def test_resized_to_20x5_and_back_in_ascii_without_colour_or_mouse(window: Callable[..., Window]) -> None:
    """In a stream of resizes with an ASCII locale and no colour: no byte beyond ASCII, no colour, and the keys work."""
    one = window(**PLAIN)
    one.wait("WITHIN")
    rng = random.Random(5)  # noqa: S311 - a test, not a secret
    for number in range(60):
        columns, rows = (20, 5) if number % 3 else (rng.randint(1, 200), rng.randint(1, 60))
        one.resize(columns, rows)
        one.read(0.01 * rng.random())
    one.resize(20, 5)
    one.wait(lambda text: len(text.splitlines()) == 5 and one.shown() >= 0.0)
    one.resize(80, 24)
    one.wait(lambda text: all(words in text for words in ("WITHIN", "plan, ", "? help", "lines/s")))
    for key, words in (("s", "stations: "), ("\x1b", "LIVE"), ("?", "Acknowledge"), ("\x1b", "LIVE")):
        one.press(key)
        one.wait(words)
    one.press("q")
    one.wait("Stop recording")
    one.press("y")
    one.wait(f"{shell.ENDED} 0")
    assert not [byte for byte in one.raw if byte > 0x7F]
    assert not COLOUR.search(one.raw)
    assert "Traceback" not in one.raw.decode("ascii")


def _usable(one: Window) -> None:
    """Reset the terminal as a person would, and work in it."""
    one.press("\nstty sane; tput reset; echo reset-$((2 * 3))\n")
    one.wait("reset-6")
    assert all(one.flag(mode) for mode in (termios.ICANON, termios.ECHO, termios.ISIG))
    one.press("echo back-$((6 * 7))\r")
    text = one.wait("back-42")
    assert "$((6 * 7))" in text  # what is typed can be seen


def _kill_many(window: Callable[..., Window], folder: Path, times: int, rng: random.Random) -> int:
    total = 0
    for attempt in range(times):
        into = folder / f"runs-{attempt}"
        one = window(into)
        if attempt % 4:  # else also while it is still starting
            one.wait("WITHIN")
        moment = time.monotonic() + rng.uniform(0.0, 1.5)
        while time.monotonic() < moment:
            one.read(0.01)
        shown = one.shown()
        os.kill(one.job, signal.SIGKILL)
        one.until(lambda one=one: f"{shell.ENDED} -9".encode() in one.raw)
        total += _after_kill(into, shown)
        _usable(one)
        one.close()
    return total


def _after_kill(into: Path, shown: float) -> int:
    """Assert that nothing shown is lost; return how many lines there are."""
    path = log_of(into)
    if shown >= 0.0:
        return assert_whole(into, shown, "cut short")
    if path is not None:  # killed before the first answer: readable, or empty and refused in words
        try:
            return len(recorded(path))
        except LogError as error:
            assert path.stat().st_size == 0, error
    return 0


def test_the_dashboard_killed_loses_no_line_and_leaves_a_usable_terminal(
    window: Callable[..., Window], tmp_path: Path
) -> None:
    """Killed at random moments: what the screen had shown is in the log, and a reset is all the terminal needs."""
    assert _kill_many(window, tmp_path, 3, random.Random(21)) > 0  # noqa: S311 - a test, not a secret


@pytest.mark.soak
def test_the_dashboard_killed_at_two_hundred_moments(window: Callable[..., Window], tmp_path: Path) -> None:
    """The same, two hundred times."""
    assert _kill_many(window, tmp_path, 200, random.Random(22)) > 0  # noqa: S311 - a test, not a secret
