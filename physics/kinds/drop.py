"""Bodies falling free: each landing mark, or range reading, against where the body should be at that depth."""

import bisect
from collections import Counter
from dataclasses import dataclass, replace

import numpy as np

from eastfall.physics.budget import combined
from eastfall.physics.expected import ExpectedCurve
from eastfall.physics.findings import RestPoint, Rows, Station
from eastfall.physics.kinds.base import (
    MARK,
    MARKS,
    OF_A_RELEASE,
    ROW,
    Array,
    Batch,
    Judged,
    Plain,
    StationFacts,
    fill_limits,
    one_station,
    rows_of,
    usable,
)
from eastfall.physics.readings import Readings
from eastfall.physics.settings import Assumptions

_EACH_AXIS = frozenset({MARK, MARKS})
"""Inputs that err in east and in north each for itself; a release is two inputs, and all else moves both as one."""
_SAME_LEVEL = 0.05
"""Marks within this depth of each other were made at one level [m]."""


@dataclass(slots=True)
class _Level:
    """The marks at one level: Welford's running mean and sum of squares, so that no mark need be kept."""

    number: int
    depth: float
    count: int
    mean: Array
    squares: Array
    time: float

    def add(self, time: float, offset: Array) -> None:
        self.count += 1
        self.time = time
        away = offset - self.mean
        self.mean = self.mean + away / self.count
        self.squares = self.squares + away * (offset - self.mean)


class Drop(Plain):
    """Findings of a drop series.

    Parameters
    ----------
    assumptions : Assumptions
        Its kind is drop.
    curve : ExpectedCurve
        For the same assumptions.
    """

    def __init__(self, assumptions: Assumptions, curve: ExpectedCurve) -> None:
        self._assumptions = assumptions
        self._curve = curve
        self._levels: list[_Level] = []
        self._last: tuple[_Level, Array] | None = None
        self._tilt_seen = False
        self.unused: Counter[str] = Counter()

    def feed(self, readings: Readings) -> Batch:
        """Take a block."""
        self._tilt_seen |= bool(np.isfinite(readings.column("tilt_a")).any())
        good = np.isfinite(readings.column("east")) & np.isfinite(readings.column("north"))
        readings = usable(readings, good, "no offset", self.unused)
        if not len(readings):
            return Batch.none()
        rows = rows_of(len(readings))
        rows[ROW["time"]], rows[ROW["depth"]] = readings.time, readings.depth
        rows[ROW["host_time"]] = readings.host_time
        rows[ROW["passing"]], rows[ROW["direction"]] = 0, 1
        rows[ROW["measured_east"]] = readings.column("east")
        rows[ROW["measured_north"]] = readings.column("north")
        rows[ROW["expected_east"]], rows[ROW["expected_north"]] = self._curve.look_up(
            self._curve.plumb, readings.depth
        )
        u = self._curve.look_up(self._curve.u, readings.depth)
        rows[ROW["u_east"]], rows[ROW["u_north"]] = np.hypot(u, self._assumptions.instrument.u_offset)
        fill_limits(rows, self._assumptions.limits)
        stations = tuple(self._mark(rows[:, i]) for i in range(len(readings)))
        found = Rows(rows)
        return Batch(
            rows=found, judged=np.stack([found.residual_east, found.residual_north]), stations=stations
        )

    def _mark(self, row: Array) -> Station:
        """Add a mark to its level and give the level's station anew."""
        level = self._level(float(row[ROW["depth"]]))
        level.add(float(row[ROW["time"]]), row[[ROW["measured_east"], ROW["measured_north"]]])
        self._last = (level, row.copy())
        return self._station(level)

    def _level(self, depth: float) -> _Level:
        at = bisect.bisect(self._levels, depth, key=lambda one: one.depth)
        near = [one for one in self._levels[max(at - 1, 0) : at + 1] if abs(one.depth - depth) <= _SAME_LEVEL]
        if near:
            return min(near, key=lambda one: abs(one.depth - depth))
        level = _Level(len(self._levels), depth, 0, np.zeros(2), np.zeros(2), np.nan)
        self._levels.insert(at, level)
        return level

    def _parts(self, level: _Level) -> tuple[tuple[str, ...], Array]:
        """Return the budget of a level's mean: names, and parts of shape (len(names), 2, 1).

        The scatter of the marks, once there are enough of them to tell, stands in for what was assumed of release
        and reading, if it is the larger.
        """
        count, budget = level.count, self._curve.budget
        parts = np.concatenate([budget.at(level.depth), np.full((1, 2, 1), self._u_offset)])
        names = (*budget.names, MARK)
        single = np.array([name in OF_A_RELEASE for name in names])
        assumed = combined(parts[single])[:, 0]
        seen = np.sqrt(level.squares / (count - 1)) if count > 1 else np.zeros(2)
        if np.any(seen > assumed):
            scatter = (np.maximum(seen, assumed) / np.sqrt(count)).reshape(1, 2, 1)
            kept = tuple(name for name, one in zip(names, single, strict=True) if not one)
            return (*kept, MARKS), np.concatenate([parts[~single], scatter])
        parts[single] /= np.sqrt(count)
        return names, parts

    @property
    def _u_offset(self) -> float:
        return self._assumptions.instrument.u_offset

    def _station(self, level: _Level) -> Station:
        names, parts = self._parts(level)
        facts = StationFacts(
            numbers=[level.number],
            depth=np.array([level.depth]),
            time=np.array([level.time]),
            passing=0,
            direction=1,
            measured=level.mean[:, None],
            expected=self._curve.look_up(self._curve.plumb, [level.depth]),
            readings=[level.count],
            still=True,
            names=names,
            parts=parts,
            correlation=np.array([[name not in _EACH_AXIS] for name in names], dtype=float),
        )
        found = one_station(facts, self._assumptions)
        if level.count < 2:
            return found
        east, north = np.sqrt(level.squares / (level.count - 1)).tolist()
        return replace(found, spread_east=east, spread_north=north)

    def close(self) -> tuple[Station, ...]:
        """Return nothing: every mark has given its station already."""
        return ()

    def judged(self) -> Judged | None:
        """Return the mean of the marks at the level of the newest."""
        if self._last is None:
            return None
        mean = self._station(self._last[0])
        return Judged(
            depth=mean.depth,
            measured_east=mean.measured_east,
            measured_north=mean.measured_north,
            expected_east=mean.expected_east,
            expected_north=mean.expected_north,
            u_east=mean.u_east,
            u_north=mean.u_north,
            covariance=mean.covariance,
        )

    def rest_point(self) -> RestPoint | None:
        """Return nothing: a falling body does not swing."""
        return None

    def notes(self) -> tuple[str, ...]:
        """Say where the model ends, and why tilt is not summed."""
        tilt = ("tilt is shown, not summed: a falling body feels no vertical",) if self._tilt_seen else ()
        return (*self._curve.warnings, *tilt)
