"""Faults of the terminal made for real: windows closed, shrunk and frozen, jobs stopped and killed, no colour, ASCII.

The program runs under a shell with job control in a pseudo-terminal, and reads numbered lines from a TCP server.
"""

import os
import random
import re
import signal
import sys
import threading
import time
from collections.abc import Callable
from concurrent.futures import ThreadPoolExecutor
from pathlib import Path

import pytest

pytest.importorskip("termios", reason="pseudo-terminals and job control are POSIX")
sys.path.insert(0, str(Path(__file__).parent))

import termios

import shell_help as shell
from window_help import (
    ANSWER,
    EASTFALL,
    PATIENCE,
    RATE,
    STEP,
    Instrument,
    Terminal,
    Window,
    assert_whole,
    log_of,
    recorded,
)

from eastfall.io.errors import LogError

pytestmark = pytest.mark.invariant

COLOUR = re.compile(rb"\x1b\[[0-9;]*\b(?:3[0-7]|4[0-7]|38|48|9[0-7]|10[0-7])(?:;[0-9;]*)?m")


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
    instrument: Instrument, tarn: Path, tmp_path: Path
) -> None:
    """A terminal that is not the controlling one sends no SIGHUP; its end is noticed, and the log is sealed."""
    into = tmp_path / "runs"
    command = (*EASTFALL, "watch", str(tarn), "--link", instrument.url, "--into", str(into))
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


@pytest.mark.parametrize("number", [signal.SIGTERM, signal.SIGHUP, signal.SIGINT])
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


AT_ONCE = 4
"""Dashboards killed side by side: most of the time each of them waits."""
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


def _kill_many(window: Callable[..., Window], folder: Path, times: int, seed: int) -> list[int]:
    """Kill so many dashboards, some of them at once; return how many lines each had recorded."""

    def kill(attempt: int) -> int:
        return _kill(window(folder / f"runs-{attempt}"), folder / f"runs-{attempt}", seed, attempt)

    with ThreadPoolExecutor(AT_ONCE) as workers:
        return list(workers.map(kill, range(times)))


def _kill(one: Window, into: Path, seed: int, attempt: int) -> int:
    rng = random.Random(f"{seed} {attempt}")  # noqa: S311 - a test, not a secret
    if attempt % 4:  # else also while it is still starting
        one.wait("WITHIN")
    moment = time.monotonic() + rng.uniform(0.0, 1.5)
    while time.monotonic() < moment:
        one.read(0.01)
    shown = one.shown()
    os.kill(one.job, signal.SIGKILL)
    one.until(lambda: f"{shell.ENDED} -9".encode() in one.raw)
    lines = _after_kill(into, shown)
    one.make_usable()
    one.close()
    return lines


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
    assert max(_kill_many(window, tmp_path, 3, seed=21)) > 0


@pytest.mark.soak
def test_the_dashboard_killed_at_two_hundred_moments(window: Callable[..., Window], tmp_path: Path) -> None:
    """The same, two hundred times; most of them in the middle of recording."""
    lines = _kill_many(window, tmp_path, 200, seed=22)
    assert len(lines) == 200
    assert sum(one > 0 for one in lines) >= 150
