"""The alarms of a run on their two clocks, in words and with a depth; what raises them is known to others.

Limits and guards are judged on the time of the readings. What only this machine knows comes on the host's clock. Each
change bears both: the other clock by the difference that the reading before it had.
"""

from collections.abc import Callable
from math import isfinite, nan

import numpy as np
from numpy.typing import NDArray

from eastfall.physics.alarms import Alarm, Change, Rule
from eastfall.physics.errors import ParameterError
from eastfall.physics.findings import AlarmChange, AlarmView
from eastfall.physics.guards import FROZEN, SATURATED, SPINNING, SUPPLY, TEMPERATURE, Sighting
from eastfall.physics.settings import AlarmName, Limits

ACTION: AlarmName = "action limit"
WARNING: AlarmName = "warning limit"
WALL: AlarmName = "wall clearance"
SILENT: AlarmName = "feed silent"
BAD_LINES: AlarmName = "bad lines"
JUMP: AlarmName = "depth jump"

_DELAYED = (ACTION, WARNING, WALL, SPINNING, TEMPERATURE, SUPPLY)
_SLOW_TO_GO = (SATURATED, FROZEN)
"""Raised at once: what their readings show must not be believed for a second; they go with the off-delay."""
_ON_HOST = (SILENT, BAD_LINES)

Array = NDArray[np.float64]
_SHOWN: dict[str, Callable[[float], str]] = {
    SATURATED: lambda value: f"{np.degrees(value):.2f}°",
    SPINNING: lambda value: f"{np.degrees(value):.0f}°/s",
    TEMPERATURE: lambda value: f"{value - 273.15:.1f} °C",
    SUPPLY: lambda value: f"{value:.2f} V",
    FROZEN: lambda _: "",
}


def _in_mm(value: float) -> str:
    return f"{value * 1000.0:.1f} mm"


class Board:
    """All alarms of a run.

    Parameters
    ----------
    limits : Limits
        Delays, and which alarms latch.
    """

    def __init__(self, limits: Limits) -> None:
        self._limits = limits
        self._on_readings: dict[str, Alarm] = {
            name: self._new(name) for name in (*_DELAYED, *_SLOW_TO_GO, JUMP)
        }
        self._on_host: dict[str, Alarm] = {name: self._new(name) for name in _ON_HOST}
        self._messages: dict[str, str] = {}
        self._held: dict[str, tuple[float, float, float]] = {}
        self.changes: list[AlarmChange] = []
        self._latest: dict[str, AlarmChange] = {}
        self.newest: Array = np.full(3, np.nan)
        """Time, host time and depth of the newest reading."""
        self.depth = float("nan")
        """Of the newest reading that was used [m]."""

    def _new(self, name: str) -> Alarm:
        limits = self._limits
        return Alarm(
            Rule(
                name=name,
                on_delay=limits.on_delay if name in _DELAYED else 0.0,
                off_delay=limits.off_delay if name in _DELAYED or name in _SLOW_TO_GO else 0.0,
                latching=name in limits.latching,
            )
        )

    def keep(self, changes: list[AlarmChange]) -> None:
        """Keep changes that were told."""
        self.changes += changes
        for one in changes:
            self._latest[one.name] = one

    # -- on the readings' clock ------------------------------------------------------------------------------------

    def see(self, seen: Sighting) -> list[AlarmChange]:
        """Take samples placed against their bound, in order of time; return the changes they settle."""
        if not seen.time.size:
            return []
        alarm = self._on_readings[seen.name]
        changes = [] if alarm.idle and seen.quiet else alarm.sample(seen.time, seen.placed)
        told = [self._worded(one, seen) for one in changes]
        self._held[seen.name] = _at(seen, -1)
        return told

    def _worded(self, change: Change, seen: Sighting) -> AlarmChange:
        at = int(np.searchsorted(seen.time, change.time, side="right")) - 1
        here = _at(seen, max(at, 0))
        depth, value, apart = here if at >= 0 else self._held.get(seen.name, here)
        shown = _SHOWN.get(seen.name, _in_mm)(value) if isfinite(value) else ""
        message = f"{seen.name} at {depth:.1f} m" + (f", {shown}" if shown else "")
        self._messages[seen.name] = message
        return _told(seen.name, change, (change.time, change.time + apart), depth, message)

    def jumped(self, time: float, before: float, after: float, host_time: float = nan) -> list[AlarmChange]:
        """Raise the alarm of a depth that jumped [m] at a time [s]; its condition is over at once."""
        alarm = self._on_readings[JUMP]
        message = f"depth jumped from {before:.2f} m to {after:.2f} m; not summed across"
        self._messages[JUMP] = message
        changes = alarm.set(time, on=True) + alarm.set(time, on=False)
        return [_told(JUMP, one, (one.time, host_time), after, message) for one in changes]

    # -- on the host's clock ---------------------------------------------------------------------------------------

    def turn(
        self, name: str, host_time: float, *, on: bool, message: str, rows: Array | None = None
    ) -> list[AlarmChange]:
        """Say that a condition stands, or is gone, from a host time [s] on.

        Parameters
        ----------
        name : str
            Of the alarm; one that is not known yet is made.
        host_time : float
            [s].
        on : bool
            Whether it stands.
        message : str
            What it is about.
        rows : ndarray, shape (3, n), optional
            Time, host time and depth of the readings to date it by; the newest alone by default.
        """
        alarm = self._on_host.get(name)
        if alarm is None:
            alarm = self._on_host[name] = self._new(name)
        if alarm.standing == on:
            return []
        # What fell due before keeps the words that it had then.
        due = self._dated(alarm.tick(host_time), name, self._messages.get(name, ""), rows)
        self._messages[name] = message
        return due + self._dated(alarm.set(host_time, on=on), name, message, rows)

    def pass_time(self, host_time: float, rows: Array | None = None) -> list[AlarmChange]:
        """Let the host's clock go on to a time [s], past the readings `rows` as for `turn`."""
        changes: list[AlarmChange] = []
        for name, alarm in self._on_host.items():
            changes += self._dated(alarm.tick(host_time), name, self._messages.get(name, ""), rows)
        return changes

    def _dated(
        self, changes: list[Change], name: str, message: str, rows: Array | None = None
    ) -> list[AlarmChange]:
        """Date each change by the reading that was the newest then, whenever it is looked at."""
        told = []
        for one in changes:
            time, host, depth = self._newest_at(one.time, rows).tolist()
            apart = host - time if isfinite(host - time) else 0.0
            told.append(_told(name, one, (one.time - apart, one.time), depth, message))
        return told

    def _newest_at(self, host_time: float, rows: Array | None) -> Array:
        if rows is None or np.isnan(rows[1, -1]):
            return self.newest
        before = int(np.isnan(rows[1, 0]))  # the run before its first reading
        at = before + int(np.searchsorted(rows[1, before:], host_time))
        if at == rows.shape[1] or rows[1, at] != host_time:
            at = max(at - 1, 0)
        return rows[:, at]

    # -- by hand ---------------------------------------------------------------------------------------------------

    def acknowledge(self, host_time: float, name: str, who: str) -> list[AlarmChange]:
        """Acknowledge an alarm at a host time [s]."""
        alarm, at = self._named(name, host_time)
        words = f"acknowledged by {who}" if who else "acknowledged"
        return self._by_hand(name, alarm.acknowledge(at), words, host_time - at)

    def shelve(self, host_time: float, name: str, seconds: float, reason: str, who: str) -> list[AlarmChange]:
        """Shelve an alarm at a host time [s] for some seconds, with a reason."""
        if not reason.strip():
            raise ParameterError("reason", reason, "", "a few words on why the alarm is shelved")
        alarm, at = self._named(name, host_time)
        by = f" by {who}" if who else ""
        words = f"shelved{by} for {seconds:g} s: {reason}"
        return self._by_hand(name, alarm.shelve(at, seconds), words, host_time - at)

    def _named(self, name: str, host_time: float) -> tuple[Alarm, float]:
        """Return an alarm and the instant on its own clock."""
        if name in self._on_readings:
            return self._on_readings[name], float(np.nan_to_num(self.newest[0]))
        if name in self._on_host:
            return self._on_host[name], host_time
        known = ", ".join([*self._on_readings, *self._on_host])
        raise ParameterError("alarm", name, "", f"one of {known}")

    def _by_hand(self, name: str, changes: list[Change], words: str, apart: float) -> list[AlarmChange]:
        message = f"{self._messages.get(name, name)}; {words}"
        if name in self._on_host:
            return self._dated(changes, name, message)
        return [_told(name, one, (one.time, one.time + apart), self.depth, message) for one in changes]

    # -- looking ---------------------------------------------------------------------------------------------------

    def views(self) -> tuple[AlarmView, ...]:
        """Return every alarm that is not normal, the newest first."""
        standing = {
            name: alarm
            for name, alarm in {**self._on_readings, **self._on_host}.items()
            if alarm.state != "normal"
        }
        if not standing:
            return ()
        newest = self._latest
        views = [
            AlarmView(
                name=name,
                state=alarm.state,
                since=newest[name].host_time if name in newest else alarm.since,
                depth=newest[name].depth if name in newest else float("nan"),
                message=self._messages.get(name, ""),
            )
            for name, alarm in standing.items()
        ]
        return tuple(sorted(views, key=lambda one: -one.since))


def _at(seen: Sighting, row: int) -> tuple[float, float, float]:
    """Return depth, value, and how far this machine's clock is ahead of the readings', at a row."""
    apart = 0.0 if seen.host is None else float(seen.host[row] - seen.time[row])
    return float(seen.depth[row]), float(seen.value[row]), apart if isfinite(apart) else 0.0


def _told(name: str, change: Change, at: tuple[float, float], depth: float, message: str) -> AlarmChange:
    """Return a change in words; `at` is its instant on the readings' clock and on this machine's [s]."""
    return AlarmChange(
        time=at[0],
        depth=depth,
        name=name,
        old=change.old,
        new=change.new,
        message=message,
        host_time=at[1],
    )
