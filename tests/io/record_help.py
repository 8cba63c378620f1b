"""What the tests of the record share: a small site, blocks of lines, and a finished log."""

from datetime import UTC, datetime
from pathlib import Path

import numpy as np

from eastfall.io.arrivals import LineBlock, RunEvent
from eastfall.io.runlog import LogPolicy, RunLogWriter
from eastfall.io.sitefile import SiteFile, parse_site

SITE_TEXT = """\
[site]
name = "Kestrel Hollow No. 2"
latitude_deg = 57.30
[shaft]
depth_m = 940.0
diameter_m = 6.0
[run]
kind = "guided"
[limits]
warning_mm = 15.0
action_mm = 25.0
[[link]]
url = "-"
"""
STARTED = datetime(2026, 1, 14, 8, 30, 5, tzinfo=UTC)


def site(text: str = SITE_TEXT) -> SiteFile:
    """Return the small site."""
    return parse_site(text, "kestrel.toml")


def block(*lines: bytes, time: float = 0.0, step: float = 0.0, link: int = 0, first: int = 1) -> LineBlock:
    """Return a block of lines, the first at `time`, `step` apart [s]."""
    times = np.round(time + step * np.arange(len(lines)), 6)
    return LineBlock(data=b"".join(one + b"\n" for one in lines), times=times, first_line=first, link=link)


def writer(folder: Path, **policy: float) -> RunLogWriter:
    """Return a new log in `folder`."""
    rules = LogPolicy(**policy)  # type: ignore[arg-type]
    return RunLogWriter.create(folder, site(), started_at=STARTED, policy=rules)


def written(folder: Path, *, seconds: int = 30, rate: int = 4, close: bool = True, **policy: float) -> Path:
    """Write a log of `seconds` at `rate` lines a second with a note in the middle; return its first part."""
    log = writer(folder, **policy)
    path = log.path
    for number in range(seconds * rate):
        time = number / rate
        log.raw(block(b"%.2f,0.%03d,-0.010" % (number * 0.5, number % 1000), time=time, first=number + 1))
        if number == seconds * rate // 2:
            log.event(RunEvent(time=time, name="note", fields={"text": "water at 12 m", "who": "R. Vane"}))
    if close:
        log.close(float(seconds))
    return path
