"""Puts arrivals in the run log, and holds them in memory, within a bound, while the log cannot be written.

The file itself is `io.runlog`. Nothing here raises: a disk that is full must not stop the measurement.
"""

import os
from collections import deque

from eastfall.io.arrivals import Arrival, LineBlock, RunEvent
from eastfall.io.runlog import RunLogWriter
from eastfall.io.safetext import safe

HELD = 16 << 20
"""Bytes of lines held in memory while the log cannot be written."""
RETRY = 1.0
"""Seconds between tries."""
_EVENT_SIZE = 200
"""What an event counts for against the bound [bytes]."""


class Recorder:
    """A run log that may fail for a while.

    Parameters
    ----------
    log : RunLogWriter, optional
        None records nothing.
    limit : int
        See `HELD`.

    Attributes
    ----------
    trouble : str
        What is wrong; empty while recording works.
    lost : int
        Lines and events that the record lacks because the memory was full: then a replay cannot repeat the run. The
        record itself says so, in the place where they are missing, by the event "lost" with their count.
    """

    def __init__(self, log: RunLogWriter | None, limit: int = HELD) -> None:
        self.log = log
        self.trouble = ""
        self.lost = 0
        self._told = 0
        """How many of the lost the record speaks of."""
        self._limit = limit
        self._held: deque[Arrival] = deque()
        self._size = 0
        self._retry_at = 0.0

    @property
    def held(self) -> int:
        """Arrivals that wait to be written."""
        return len(self._held)

    def put(self, arrival: Arrival) -> None:
        """Record an arrival, or hold it behind those that wait."""
        if self.log is None:
            return
        if not self.trouble and self._written(arrival):
            return
        self._held.append(arrival)
        self._size += _size(arrival)
        while self._size > self._limit:
            gone = self._held.popleft()
            self._size -= _size(gone)
            self.lost += len(gone) if isinstance(gone, LineBlock) else 1

    def tick(self, time: float) -> None:
        """Let time pass [s]: what is held is tried again, and the log seals what is due."""
        if self.log is None or (self.trouble and time < self._retry_at):
            return
        self._retry_at = time + RETRY
        while self._held and self._owned_up(_stamp(self._held[0])) and self._written(self._held[0]):
            self._size -= _size(self._held.popleft())
        if not self._held:
            self._ticked(time)

    def close(self, time: float) -> None:
        """Write what can be written and close the log; `trouble` says whether that worked."""
        if self.log is None:
            return
        self._retry_at = time
        self.tick(time)
        self.lost += sum(len(one) if isinstance(one, LineBlock) else 1 for one in self._held)
        self._held.clear()
        self._owned_up(time)
        try:
            self.log.close(time)
        except OSError as error:
            self._failed(error)

    def _owned_up(self, time: float) -> bool:
        """Write how many lines and events are missing here, if any; return whether that is done."""
        missing = self.lost - self._told
        if not missing:
            return True
        message = f"{missing} lines or events are missing here: they could not be written"
        done = self._written(RunEvent(time=time, name="lost", fields={"count": missing, "message": message}))
        self._told += missing if done else 0
        return done

    def _ticked(self, time: float) -> None:
        try:
            if self.log is not None:
                self.log.tick(time)
        except OSError as error:
            self._failed(error)
        else:
            self.trouble = ""

    def _written(self, arrival: Arrival) -> bool:
        if self.log is None:
            return True
        try:
            if isinstance(arrival, LineBlock):
                self.log.raw(arrival)
            else:
                self.log.event(arrival)
        except OSError as error:
            self._failed(error)
            return False
        return True

    def _failed(self, error: OSError) -> None:
        # The reason first: on a narrow screen the end of a long path is what may be cut.
        reason = f"{os.strerror(error.errno)}: " if error.errno else ""
        self.trouble = safe(f"{reason}{error}", 200)


def _stamp(arrival: Arrival) -> float:
    return float(arrival.times[0]) if isinstance(arrival, LineBlock) else arrival.time


def _size(arrival: Arrival) -> int:
    return len(arrival.data) if isinstance(arrival, LineBlock) else _EVENT_SIZE
