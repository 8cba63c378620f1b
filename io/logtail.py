"""What the end of a run log says, without reading the rest of it."""

import contextlib
import os
from pathlib import Path

import msgspec

from eastfall.io.arrivals import RunEvent
from eastfall.io.logformat import LONGEST, RECORDS, Record
from eastfall.io.seal import beside, first_part, opened

_TAIL = 64 << 10


def last_time(path: Path) -> float:
    """Return the last time that a log states, from the end of its last part [s]; 0 if it holds nothing yet.

    Raises
    ------
    LogError
        The file cannot be opened or is no run log.
    """
    part, time = first_part(path), 0.0
    while True:
        records = _tail(part)
        time = max([time, *(one.t for one in records)])
        name = records[-1].next if records else None
        if name is None or not beside(part, name).exists():
            return time
        part = beside(part, name)


def last_event(path: Path, name: str) -> RunEvent | None:
    """Return the newest event of a name among the last records of a log of one part; None if it is not there.

    Raises
    ------
    LogError
        The file cannot be opened or is no run log.
    """
    found = [one for one in _tail(first_part(path)) if one.event == name]
    return RunEvent(time=found[-1].t, name=name, fields=found[-1].fields or {}) if found else None


def _tail(path: Path) -> list[Record]:
    """Return the last records of a part that can be read."""
    with opened(path) as file:
        size = file.seek(0, os.SEEK_END)
        reach = _TAIL
        while True:
            file.seek(max(size - reach, 0))
            lines = file.read(reach).split(b"\n")[1:-1]
            if lines or reach >= size:
                break
            reach *= 8
    records = []
    for line in lines:
        with contextlib.suppress(msgspec.DecodeError, UnicodeDecodeError):
            records.append(RECORDS.decode(line))
    return [one for one in records if abs(one.t) <= LONGEST]
