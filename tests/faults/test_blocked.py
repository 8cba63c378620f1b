"""Output that nobody takes: windows frozen for long, terminals stopped, pipes not read; the run must not care."""

import fcntl
import os
import signal
import subprocess
import sys
from collections.abc import Callable, Iterator
from pathlib import Path

import pytest

pytest.importorskip("termios", reason="pseudo-terminals and job control are POSIX")
sys.path.insert(0, str(Path(__file__).parent))

import termios

import shell_help as shell
from window_help import (
    EASTFALL,
    PATIENCE,
    RATE,
    STEP,
    Instrument,
    Window,
    assert_whole,
    log_of,
    patiently,
    recorded,
)

pytestmark = [
    pytest.mark.invariant,
    pytest.mark.skipif(
        not sys.platform.startswith("linux"), reason="/proc names the terminal; pipes of one page"
    ),
]

SET_UP = (b"\x1b[?1049h", b"\x1b[?1000h", b"\x1b[?25l", b"\x1b[?2004h")
"""The other screen, the pointer's reports, no cursor, pasted text in brackets."""
FEW = 4096
"""The smallest pipe there is [bytes]."""


def leave_unread(one: Window) -> None:
    """Read nothing while whole pictures are drawn, until nothing more fits between program and window."""
    for number in range(200):
        one.resize(*((200, 60), (180, 55))[number % 2])
        if one.takes_nothing(0.5):
            return
    raise AssertionError("the terminal still takes what is written")


def stop_output(one: Window) -> None:
    """Stop the output, as flow control does."""
    with one.other_end() as descriptor:
        termios.tcflow(descriptor, termios.TCOOFF)


def start_output(one: Window) -> None:
    """Let it go on."""
    with one.other_end() as descriptor:
        termios.tcflow(descriptor, termios.TCOON)


def lines_in_log(folder: Path) -> int:
    """Return how many lines are recorded."""
    path = log_of(folder)
    return len(recorded(path)) if path is not None else 0


def more_lines(folder: Path, count: int) -> None:
    """Wait until so many more lines are recorded."""
    wanted = lines_in_log(folder) + count
    patiently(lambda: lines_in_log(folder) >= wanted, "nothing is recorded any more")


@pytest.mark.parametrize("block", [leave_unread, stop_output])
@pytest.mark.parametrize("ending", [signal.SIGTERM, signal.SIGHUP, "keys"])
def test_a_run_whose_terminal_takes_nothing_ends_when_told(
    window: Callable[..., Window],
    tmp_path: Path,
    block: Callable[[Window], None],
    ending: signal.Signals | str,
) -> None:
    """By signal or by keys, unseen: it ends, the log is sealed, the modes are as before, and so is what can be told."""
    one = window()
    one.wait("WITHIN")
    shown = one.shown()
    with one.other_end():  # open until the end: what is in it is not lost with the program's own
        block(one)
        assert one.takes_nothing(1.0)
        if ending == "keys":
            one.press("q")
            more_lines(tmp_path / "runs", 2 * RATE)  # the question is asked by then
            one.press("y")
        else:
            os.kill(one.job, ending)
        patiently(one.over, "still running")
        assert termios.tcgetattr(one._ours)[:4] == one.before[:4]
        assert_whole(tmp_path / "runs", shown, "intact")
    seen = len(one.raw)
    start_output(one)
    one.until(lambda: f"{shell.ENDED} 0".encode() in one.raw[seen:])
    if block is leave_unread:  # room was made for it
        assert all(words in one.raw[seen:] for words in (b"\x1b[?1049l", b"\x1b[?25h", b"\x1b[?1000l"))
    one.make_usable()


@pytest.mark.parametrize(("block", "release"), [(leave_unread, None), (stop_output, start_output)])
def test_a_picture_that_was_not_taken_for_long_is_drawn_whole_when_it_is(
    window: Callable[..., Window], tmp_path: Path, block: Callable[[Window], None], release
) -> None:
    """While nothing is taken lines are recorded, and keys do what they do; then what they asked for stands whole."""
    one = window()
    one.wait("WITHIN")
    block(one)
    one.resize(80, 24)  # what it draws for that is not taken either
    more_lines(tmp_path / "runs", 3 * RATE)
    one.press("?")
    more_lines(tmp_path / "runs", RATE)
    assert one.takes_nothing(1.0)
    seen = lines_in_log(tmp_path / "runs") * STEP
    one.screen.reset()  # nothing of an earlier picture is left to be mistaken for a new one
    since = len(one.raw)
    if release is not None:
        release(one)
    one.wait("Acknowledge")
    one.until(
        lambda: SET_UP[0] in one.raw[since:]
    )  # all of it anew: what was left out may have been any part of it
    one.press("\x1b")
    one.wait(
        lambda text: one.shown() > seen and all(words in text for words in ("plan, ", "? help", "lines/s"))
    )
    os.kill(one.job, signal.SIGTERM)
    one.wait(f"{shell.ENDED} 0")
    assert_whole(tmp_path / "runs", seen, "intact")


def test_a_terminal_that_is_stopped_from_the_first_is_set_up_when_it_goes_on(
    window: Callable[..., Window], tmp_path: Path
) -> None:
    """Nothing of the set-up is lost: other screen, pointer, cursor and pasting come with the picture."""
    one = window()
    stop_output(one)
    more_lines(tmp_path / "runs", 3 * RATE)
    seen = len(one.raw)
    assert not any(words in one.raw for words in SET_UP)
    start_output(one)
    one.wait(lambda text: "WITHIN" in text and "? help" in text)
    assert all(words in one.raw[seen:] for words in SET_UP)
    os.kill(one.job, signal.SIGTERM)
    one.wait(f"{shell.ENDED} 0")


@pytest.fixture
def pipe() -> Iterator[tuple[int, int]]:
    """Yield the two ends of a pipe that holds little."""
    ends = os.pipe()
    fcntl.fcntl(ends[1], fcntl.F_SETPIPE_SZ, FEW)
    yield ends
    for one in ends:
        os.close(one)


def fill(end: int) -> None:
    """Write into a pipe until nothing more fits."""
    os.set_blocking(end, False)
    while True:
        try:
            os.write(end, b"." * FEW)
        except BlockingIOError:
            break
    os.set_blocking(end, True)


def read_on(end: int) -> bytes:
    """Return what is in a pipe."""
    os.set_blocking(end, False)
    try:
        return os.read(end, 1 << 20)
    except BlockingIOError:
        return b""


@pytest.fixture
def closely(tarn: Path) -> Path:
    """Return the site with alarms at once and stations every 0.2 m: something to tell fifty times a second."""
    text = tarn.read_text(encoding="utf-8")
    text = text.replace(
        "[[link]]", "station_every_m = 0.2\n[limits]\nwarning_mm = 0.001\non_delay_s = 0.0\n[[link]]"
    )
    tarn.write_text(text, encoding="utf-8")
    return tarn


Program = Callable[..., "subprocess.Popen[bytes]"]


@pytest.fixture
def program(instrument: Instrument, closely: Path, tmp_path: Path) -> Iterator[Program]:
    """Start the program on the instrument; killed if it is left."""
    started = []
    (tmp_path / "runs").mkdir()

    def start(verb: str, *options: str, **where: int) -> "subprocess.Popen[bytes]":
        words = (verb, str(closely), "--link", instrument.url, "--into", str(tmp_path / "runs"), *options)
        started.append(subprocess.Popen([*EASTFALL, *words], stdin=subprocess.DEVNULL, **where))
        return started[-1]

    yield start
    for one in started:
        one.kill()
        one.wait(PATIENCE)


@pytest.mark.parametrize("which", ["stdout", "stderr"])
def test_record_goes_on_and_ends_when_nobody_takes_what_it_says(
    program: Program, pipe: tuple[int, int], tmp_path: Path, which: str
) -> None:
    """Its path or its alarms meet a full pipe: lines are recorded, SIGTERM ends it, the log is sealed."""
    fill(pipe[1])
    other = "stderr" if which == "stdout" else "stdout"
    one = program("record", **{which: pipe[1], other: subprocess.DEVNULL})
    more_lines(tmp_path / "runs", 2 * RATE)
    one.send_signal(signal.SIGTERM)
    assert one.wait(PATIENCE) == 0
    assert_whole(tmp_path / "runs", 2 * RATE * STEP, "intact")


@pytest.mark.parametrize("which", ["stdout", "stderr"])
def test_record_goes_on_when_who_reads_it_has_gone(program: Program, tmp_path: Path, which: str) -> None:
    """A broken pipe is no reason to stop recording."""
    theirs, ours = os.pipe()
    os.close(theirs)
    other = "stderr" if which == "stdout" else "stdout"
    one = program("record", **{which: ours, other: subprocess.DEVNULL})
    os.close(ours)
    more_lines(tmp_path / "runs", 2 * RATE)
    one.send_signal(signal.SIGTERM)
    one.wait(PATIENCE)
    assert_whole(tmp_path / "runs", 2 * RATE * STEP, "intact")


def test_plain_lines_that_nobody_takes_are_left_out_and_told(
    program: Program, pipe: tuple[int, int], tmp_path: Path
) -> None:
    """While a pager stands still everything is recorded; when it goes on, it learns how many lines it has missed."""
    one = program("watch", "--plain", stdout=pipe[1], stderr=subprocess.DEVNULL)
    patiently(lambda: lines_in_log(tmp_path / "runs") > 5 * RATE, "nothing is recorded any more")
    said = bytearray()

    def told() -> bool:
        said.extend(read_on(pipe[0]))
        return b"left out" in said

    patiently(told, "the gap is not told")
    one.send_signal(signal.SIGTERM)
    while one.poll() is None:
        said.extend(read_on(pipe[0]))
    said.extend(read_on(pipe[0]))
    lines = said.decode().splitlines()
    path = log_of(tmp_path / "runs")
    assert lines[-1] == str(path)
    assert any("station" in line for line in lines)
    assert one.returncode == 0
    assert_whole(tmp_path / "runs", 5 * RATE * STEP, "intact")


def test_plain_ends_on_a_signal_while_nobody_takes_its_lines(
    program: Program, pipe: tuple[int, int], tmp_path: Path
) -> None:
    """SIGTERM with a full pipe: the log is sealed and the program gone, its last words untold."""
    fill(pipe[1])
    one = program("watch", "--plain", stdout=pipe[1], stderr=subprocess.DEVNULL)
    more_lines(tmp_path / "runs", 5 * RATE)
    one.send_signal(signal.SIGTERM)
    assert one.wait(PATIENCE) == 0
    assert_whole(tmp_path / "runs", 5 * RATE * STEP, "intact")
