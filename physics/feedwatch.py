"""What the host's clock says of the feed: silence, and lines that cannot be read too often; alarms go on the board."""

from math import isfinite

import numpy as np
from numpy.typing import NDArray

from eastfall.physics.board import BAD_LINES, SILENT, Board
from eastfall.physics.findings import AlarmChange
from eastfall.physics.guards import BadLines
from eastfall.physics.readings import Readings
from eastfall.physics.settings import Limits
from eastfall.physics.steps import steps, steps_from

Array = NDArray[np.float64]
_NONE = np.empty(0)


class FeedWatch:
    """Watch the feed; what it says does not depend on how readings and bad lines are cut into blocks.

    Parameters
    ----------
    board : Board
        Where the alarms are, and the newest reading.
    limits : Limits
        How long silence may last, and how many bad lines there may be.
    watched : bool
        False for a capture, which has no arrival times: then nothing is said.
    """

    def __init__(self, board: Board, limits: Limits, *, watched: bool) -> None:
        self._board = board
        self._silent = limits.feed_silent
        self._often = f"{limits.bad_lines_per_minute:g} or more unreadable lines in a minute"
        self._bad_lines = BadLines(limits.bad_lines_per_minute)
        self._watched = watched

    def take(self, readings: Readings, rejected: Array) -> list[AlarmChange]:
        """Take a block of readings and the host times of bad lines [s]; the last reading is the newest from now on."""
        if not len(readings):
            now = float(np.nanmax(rejected)) if np.isfinite(rejected).any() else float("nan")
            return self._unreadable(rejected, now, self._board.newest[:, None])
        if not self._watched:
            self._board.newest = readings.data[:3, -1].copy()
            return []
        rows = np.concatenate([self._board.newest[:, None], readings.data[:3]], axis=1)
        changes = self._silences(rows) if self._may_be_silent(readings) else []
        changes += self._unreadable(rejected, float(rows[1, -1]), rows)
        changes += self._board.pass_time(float(rows[1, -1]), rows)
        self._board.newest = rows[:, -1].copy()
        return changes

    def _may_be_silent(self, readings: Readings) -> bool:
        longest = steps_from(self._board.newest[1], readings.host_time).max()
        return not longest <= self._silent

    def _silences(self, rows: Array) -> list[AlarmChange]:
        """Raise and return the alarm for every gap between time, host time and depth of readings."""
        if not np.isfinite(rows[1, 1:]).all():
            return []
        rows = rows.copy()
        if np.isnan(rows[1, 0]):
            # Before the first reading the feed is reckoned from the start of the run, on the host's clock alone.
            rows[:2, 0] = 0.0
        changes: list[AlarmChange] = []
        for gap in np.flatnonzero(steps(rows[1]) > self._silent).tolist():
            for host, on in ((rows[1, gap] + self._silent, True), (rows[1, gap + 1], False)):
                changes += self._silence(rows, float(host), on=on)
        return changes

    def _silence(self, rows: Array, host_time: float, *, on: bool) -> list[AlarmChange]:
        message = f"no reading for {self._silent:g} s" if on else "readings again"
        return self._board.turn(SILENT, host_time, on=on, message=message, rows=rows)

    def _unreadable(self, rejected: Array, now: float, rows: Array) -> list[AlarmChange]:
        """Raise and return the alarm of bad lines up to a host time [s], dated by the last of the rows before it."""
        if not self._watched or not isfinite(now):
            return []
        changes: list[AlarmChange] = []
        for when, on in self._bad_lines.feed(rejected[np.isfinite(rejected)], now):
            message = self._often if on else "lines can be read again"
            changes += self._board.turn(BAD_LINES, when, on=on, message=message, rows=rows)
        return changes

    def tick(self, host_time: float) -> list[AlarmChange]:
        """Let time pass without a reading, up to a host time [s]."""
        newest = self._board.newest
        before = float(np.nan_to_num(newest[1]))
        changes: list[AlarmChange] = []
        if self._watched and host_time - before > self._silent:
            row = newest if isfinite(newest[1]) else np.array([0.0, 0.0, np.nan])
            changes += self._silence(row[:, None], before + self._silent, on=True)
        changes += self._unreadable(_NONE, host_time, newest[:, None])
        return changes + self._board.pass_time(host_time)
