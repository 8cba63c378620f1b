"""What the watch screen costs: CPU of a core at 10 Hz, time from key to picture, time to the first picture, memory.

Run by hand: `python tests/bench/bench_screen.py`. It starts itself again inside a pseudo-terminal as the program under
test, with a source that has 20,000 readings behind it and goes on at 50 a second.
"""

import os
import statistics
import sys
import threading
import time
from dataclasses import dataclass
from pathlib import Path
from types import SimpleNamespace
from typing import Any

import numpy as np

Row = tuple[str, str, float, float]

POINTS = 20_000
RATE = 50.0
SIZES = ((80, 24), (120, 40), (200, 60))
WANTED = (120, 40)
"""The size for which a cost is agreed: 15 % of a core, and 95 % of keys on the screen within 50 ms."""
SETTLE, MEASURE = 3.0, 15.0
KEYS = 60


class Source:
    """A live run of invented rows: a probe going down 900 m and up again."""

    def __init__(self) -> None:
        self._rows = _rows(4 * POINTS)
        self._given = 0
        self._start = time.monotonic()

    def start(self) -> None:
        """Nothing to open."""

    def stop(self) -> Any:
        """Return the last update."""
        return self._update(self._given)

    def step(self, timeout: float) -> Any:
        """Wait, then hand over what has come due."""
        threading.Event().wait(timeout)
        return self._update(POINTS + int(RATE * (time.monotonic() - self._start)))

    def _update(self, upto: int) -> Any:
        from eastfall.physics.findings import Findings, Rows, Standing

        block, self._given = self._rows[:, self._given : upto], upto
        last = self._rows[:, upto - 1]
        standing = Standing(
            time=last[0],
            depth=last[1],
            speed=last[2],
            passing=int(last[3]),
            direction="down",
            measured_east=last[5],
            measured_north=last[6],
            expected_east=last[7],
            expected_north=last[8],
            u_east=last[9],
            u_north=last[10],
            warning=0.015,
            action=0.03,
            verdict="within",
            rest_point=None,
            hold_still=None,
            wall_clearance=2.5,
            frames=upto,
        )
        link = SimpleNamespace(
            name="bench", url="", state="open", retry_in=None, lines=upto, rate=RATE, silent_for=0.0,
            last_fault="", queue_dropped=0,
        )  # fmt: skip
        health = SimpleNamespace(
            links=(link,), frames=upto, rejected=0, faults={}, log_path="bench", log_bytes=upto * 60,
            log_state="recording", log_lost=0, set_aside=0,
        )  # fmt: skip
        return SimpleNamespace(
            findings=(Findings(rows=Rows(block)),),
            standing=standing,
            alarms=(),
            health=health,
            time=last[0],
            armed=True,
        )


def _rows(count: int) -> np.ndarray:
    time_ = np.arange(count) / RATE
    depth = 450.0 - 450.0 * np.cos(time_ / 60.0)
    noise = np.random.default_rng(3).normal(0.0, 4e-4, (2, count))
    full = np.ones(count)
    speed = 7.5 * np.sin(time_ / 60.0)
    passing = np.floor(time_ / (60.0 * np.pi))
    return np.array(
        [
            time_, depth, speed, passing, full, 0.01 * np.sin(depth / 90.0) + noise[0],
            0.02 * (depth / 900.0) ** 2 + noise[1], -2e-5 * speed * depth / 7.5, 3e-4 * (depth / 900.0) ** 2,
            full * 1e-3, full * 1e-3, full * 0.015, full * 0.03,
        ]
    )  # fmt: skip


def under_test() -> None:
    """Be the program: the real application over the invented source."""
    from eastfall.physics.settings import Assumptions, Run, Shaft, Site
    from eastfall.tui.app import watch_app
    from eastfall.tui.feed import LiveFeed
    from eastfall.tui.opening import shown_over
    from eastfall.tui.session import Session

    assumptions = Assumptions(
        site=Site(name="Bench", latitude=1.0), shaft=Shaft(depth=900.0, diameter=6.0), run=Run(kind="guided")
    )
    app = watch_app(
        Session(
            assumptions=assumptions,
            mode="live",
            title="Bench",
            bob=lambda depth: (0.0 * depth, 1e-9 * depth**2),
            fall=lambda depth: (1e-6 * depth**1.5, 0.0 * depth),
        )
    )
    sys.exit(shown_over(app, LiveFeed(Source(), app.take)))  # type: ignore[arg-type]


def cpu_seconds(pid: int) -> float:
    """Return user and system time of a process so far."""
    fields = Path(f"/proc/{pid}/stat").read_text().rsplit(")", 1)[1].split()
    return (int(fields[11]) + int(fields[12])) / os.sysconf("SC_CLK_TCK")


def resident(pid: int) -> float:
    """Return resident memory in MB."""
    return int(Path(f"/proc/{pid}/statm").read_text().split()[1]) * os.sysconf("SC_PAGE_SIZE") / 1e6


@dataclass(frozen=True, slots=True, kw_only=True)
class Cost:
    """What the screen costs at one size."""

    cpu: float
    """Of a core [%]."""
    output: float
    """[kB/s]."""
    latency: list[float]
    """From a key to its picture, sorted [s]."""
    memory: float
    """[MB]."""

    @property
    def late(self) -> float:
        """What 95 % of the keys stay under [s]."""
        return self.latency[int(0.95 * len(self.latency))]


def measure(columns: int, rows: int) -> Cost:
    """Run the program at one size."""
    from terminal_harness import Terminal

    with Terminal([sys.executable, __file__, "--under-test"], columns, rows) as terminal:
        terminal.wait("WITHIN")
        _read_for(terminal, SETTLE)
        pid, before, sent = terminal.process.pid, cpu_seconds(terminal.process.pid), len(terminal.raw)
        began = time.monotonic()
        _read_for(terminal, MEASURE)
        taken = time.monotonic() - began
        cpu = 100.0 * (cpu_seconds(pid) - before) / taken
        output = (len(terminal.raw) - sent) / taken / 1e3
        latency = sorted(_latency(terminal) for _ in range(KEYS))
        found = Cost(cpu=cpu, output=output, latency=latency, memory=resident(pid))
        terminal.press("q")
        terminal.wait("Stop recording")
        terminal.press("y")
        terminal.ended()
    return found


def _read_for(terminal: Any, seconds: float) -> None:
    end = time.monotonic() + seconds
    while time.monotonic() < end:
        terminal.read(0.05)


def _latency(terminal: Any) -> float:
    """Return the time from a key to the picture that it asks for [s]: the residual view on or off."""
    wanted = "╌expected" if "less expected" in terminal.text else "less expected"
    sent = len(terminal.raw)
    began = time.monotonic()
    terminal.press("r")
    while wanted.encode() not in terminal.raw[sent:]:
        terminal.read(1.0)
    taken = time.monotonic() - began
    _read_for(terminal, 0.07 + 0.1 * np.random.default_rng().random())
    return taken


def first_picture() -> float:
    """Return the time from the command to the first whole picture of the demo [s]."""
    import tempfile

    from terminal_harness import EASTFALL, Terminal

    with tempfile.TemporaryDirectory() as folder:
        began = time.monotonic()
        with Terminal([*EASTFALL, "demo", "--into", folder], 80, 24) as terminal:
            terminal.wait("? help")
            return time.monotonic() - began


def rows() -> list[Row]:
    """Work, yardstick, how many times less it takes, and what is wanted."""
    sys.path.insert(0, str(Path(__file__).parents[1] / "tui"))
    found = measure(*WANTED)
    size = "x".join(map(str, WANTED))
    return [
        (f"dashboard at {size}, 10 pictures a second", "15 % of a core", 15.0 / found.cpu, 1.0),
        (f"key to picture at {size}, 95 % of them", "50 ms", 0.05 / found.late, 1.0),
    ]


def main() -> None:
    """Print the table."""
    sys.path.insert(0, str(Path(__file__).parents[1] / "tui"))
    print(f"load average {os.getloadavg()[0]:.1f} on {os.cpu_count()} cores")
    print(f"{'size':<10}{'CPU %':>7}{'kB/s':>10}{'key ms':>10}{'p95':>8}{'MB':>10}")
    for columns, lines in SIZES:
        one = measure(columns, lines)
        middle = statistics.median(one.latency)
        print(
            f"{columns}x{lines:<6}{one.cpu:8.1f}{one.output:10.1f}{middle * 1e3:10.0f}{one.late * 1e3:8.0f}"
            f"{one.memory:10.0f}",
            flush=True,
        )
    print(f"first picture of the demo after {min(first_picture() for _ in range(3)):.2f} s (best of 3)")


if __name__ == "__main__":
    under_test() if "--under-test" in sys.argv else main()
