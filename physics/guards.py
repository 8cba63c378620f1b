"""Faults of the instrument as its readings show them: saturated, frozen, spinning, too warm, short of power.

Each guard places readings against its bound; delays and states are `alarms`, and bad lines `BadLines` here.
"""

from collections.abc import Iterator
from dataclasses import dataclass
from math import log, pi
from typing import Any

import numpy as np
from numpy.typing import NDArray

from eastfall.physics.alarms import BETWEEN, BEYOND, INSIDE
from eastfall.physics.readings import Readings
from eastfall.physics.settings import AlarmName, Instrument, Limits
from eastfall.physics.spikes import TiltSpikes
from eastfall.physics.steps import steps, steps_from

Array = NDArray[np.float64]
Flags = NDArray[np.bool_]
Placed = NDArray[np.int8]

SATURATED: AlarmName = "tilt at end of range"
FROZEN: AlarmName = "tilt frozen"
SPINNING: AlarmName = "spinning"
TEMPERATURE: AlarmName = "probe temperature"
SUPPLY: AlarmName = "supply low"

_CELL = 0.5
"""Slow channels are looked at once in so many seconds."""
_LONGEST = 2.0
"""Azimuths farther apart in time than this say nothing of a turning rate [s]."""
_MOVED = 0.5
"""A tilt can only be called frozen once the line has moved so far with it [m]."""
_FEWEST = 10
_CHANCE = log(1e-9)
"""So unlikely must a run of equal tilts be, by how restless this instrument is, to be called frozen."""
_RESTLESS = 0.05
"""With a smaller part of restless rows an instrument shows no noise, and may well show the same for long."""
_PRIOR = 20.0
"""So many calm rows are taken to have been seen before the first: an instrument is held for calm until it shows its
noise."""
_WARMTH_BAND, _SUPPLY_BAND = 0.5, 0.01
"""Dead bands: of the temperature [K], and of the supply relative to its bound."""


@dataclass(frozen=True, slots=True, eq=False)
class Sighting:
    """What one guard says of a block: instants, placements, depths and values, shape (n,) each, in SI units.

    `host` are the instants on this machine's clock; the same as `time` where it is None.
    """

    name: AlarmName
    time: Array
    placed: Placed
    depth: Array
    value: Array
    host: Array | None = None

    @property
    def quiet(self) -> bool:
        """Whether every row is inside."""
        return not np.count_nonzero(self.placed != INSIDE)


class Guards:
    """Watch the readings of a run; the same however they are cut into blocks.

    Parameters
    ----------
    instrument : Instrument
        Range of tilt, temperature and supply.
    limits : Limits
        Spin and frozen time.
    """

    def __init__(self, instrument: Instrument, limits: Limits) -> None:
        self._instrument = instrument
        self._limits = limits
        self._frozen = _Frozen(limits.frozen)
        self.spikes = TiltSpikes(instrument.spike)
        self._cell = np.nan
        self._azimuth = (np.nan, np.nan)

    def feed(self, readings: Readings) -> tuple[list[Sighting], Flags | None]:
        """Take a block on one clock.

        Returns
        -------
        sightings : list of Sighting
            Of the guards that have something to look at; none without a clock.
        bad : ndarray of bool or None
            Rows whose tilt means nothing; None where there are none.
        """
        if not len(readings):
            return [], None
        found: list[Sighting] = []
        bad = self._saturated(readings, found)
        spikes = self.spikes.feed(readings, bad)
        if spikes is not None:
            bad = spikes if bad is None else bad | spikes
        if np.isnan(readings.time[0]):
            return [], bad
        frozen = self._frozen.feed(readings)
        if frozen is None:
            placed = np.full(len(readings), INSIDE, dtype=np.int8)
        else:
            placed = np.where(frozen, BEYOND, INSIDE)
            bad = frozen if bad is None else bad | frozen
        found.append(self._sighting(FROZEN, readings, placed, readings.depth))
        self._slow(readings, found)
        return found, bad

    @staticmethod
    def _sighting(
        name: AlarmName, readings: Readings, placed: NDArray[np.integer[Any]], value: Array
    ) -> Sighting:
        sides = placed.astype(np.int8, copy=False)
        return Sighting(name, readings.time, sides, readings.depth, value, readings.host_time)

    def _saturated(self, readings: Readings, found: list[Sighting]) -> Flags | None:
        bound = self._instrument.range
        if bound is None:
            return None
        size = np.maximum(np.abs(readings.column("tilt_a")), np.abs(readings.column("tilt_b")))
        # The last digit of a printed range is not to be relied on.
        beyond = size >= bound * (1.0 - 1e-6)
        placed = np.where(np.isnan(size), BETWEEN, np.where(beyond, BEYOND, INSIDE))
        found.append(self._sighting(SATURATED, readings, placed, size))
        return beyond if beyond.any() else None

    def _slow(self, readings: Readings, found: list[Sighting]) -> None:
        """Look at the slow channels of the first row in each cell of time."""
        time = readings.time
        if np.floor(time[0] / _CELL) == self._cell == np.floor(time[-1] / _CELL):
            return  # time does not fall
        cell = np.floor(time / _CELL)
        opens = np.flatnonzero(steps_from(self._cell, cell) != 0.0)
        self._cell = float(cell[-1])
        rows = readings[opens]
        azimuth = rows.column("azimuth")
        if not np.isnan(azimuth).all() or not np.isnan(self._azimuth[0]):
            found.append(self._spin(rows, azimuth))
        low, high = self._instrument.lowest_temperature, self._instrument.highest_temperature
        if low is not None or high is not None:
            warmth = rows.column("temperature")
            over = np.fmax(
                warmth - (np.inf if high is None else high), (-np.inf if low is None else low) - warmth
            )
            found.append(self._sighting(TEMPERATURE, rows, _place(over, _WARMTH_BAND), warmth))
        bound = self._instrument.lowest_supply
        if bound is not None:
            supply = rows.column("supply")
            found.append(self._sighting(SUPPLY, rows, _place(bound - supply, _SUPPLY_BAND * bound), supply))

    def _spin(self, rows: Readings, azimuth: Array) -> Sighting:
        time = rows.time
        lasted = np.diff(time, prepend=self._azimuth[0])
        turned = np.abs((np.diff(azimuth, prepend=self._azimuth[1]) + pi) % (2.0 * pi) - pi)
        self._azimuth = float(time[-1]), float(azimuth[-1])
        with np.errstate(divide="ignore", invalid="ignore"):
            rate = np.where(lasted <= _LONGEST, turned / lasted, np.nan)
        return self._sighting(SPINNING, rows, _place(rate - self._limits.spin, 0.0), rate)


def _place(over: Array, band: float) -> NDArray[np.int_]:
    """Place how far samples are beyond a bound, with a dead band inside it; NaN is BETWEEN."""
    return (over > 0.0).astype(int) - (over <= -band).astype(int)


class _Frozen:
    """Find runs in which both tilts stay the same to the last digit while the line moves.

    How long a run must be depends on how restless the instrument was before it: a row at which the sum of the tilts
    turns back is restless (two in three are, where there is noise), and with a part q of other rows a run of k has a
    chance of q^k. A coarse or noiseless instrument is never called frozen.
    """

    def __init__(self, least: float) -> None:
        self._least = least
        self._last: Array = np.full((3, 2), np.nan)
        self._began = (np.nan, np.nan)
        self._in_run = 0
        self._rows = self._calm = _PRIOR
        self._before = (_PRIOR, _PRIOR)

    def feed(self, readings: Readings) -> Flags | None:
        """Return which rows are frozen; None where none is."""
        data = np.concatenate([self._last, readings.data[2:5]], axis=1)
        self._last = data[:, -2:].copy()
        step = steps(data[1] + data[2])
        same = (data[1, 2:] == data[1, 1:-1]) & (data[2, 2:] == data[2, 1:-1])
        moving = data[0, 2:] != data[0, 1:-1]
        calm = moving & ~(step[1:] * step[:-1] < 0.0)
        changes = np.flatnonzero(~same)
        first = int(changes[0]) if changes.size else same.size
        # No run is longer than this; most blocks of a live feed need no closer look.
        longest = max(self._in_run + first, same.size - changes.size + 1)
        frozen = self._runs(readings, changes, same, moving, calm) if longest >= _FEWEST else None
        self._note(readings, changes, moving, calm)
        return frozen

    def _note(self, readings: Readings, changes: NDArray[np.intp], moving: Flags, calm: Flags) -> None:
        """Keep what the next block needs; the first row of a run counts with what came before it."""
        if changes.size:
            last = int(changes[-1])
            self._began = float(readings.time[last]), float(readings.depth[last])
            self._in_run = int(np.count_nonzero(moving[last + 1 :]))
            self._before = (
                self._rows + int(np.count_nonzero(moving[: last + 1])),
                self._calm + int(np.count_nonzero(calm[: last + 1])),
            )
        else:
            self._in_run += int(np.count_nonzero(moving))
        self._rows += int(np.count_nonzero(moving))
        self._calm += int(np.count_nonzero(calm))

    def _runs(
        self, readings: Readings, changes: NDArray[np.intp], same: Flags, moving: Flags, calm: Flags
    ) -> Flags | None:
        time, depth = readings.time, readings.depth
        count = np.cumsum(moving)
        number = np.cumsum(~same)
        began_time = np.concatenate([[self._began[0]], time[changes]])[number]
        began_depth = np.concatenate([[self._began[1]], depth[changes]])[number]
        in_run = count - np.concatenate([[-self._in_run], count[changes]])[number]
        rows = np.concatenate([[self._before[0]], self._rows + count[changes]])
        calm_rows = np.concatenate([[self._before[1]], self._calm + np.cumsum(calm)[changes]])
        calm_part = np.where(rows - calm_rows < _RESTLESS * rows, 0.0, calm_rows / rows)
        with np.errstate(divide="ignore"):
            needed = np.where(calm_part > 0.0, np.maximum(_FEWEST, _CHANCE / np.log(calm_part)), np.inf)[
                number
            ]
        found: Flags = (
            same
            & (in_run >= needed)
            & (time - began_time >= self._least)
            & (np.abs(depth - began_depth) >= _MOVED)
        )
        return found if found.any() else None


class BadLines:
    """Tell when unreadable lines come too often: `most` of them within `window` seconds, on the host's clock.

    Parameters
    ----------
    most : float
        Lines.
    window : float
        [s].
    """

    def __init__(self, most: float, window: float = 60.0) -> None:
        self._most = max(int(np.ceil(most)), 1)
        self._window = window
        self._kept: Array = np.empty(0)
        self._until = -np.inf

    def feed(self, rejected: Array, now: float) -> list[tuple[float, bool]]:
        """Take host times of bad lines [s]; return the instants up to `now` at which the condition turns on or off."""
        events: list[tuple[float, bool]] = []
        if rejected.size:
            events = self._turns(rejected)
        if self._until < now and self._until > -np.inf:
            events.append((self._until, False))
            self._until = -np.inf
        return events

    def _turns(self, rejected: Array) -> list[tuple[float, bool]]:
        old = self._kept.size
        line = np.maximum.accumulate(np.concatenate([self._kept, np.sort(rejected)]))
        self._kept = line[-self._most :].copy()
        # A condition that bad line i raises (with the one `most` - 1 before it) lasts until that one leaves the window.
        first = max(old, self._most - 1)
        at = np.arange(first, line.size)
        until = line[at - self._most + 1] + self._window
        beyond = until >= line[at]
        if not at.size:
            return []
        before = np.concatenate([[self._until], np.where(beyond[:-1], until[:-1], -np.inf)])
        self._until = float(until[-1]) if beyond[-1] else -np.inf
        return list(_turning(line[at], beyond, before))


def _turning(line: Array, beyond: Flags, before: Array) -> Iterator[tuple[float, bool]]:
    """Yield where the condition turns; `before` is how long it stands at each line if that line adds nothing."""
    standing = before >= line
    for row in np.flatnonzero(((before > -np.inf) & ~standing) | (beyond & ~standing)).tolist():
        if before[row] > -np.inf:
            yield float(before[row]), False
        if beyond[row]:
            yield float(line[row]), True
