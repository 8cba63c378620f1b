"""A window with the program in it: a shell with job control, a server of numbered lines, and the log it makes."""

import contextlib
import os
import re
import select
import signal
import socket
import sys
import termios
import threading
import time
from collections.abc import Callable, Iterator
from pathlib import Path

HERE = Path(__file__).parent
sys.path[:0] = [str(HERE), str(HERE.parent / "tui")]

import shell_help as shell  # noqa: E402 - the parts of these tests that stand in no package
from terminal_harness import EASTFALL, PATIENCE, Terminal  # noqa: E402

from eastfall.io.arrivals import LineBlock  # noqa: E402
from eastfall.io.runlog import read_log, verify_log  # noqa: E402

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


class Instrument(threading.Thread):
    """A TCP device server that sends line after line to each connection."""

    def __init__(self) -> None:
        super().__init__(daemon=True)
        self._listener = socket.create_server(("127.0.0.1", 0))
        self.url = f"socket://127.0.0.1:{self._listener.getsockname()[1]}"
        self._over = threading.Event()
        self._serving: list[threading.Thread] = []

    def run(self) -> None:
        """Serve every connection in a thread of its own."""
        while not self._over.is_set():
            try:
                peer, _ = self._listener.accept()
            except OSError:
                return
            self._serving = [one for one in self._serving if one.is_alive()]
            self._serving.append(threading.Thread(target=self._serve, args=(peer,), daemon=True))
            self._serving[-1].start()

    def _serve(self, peer: socket.socket) -> None:
        number = 0
        with peer:
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
        for one in (self, *self._serving):
            one.join(PATIENCE)


class Window(Terminal):
    """A window with a shell in it that runs the program."""

    def __init__(self, folder: Path, *arguments: str, **environment: str) -> None:
        self._job = folder / "job"
        self._job.unlink(missing_ok=True)
        command = [sys.executable, shell.__file__, str(self._job), *EASTFALL, *arguments]
        super().__init__(command, 80, 24, **environment)
        self.closed = False
        self._device: Path | None = None
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

    @contextlib.contextmanager
    def other_end(self) -> Iterator[int]:
        """Give the end of the terminal that the program writes to, opened anew."""
        self._device = self._device or Path(f"/proc/{self.process.pid}/fd/0").readlink()
        descriptor = os.open(self._device, os.O_RDWR | os.O_NOCTTY)
        yield descriptor
        os.close(descriptor)

    def takes_nothing(self, seconds: float) -> bool:
        """Tell whether the terminal takes no byte more for so long; nothing is read meanwhile."""
        with self.other_end() as descriptor:
            return not select.select([], [descriptor], [], seconds)[1]

    def over(self) -> bool:
        """Tell whether the program has ended; nothing is read for it."""
        return self.state() in "XZ"

    def hang_up(self) -> None:
        """Close the window."""
        os.close(self._ours)
        self.closed = True

    def make_usable(self) -> None:
        """Reset the terminal as a person would, and work in it."""
        self.press("\nstty sane; tput reset; echo reset-$((2 * 3))\n")
        self.wait("reset-6")
        assert all(self.flag(mode) for mode in (termios.ICANON, termios.ECHO, termios.ISIG))
        self.press("echo back-$((6 * 7))\r")
        text = self.wait("back-42")
        assert "$((6 * 7))" in text  # what is typed can be seen

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


def patiently(done: Callable[[], bool], what: str) -> None:
    """Wait, without reading from any window, until something holds."""
    end = time.monotonic() + PATIENCE
    while not done():
        assert time.monotonic() < end, what
        threading.Event().wait(0.02)


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
