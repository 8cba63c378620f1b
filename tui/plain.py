"""The plain text mode: one line a station, an alarm or a few seconds; for screen readers, pipes, dumb terminals."""

from collections.abc import Callable
from typing import TYPE_CHECKING

from eastfall.tui import words
from eastfall.tui.units import METRIC, Units

if TYPE_CHECKING:
    from eastfall.io.run import RunUpdate
    from eastfall.physics.findings import AlarmChange, Station
    from eastfall.physics.settings import Kind


class PlainLines:
    """Turn updates into lines of text.

    Parameters
    ----------
    write : callable
        Takes a line without its end.
    kind : {"guided", "hung", "drop"}
        Of the run.
    every : float
        Seconds of the run between two lines on how things stand.
    units : Units
        Of the reader.
    """

    def __init__(
        self, write: Callable[[str], None], kind: "Kind", every: float = 5.0, units: Units = METRIC
    ) -> None:
        self._write = write
        self._kind = kind
        self._units = units
        self._every = every
        self._next = 0.0
        self._refused, self._next_refusal = 0, 0.0

    def take(self, update: "RunUpdate") -> None:
        """Write what an update brought."""
        for one in update.findings:
            for station in one.stations:
                self._write(self._station(station))
            for change in one.alarms:
                self._write(self._alarm(change))
        self._tell_refusal(update)
        if update.time >= self._next:
            self._next = update.time + self._every
            self._write(f"{words.clock(update.time)} {words.answer(update.standing, self._units)}")

    def end(self, update: "RunUpdate") -> None:
        """Write how things stand at the end."""
        health = update.health
        self._write(f"{words.clock(update.time)} {words.answer(update.standing, self._units)}")
        self._write(words.steering(update.standing, self._kind, self._units))
        self._write(f"{health.frames} readings used, {health.rejected} lines refused")

    def _tell_refusal(self, update: "RunUpdate") -> None:
        """Say what is wrong with the newest line that was refused: whoever types readings wants to know at once."""
        health = update.health
        if health.rejected <= self._refused or update.time < self._next_refusal:
            return
        self._refused, self._next_refusal = health.rejected, update.time + self._every
        for fault in filter(None, (one.last_fault for one in health.links)):
            self._write(f"refused {fault}")

    def _station(self, one: "Station") -> str:
        at = f"{self._units.depth(one.depth)} {self._units.long}"
        how = words.taken(one, self._kind) if self._kind == "drop" else one.direction
        return f"station {at} {how}: {words.answer(one, self._units)}"

    def _alarm(self, one: "AlarmChange") -> str:
        what = words.reworded(one.message, self._units)
        return f"alarm {words.clock(one.host_time)} {one.name}: {one.old} -> {one.new}; {what}"
