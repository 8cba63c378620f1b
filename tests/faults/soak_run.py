"""Hours of an emulated run compressed in time: link, log, engine and the screen's history, on a clock moved by hand.

Run as a program: `soak_run.py FOLDER HOURS`; at each tenth of the run one line of JSON says how it stands.
"""

import json
import sys
import threading
import time
from datetime import UTC, datetime
from pathlib import Path
from typing import Any

from eastfall.io.emulator import EmulatedLine, EmulatedLink, Emulator
from eastfall.io.health import RunUpdate
from eastfall.io.journey import Winch
from eastfall.io.run import Run
from eastfall.io.runlog import RunLogWriter
from eastfall.io.sitefile import parse_site
from eastfall.tui.store import History

RATE = 200
SITE = """\
[site]
name = "Long Strand"
latitude_deg = 60.1
[shaft]
depth_m = 900.0
diameter_m = 6.0
[run]
kind = "guided"
[[link]]
url = "emulate:"
columns = ["time_s", "depth_m", "tilt_a_deg", "tilt_b_deg", "temperature_c"]
"""
STALLED = 20.0
"""Seconds of real time after which lines that do not come are lost."""


def resident() -> int:
    """Return the memory of this process [kB]."""
    lines = Path("/proc/self/status").read_text(encoding="ascii").splitlines()
    return next(int(line.split()[1]) for line in lines if line.startswith("VmRSS"))


class Shared(Emulator):
    """An emulator that two threads ask: the link's for lines, and the one that moves the clock for what is due."""

    def __init__(self, *arguments: Any, **options: Any) -> None:
        super().__init__(*arguments, **options)
        self._lock = threading.Lock()

    def take(self, link: int, until: float) -> list[EmulatedLine]:
        """Return what has arrived."""
        with self._lock:
            return super().take(link, until)

    def due(self, link: int) -> float | None:
        """Return when the next line arrives."""
        with self._lock:
            return super().due(link)

    def counts(self, link: int) -> dict[str, int]:
        """Return what was taken."""
        with self._lock:
            return super().counts(link)


class Soak:
    """One run of so many hours, down the shaft and up again."""

    def __init__(self, folder: Path, hours: float) -> None:
        self.seconds = round(3600 * hours)
        self.now = 0.0
        self.slowest = 0
        site = parse_site(SITE, "strand.toml")
        speed = 2.2 * site.assumptions.shaft.depth / self.seconds
        winch = Winch(speed=speed, acceleration=max(0.25, 0.1 * speed))
        self.emulator = Shared(site, seed=4, rate=RATE, broken=0.01, winch=winch, until=float(self.seconds))
        self.log = RunLogWriter.create(folder, site, started_at=datetime(2026, 3, 4, tzinfo=UTC))
        self.run = Run(site, log=self.log, clock=lambda: self.now, opener=self._open)
        self.history = History("live", keep=20_000)

    def _open(self, *_: object, **__: object) -> EmulatedLink:
        return EmulatedLink(self.emulator, clock=lambda: self.now)

    def go(self) -> None:
        """Run it, second by second."""
        with self.run:
            for second in range(1, self.seconds + 1):
                update = self._second(float(second))
                if second % max(1, self.seconds // 10) == 0:
                    self._tell(update)

    def _second(self, now: float) -> RunUpdate:
        """Let a second pass and take all that was sent in it: what is left over is lag."""
        self.now = now
        end, steps = time.monotonic() + STALLED, 0
        while True:
            update = self.run.step(0.002)
            self.history.add(update.findings, update.time)
            steps += bool(update.findings)
            due = self.emulator.due(0)
            if (due is None or due >= now) and update.health.frames + update.health.rejected == self._sent():
                self.slowest = max(self.slowest, steps)
                self.history.snapshot(alarms=update.alarms)
                return update
            assert time.monotonic() < end, update.health

    def _sent(self) -> int:
        return sum(self.emulator.counts(0).values())

    def _tell(self, update: RunUpdate) -> None:
        said = {
            "at": self.now,
            "resident": resident(),
            "cpu": time.process_time(),
            "steps": self.slowest,
            "sent": self._sent(),
            "frames": update.health.frames,
            "rejected": update.health.rejected,
            "dropped": update.health.links[0].queue_dropped,
            "faults": dict(update.health.faults),
            "log": str(self.log.path),
        }
        self.slowest = 0
        print(json.dumps(said), flush=True)


if __name__ == "__main__":
    Soak(Path(sys.argv[1]), float(sys.argv[2])).go()
