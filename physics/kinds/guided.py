"""A probe or cage in guides: tilt summed over depth, against what a plumb guide shows on the same journey."""

from collections import Counter

import numpy as np
from numpy.typing import NDArray

from eastfall.physics.calibration import corrected
from eastfall.physics.expected import ExpectedCurve, reach
from eastfall.physics.findings import RestPoint, Rows, Station
from eastfall.physics.kinds.base import (
    ROW,
    Array,
    Batch,
    Judged,
    StationFacts,
    fill_limits,
    inside_shaft,
    rows_of,
    stations_of,
    usable,
)
from eastfall.physics.moving import LineSpeed, lean
from eastfall.physics.passes import Passes, Stretch, crossings
from eastfall.physics.readings import Readings
from eastfall.physics.settings import Assumptions
from eastfall.physics.tilt import OffsetSum, increments

_TURN = 0.2
"""Coming back by more than this ends a pass [m]: beyond the jerking of a rope, below any station spacing in use."""
_REACHED = 0.05
"""A pass that turns this close to a station has reached it [m]."""

# What is remembered of a row between blocks; the weight of the random part comes after these.
_KEPT = ("time", "depth", "measured_east", "measured_north", "expected_east", "expected_north")

_PIECE = 4096
_OWN = ("tilt, random", "tilt, zero", "tilt, scale", "azimuth", "depth")
"""The inputs of the measured offset's uncertainty."""


class Guided:
    """Findings of a guided run.

    Parameters
    ----------
    assumptions : Assumptions
        Its kind is guided.
    curve : ExpectedCurve
        For the same assumptions.
    """

    def __init__(self, assumptions: Assumptions, curve: ExpectedCurve) -> None:
        self._assumptions = assumptions
        self._curve = curve
        guide = assumptions.guide
        self._speed = LineSpeed()
        self._sum = OffsetSum(guide.start_east, guide.start_north, guide.method)
        turn = min(_TURN, assumptions.run.station_every / 4.0)
        self._passes = Passes(turn, assumptions.shaft.depth / 2.0)
        self._start: tuple[float, Array] | None = None
        self._ridden = 0.0
        self._ridden_to: float | None = None
        self._last: Array | None = None
        self._extreme: Array | None = None
        self._taken = 0
        self._closed = 0
        self.unused: Counter[str] = Counter()
        self._no_clock = False

    def feed(self, readings: Readings) -> Batch:
        """Take a block."""
        readings = inside_shaft(readings, self._curve, self.unused)
        east, north = self._slopes(readings)
        good = np.isfinite(east) & (east * east + north * north < 1.0)
        readings = usable(readings, good, "no usable tilt", self.unused)
        if not len(readings):
            return Batch.none()
        rows, weight = self._rows(readings, east[good], north[good])
        stations = self._pass_through(rows, weight)
        fill_limits(rows, self._assumptions.limits)
        found = Rows(rows)
        return Batch(
            rows=found, judged=np.stack([found.residual_east, found.residual_north]), stations=stations
        )

    def _slopes(self, readings: Readings) -> tuple[Array, Array]:
        instrument = self._assumptions.instrument
        a, b = corrected(
            readings.column("tilt_a"), readings.column("tilt_b"), readings.column("temperature"), instrument
        )
        azimuth = readings.column("azimuth")
        given = np.isfinite(azimuth)
        if not given.any():
            return increments(a, b, instrument.a_azimuth + instrument.north_offset)
        return increments(a, b, np.where(given, azimuth, instrument.a_azimuth) + instrument.north_offset)

    def _rows(self, readings: Readings, east: Array, north: Array) -> tuple[Array, Array]:
        rows = rows_of(len(readings))
        depth = readings.depth
        rows[ROW["time"]], rows[ROW["depth"]] = readings.time, depth
        speed, lag = self._line_speed(readings)
        rows[ROW["speed"]] = speed
        measured_east, measured_north, weight = self._sum.update(depth, north, east)
        rows[ROW["measured_east"]], rows[ROW["measured_north"]] = measured_east, measured_north
        still = self._curve.look_up(self._curve.plumb, depth)
        if self._start is None:
            self._start = (float(depth[0]), still[:, 0].copy())
        expected = still - self._start[1][:, None]
        expected[0] -= self._ride(depth, speed, lag)
        rows[ROW["expected_east"]], rows[ROW["expected_north"]] = expected
        rows[ROW["u_east"]], rows[ROW["u_north"]] = self._uncertainty(rows, weight)
        return rows, weight

    def _line_speed(self, readings: Readings) -> tuple[Array, Array]:
        """Return speed and acceleration of the line; without a clock the site's speed stands in."""
        speed, acceleration = self._speed.update(readings.time, readings.depth)
        unknown = np.isnan(readings.time)
        if unknown.any():
            self._no_clock = True
            before = readings.depth[0] if self._last is None else self._last[1]
            steps = np.sign(np.diff(readings.depth, prepend=before))
            speed = np.where(unknown, steps * abs(self._assumptions.guide.line_speed), speed)
        return speed, acceleration

    def _ride(self, depth: Array, speed: Array, acceleration: Array) -> Array:
        """Return ∫ ε dz so far at each row [m]: how far west a plumb guide seems to have gone.

        The speed of a row is that of the step that led to it. While it is not known yet (the first fractions of a
        second of a run) steps are kept waiting for the first speed that is.
        """
        site, gravity = self._assumptions.site, self._curve.models.field.gravity
        felt = gravity - np.clip(np.nan_to_num(acceleration), -0.5 * gravity, 0.5 * gravity)
        known = np.isfinite(speed)
        angle = lean(speed[known], site.latitude, felt[known])
        before = self._ridden_to if self._ridden_to is not None else depth[0]
        terms = np.zeros(depth.size + 1)
        terms[0] = self._ridden
        terms[1:][known] = angle * np.diff(depth[known], prepend=before)
        ridden = np.cumsum(terms)[1:]
        self._ridden = float(ridden[-1])
        self._ridden_to = float(depth[known][-1]) if known.any() else float(before)
        return ridden

    def _parts(self, depth: Array, east: Array, north: Array, weight: Array) -> Array:
        """Return what each input of `_OWN` contributes to the measured offset, shape (len(_OWN), 2, n) [m]."""
        instrument, guide = self._assumptions.instrument, self._assumptions.guide
        start = self._start[0] if self._start else 0.0
        parts = np.empty((len(_OWN), 2, depth.size))
        gone_east, gone_north = np.abs(east - guide.start_east), np.abs(north - guide.start_north)
        parts[0] = instrument.u_tilt * np.sqrt(weight)
        parts[1] = instrument.u_zero * np.abs(depth - start)
        parts[2] = instrument.u_scale * gone_east, instrument.u_scale * gone_north
        parts[3] = instrument.u_azimuth * gone_north, instrument.u_azimuth * gone_east
        parts[4] = instrument.u_depth_fraction * gone_east, instrument.u_depth_fraction * gone_north
        return parts

    def _uncertainty(self, rows: Array, weight: Array) -> Array:
        u = self._curve.look_up(self._curve.u, rows[ROW["depth"]])
        u *= u
        # In pieces that stay in the processor's cache: the parts of a long block would not.
        for start in range(0, weight.size, _PIECE):
            piece = slice(start, start + _PIECE)
            depth, east, north = (
                rows[ROW[name], piece] for name in ("depth", "measured_east", "measured_north")
            )
            own = self._parts(depth, east, north, weight[piece])
            np.multiply(own, own, out=own)
            u[:, piece] += own.sum(axis=0)
        return np.sqrt(u, out=u)

    def _pass_through(self, rows: Array, weight: Array) -> tuple[Station, ...]:
        depth = rows[ROW["depth"]]
        kept = np.stack([*(rows[ROW[name]] for name in _KEPT), weight])
        stations: list[Station] = []
        for stretch in self._passes.stretches(depth):
            part = kept[:, stretch.rows]
            rows[ROW["passing"], stretch.rows] = stretch.passing
            rows[ROW["direction"], stretch.rows] = stretch.direction
            stations += self._crossed(stretch, part)
            self._remember(stretch, part)
            if stretch.ended:
                stations += self._end_of_pass(stretch.passing, stretch.direction)
        return tuple(stations)

    def _crossed(self, stretch: Stretch, part: Array) -> list[Station]:
        depths, rows, readings = [], [], []
        done = 0
        for depth, row in crossings(stretch, self._assumptions.run.station_every, reach(self._assumptions)):
            before = part[:, row - 1] if row else self._last
            depths.append(depth)
            rows.append(_between(before, part[:, row], depth))
            readings.append(self._taken + row + 1 - done)
            self._taken = 0
            done = row + 1
        self._taken += part.shape[1] - done
        return self._stations(stretch.passing, stretch.direction, depths, rows, readings)

    def _remember(self, stretch: Stretch, part: Array) -> None:
        if not part.shape[1]:
            return
        at = int(np.argmax(stretch.direction * part[1]))
        if (
            stretch.first
            or self._extreme is None
            or stretch.direction * (part[1, at] - self._extreme[1]) > 0.0
        ):
            self._extreme = part[:, at].copy()
        self._last = part[:, -1].copy()

    def _end_of_pass(self, passing: int, direction: int) -> list[Station]:
        """Close the station that a pass stopped just short of."""
        if self._extreme is None:
            return []
        every = self._assumptions.run.station_every
        depth = float(self._extreme[1])
        short_of = direction * (np.floor(direction * depth / every) + 1.0) * every + 0.0
        near = direction * (short_of - depth) <= min(_REACHED, every / 10.0)
        if near and 0.0 <= short_of <= reach(self._assumptions):
            readings, self._taken = [self._taken], 0
            return self._stations(passing, direction, [float(short_of)], [self._extreme], readings)
        return []

    def _stations(
        self, passing: int, direction: int, depths: list[float], rows: list[Array], readings: list[int]
    ) -> list[Station]:
        if not depths:
            return []
        time, at, east, north, expected_east, expected_north, weight = np.stack(rows, axis=1)
        own = self._parts(at, east, north, weight)
        facts = StationFacts(
            number=self._closed,
            depth=np.array(depths),
            time=time,
            passing=passing,
            direction=direction,
            measured=np.stack([east, north]),
            expected=np.stack([expected_east, expected_north]),
            readings=readings,
            still=False,
            names=(*_OWN, *self._curve.budget.names),
            parts=np.concatenate([own, self._curve.budget.at(at)]),
        )
        self._closed += len(depths)
        return stations_of(facts, self._assumptions.limits)

    def close(self) -> tuple[Station, ...]:
        """Close the station that the last pass stopped just short of."""
        return tuple(self._end_of_pass(self._passes.passing, self._passes.direction))

    def judged(self) -> Judged | None:
        """Return the newest row."""
        if self._last is None:
            return None
        _, depth, east, north, expected_east, expected_north, weight = (float(one) for one in self._last)
        rows = rows_of(1)
        rows[ROW["depth"]], rows[ROW["measured_east"]], rows[ROW["measured_north"]] = depth, east, north
        u_east, u_north = self._uncertainty(rows, np.array([weight]))[:, 0]
        return Judged(
            depth=depth,
            measured_east=east,
            measured_north=north,
            expected_east=expected_east,
            expected_north=expected_north,
            u_east=float(u_east),
            u_north=float(u_north),
        )

    def rest_point(self) -> RestPoint | None:
        """Return nothing: a guided probe does not swing."""
        return None

    def notes(self) -> tuple[str, ...]:
        """Say where the answer leans on an assumption."""
        if self._no_clock:
            return ("no clock in the readings: line speed taken from guide.line_speed_mps",)
        return ()


def _between(before: NDArray[np.float64] | None, after: Array, depth: float) -> Array:
    """Interpolate a row at a depth between two rows; without a row before, the row itself."""
    if before is None or after[1] == before[1]:
        return after
    share = (depth - before[1]) / (after[1] - before[1])
    return before + share * (after - before)
