"""A plumb line or a probe hanging free: where its bob comes to rest, against where a bob hangs in a plumb shaft."""

from collections import Counter
from math import nan

import numpy as np
from numpy.typing import NDArray

from eastfall.physics import swing
from eastfall.physics.budget import combined, joint
from eastfall.physics.calibration import corrected
from eastfall.physics.expected import ExpectedCurve
from eastfall.physics.findings import RestPoint, Rows, Station
from eastfall.physics.hung import free_period, single_swing
from eastfall.physics.kinds.azimuths import azimuth_of_a
from eastfall.physics.kinds.base import (
    EXPECTED,
    READINGS,
    REST_POINT,
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
from eastfall.physics.kinds.shares import AZIMUTH, SCALE, ZERO, correlation_of_scales, of_axes
from eastfall.physics.lineangle import LineAngle, line_angle
from eastfall.physics.moving import LONGEST_GAP, LineSpeed
from eastfall.physics.readings import Readings
from eastfall.physics.settings import Assumptions
from eastfall.physics.steps import steps_from
from eastfall.physics.tilt import increments

Flags = NDArray[np.bool_]

_SAME_LEVEL = 0.25
"""A bob this near the depth where it came to rest is still at that level [m]: a wire stretches and creeps."""
_RUNNING = 0.02
"""A line faster than this is running [m/s]; its readings belong to no level."""
_FIRST_ESTIMATE = 1.0
_LATER = 0.02
"""The rest point is worked out anew after a second, later after a fiftieth of the time spent at the level: its
uncertainty shrinks no faster, and the cost of an hour stays bounded."""
_SETTLED = 2.0
"""A line that runs on sooner than this has made no halt [s]."""
_APART = 2.0
"""Readings further apart than this, from one level to another, say nothing of a running line: it may have run and
stopped in between, as where a person reads a scale at each level [s]."""
_PASSING = "read once in passing"
_UNSEEN = "swing not seen yet"
_BY_HAND = 10.0
"""Readings at least this far apart are taken by hand, from a bob that a person saw at rest [s]."""
_WANTED = 0.00025
"""Standard uncertainty of a rest point for which the swings needed are told [m]: ±0.5 mm expanded."""
_QUIET = 3.0
"""Readings that scatter by less than this many times their own uncertainty show a bob at rest."""
_OF_A_ROW = tuple(name for name in Judged.__slots__ if name in ROW)


class _Level:
    """The readings at one level."""

    def __init__(self, depth: float, time: float, tracker: swing.RestPointTracker) -> None:
        self.depth = depth
        self.single_swing = float(single_swing(max(depth, 0.0)))
        self.tracker = tracker
        self.began = self.time = time
        self.due = time + _FIRST_ESTIMATE
        self.count = 0
        self.origin: Array = np.zeros(2)
        self.sums: Array = np.zeros((5, 1))
        """Of offsets from `origin`, of their squares, and of east times north."""
        self.rest: swing.RestPoint | None = None
        self.direct = True
        self.expected: Array = np.zeros(2)
        self.hurried = False
        """Come to at once from another level."""

    @property
    def swing_seen(self) -> bool:
        """Whether the readings can tell rest from swing: they span a single swing, or were taken by hand."""
        dwelt = self.time - self.began
        return not dwelt < self.single_swing or dwelt >= _BY_HAND * (self.count - 1)

    def mean(self) -> Array:
        """Return the mean of the readings, shape (2,) [m]."""
        return self.origin + self.sums[:2, 0] / max(self.count, 1)

    def scatter(self) -> Array:
        """Return their standard deviation, shape (2,) [m]; zero for one reading."""
        if self.count < 2:
            return np.zeros(2)
        mean = self.sums[:2, 0] / self.count
        return np.sqrt(
            np.maximum(self.sums[2:4, 0] / self.count - mean**2, 0.0) * self.count / (self.count - 1)
        )

    def correlation(self) -> float:
        """Return the correlation of east and north among the readings; 0 where there is none to tell."""
        east, north = self.scatter().tolist()
        if not east * north > 0.0:
            return 0.0
        shared = self.sums[4, 0] - self.sums[0, 0] * self.sums[1, 0] / self.count
        return float(np.clip(shared / (self.count - 1) / (east * north), -1.0, 1.0))


class Hung(Plain):
    """Findings of a hung run.

    Parameters
    ----------
    assumptions : Assumptions
        Its kind is hung.
    curve : ExpectedCurve
        For the same assumptions.
    """

    def __init__(self, assumptions: Assumptions, curve: ExpectedCurve) -> None:
        self._assumptions = assumptions
        self._curve = curve
        self._angles: LineAngle | None = None
        self._speed = LineSpeed(_APART)
        self._before = (nan, nan)
        """Time [s] and depth [m] of the last reading."""
        self._level: _Level | None = None
        self._final: _Level | None = None
        self._closed = 0
        self._rest: RestPoint | None = None
        self._unseen: list[float] = []
        """Levels that were left before a swing was seen [m]."""
        self._last: Array | None = None
        self._last_direct = True
        self.unused: Counter[str] = Counter()
        self._messages: tuple[str, ...] = ()

    def feed(self, readings: Readings) -> Batch:
        """Take a block."""
        offsets, direct = self._offsets(readings)
        good = _whole(offsets)
        readings = usable(readings, good, "no offset and no usable tilt", self.unused)
        if not len(readings):
            return Batch.none()
        direct = direct[good]
        rows, speed = self._rows(readings, offsets[:, good], direct)
        creeping, hurried = self._apart(readings.time, readings.depth)
        judged, stations = self._by_level(rows, (np.abs(speed) > _RUNNING) | creeping, direct, hurried)
        fill_limits(rows, self._assumptions.limits)
        self._last, self._last_direct = rows[:, -1].copy(), bool(direct[-1])
        return Batch(rows=Rows(rows), judged=judged, stations=tuple(stations))

    def _apart(self, time: Array, depth: Array) -> tuple[Flags, Flags]:
        """Tell what readings far apart show: which creep on by less than a level, which came at once from another."""
        gap, way = steps_from(self._before[0], time), np.abs(steps_from(self._before[1], depth))
        self._before = float(time[-1]), float(depth[-1])
        apart, same = gap > _APART, way <= _SAME_LEVEL
        return apart & same & (way > _RUNNING * gap), apart & ~same & (gap <= LONGEST_GAP)

    def _offsets(self, readings: Readings) -> tuple[Array, Flags]:
        """Return offsets, shape (2, n) [m], read directly or from the line's angle; and which were direct."""
        direct = np.stack([readings.column("east"), readings.column("north")])
        is_direct = _whole(direct)
        if is_direct.all():
            return direct, is_direct
        instrument, depth = self._assumptions.instrument, readings.depth
        a, b = corrected(
            readings.column("tilt_a"), readings.column("tilt_b"), readings.column("temperature"), instrument
        )
        leaning = np.stack(increments(a, b, azimuth_of_a(readings, instrument))) * depth
        # An angle is read against the vertical at the collar: bring it to the run's reference line.
        leaning = leaning - self._curve.look_up(self._curve.reference, depth)
        return np.where(is_direct, direct, leaning), is_direct

    def _rows(self, readings: Readings, offsets: Array, direct: Flags) -> tuple[Array, Array]:
        rows = rows_of(len(readings))
        depth = readings.depth
        speed = np.nan_to_num(self._speed.update(readings.time, depth)[0])
        rows[ROW["time"]], rows[ROW["depth"]], rows[ROW["speed"]] = readings.time, depth, speed
        rows[ROW["host_time"]] = readings.host_time
        rows[ROW["passing"]], rows[ROW["direction"]] = 0, np.where(speed < -_RUNNING, -1, 1)
        rows[ROW["measured_east"]], rows[ROW["measured_north"]] = offsets
        running = np.where(np.abs(speed) > _RUNNING, speed, 0.0)
        rows[EXPECTED], u = self._predicted(depth, running, direct)
        rows[ROW["u_east"]], rows[ROW["u_north"]] = np.hypot(u, self._single(depth, direct))
        return rows, speed

    def _predicted(self, depth: Array, running: Array, direct: Flags) -> tuple[Array, Array]:
        """Return what is expected, of the bob or of the angle, and its standard uncertainty, shape (2, n) [m]."""
        look_up = self._curve.look_up
        expected, u = look_up(self._curve.plumb, depth), look_up(self._curve.u, depth)
        moving = look_up(self._curve.moving, depth)
        if not direct.all():
            angles = self._line_angles()
            expected = np.where(direct, expected, look_up(angles.plumb, depth))
            u = np.where(direct, u, look_up(angles.u, depth))
            moving = np.where(direct, moving, look_up(angles.moving, depth))
        expected[0] += running * moving
        return expected, u

    def _line_angles(self) -> LineAngle:
        """Return what angles show; worked out when the first one comes."""
        if self._angles is None:
            self._angles = line_angle(self._curve)
        return self._angles

    def _single(self, depth: Array, direct: Flags) -> Array:
        """Return the standard uncertainty of one reading, each axis [m]."""
        instrument = self._assumptions.instrument
        return np.where(direct, instrument.u_offset, np.hypot(instrument.u_tilt, instrument.u_zero) * depth)

    def _by_level(
        self, rows: Array, running: Flags, direct: Flags, hurried: Flags
    ) -> tuple[Array, list[Station]]:
        """Send each reading to its level; return the residual to judge at each row, and the stations closed."""
        judged = np.full((2, rows.shape[1]), np.nan)
        stations: list[Station] = []
        start = 0
        while start < rows.shape[1]:
            depth = rows[ROW["depth"], start:]
            if running[start]:
                if self._level is not None and self._level.time - self._level.began < _SETTLED:
                    self._level = None
                stations += self._leave()
                stay = _run_length(running[start:])
                part = slice(start, start + stay)
                judged[:, part] = rows[5:7, part] - rows[7:9, part]
            else:
                if self._level is None or abs(depth[0] - self._level.depth) > _SAME_LEVEL:
                    if self._level is not None and self._level.hurried and hurried[start]:
                        self._forget_passing(self._level)
                    stations += self._leave()
                    self._level = self._new_level(rows[:, start])
                    self._level.hurried = bool(hurried[start])
                stay = _run_length(~running[start:] & (np.abs(depth - self._level.depth) <= _SAME_LEVEL))
                part = slice(start, start + stay)
                self._dwell(self._level, rows[:, part], direct[part], judged[:, part])
            start += stay
        return judged, stations

    def _forget_passing(self, level: _Level) -> None:
        """Make no station of one reading between two moves: the line may never have stopped."""
        if level.count == 1:
            self.unused[_PASSING] += 1
            self._level = None

    def _new_level(self, row: Array) -> _Level:
        depth, time = float(row[ROW["depth"]]), float(row[ROW["time"]])
        field, air = self._curve.models.field, self._curve.models.air
        density = float(air.density(depth)) if air is not None else 0.0
        # The wire's own weight makes a line swing faster than its length alone would.
        period = (
            float(free_period(self._assumptions.line, depth, field.gravity, density)) if depth > 0.0 else None
        )
        tracker = swing.RestPointTracker(
            latitude=field.latitude, length=max(depth, 0.0), gravity=field.gravity, period=period
        )
        level = _Level(depth, time, tracker)
        level.expected = row[[ROW["expected_east"], ROW["expected_north"]]]
        level.origin = row[[ROW["measured_east"], ROW["measured_north"]]]
        return level

    def _dwell(self, level: _Level, rows: Array, direct: Flags, judged: Array) -> None:
        """Take readings at a level, and work out the rest point whenever it is due on the readings' own clock."""
        level.direct = level.direct and bool(direct.all())
        time = rows[ROW["time"]]
        if not np.isfinite(time).all():
            # Without a clock there is no swing to follow: the readings count by their mean alone.
            self._take(level, rows, judged)
            return
        start = 0
        while start < rows.shape[1]:
            stop = start + int(np.searchsorted(time[start:], level.due, side="left"))
            stop = min(max(stop, start), rows.shape[1])
            self._take(level, rows[:, start:stop], judged[:, start:stop])
            if stop < rows.shape[1]:
                level.rest = level.tracker.estimate()
                level.due = max(time[stop], level.due) + max(
                    _FIRST_ESTIMATE, _LATER * (time[stop] - level.began)
                )
            start = stop

    def _take(self, level: _Level, rows: Array, judged: Array) -> None:
        if not rows.shape[1]:
            return
        offsets = rows[[ROW["measured_east"], ROW["measured_north"]]]
        if np.isfinite(rows[ROW["time"]]).all():
            level.tracker.update(rows[ROW["time"]], offsets[0], offsets[1])
        away = offsets - level.origin[:, None]
        terms = np.concatenate([level.sums, np.concatenate([away, away * away, away[:1] * away[1:]])], axis=1)
        sums = np.cumsum(terms, axis=1)[:, 1:]
        numbers = level.count + np.arange(1, rows.shape[1] + 1)
        level.sums, level.count, level.time = (
            sums[:, -1:].copy(),
            int(numbers[-1]),
            float(rows[ROW["time"], -1]),
        )
        if level.rest is not None and level.rest.fits:
            judged[:] = (np.array([level.rest.east, level.rest.north]) - level.expected)[:, None]
            return
        mean = sums[:2] / numbers
        spread = np.sqrt(np.maximum(sums[2:4] / numbers - mean**2, 0.0))
        dwelt = rows[ROW["time"]] - level.began
        seen = ~(dwelt < level.single_swing) | ((dwelt >= _BY_HAND * (numbers - 1)) & (numbers > 1))
        quiet = (spread <= self._quiet(level)).all(axis=0) & seen
        judged[:] = np.where(quiet, level.origin[:, None] + mean - level.expected[:, None], np.nan)

    def _quiet(self, level: _Level) -> float:
        return _QUIET * self._random(level)

    def _random(self, level: _Level) -> float:
        instrument = self._assumptions.instrument
        return instrument.u_offset if level.direct else instrument.u_tilt * level.depth

    def _leave(self) -> list[Station]:
        """Close the level that is being left."""
        level, self._level = self._level, None
        if level is None or not level.count:
            return []
        level.rest = level.tracker.estimate()
        self._rest = self._told(level)
        found = self._station(level)
        self._closed += 1
        return [found]

    def _position(self, level: _Level) -> tuple[Array, tuple[str, ...], Array, Array]:
        """Return where the bob is taken to rest, shape (2,), and the budget.

        That is names, parts of shape (n, 2, 1), and the correlation of the two parts of each, shape (n, 1).
        """
        together = 0.0
        rest = level.rest
        if rest is not None and rest.fits:
            position, u, name = (
                np.array([rest.east, rest.north]),
                np.array([rest.u_east, rest.u_north]),
                REST_POINT,
            )
            together = _correlation(rest.covariance)
        else:
            position, scatter = level.mean(), level.scatter()
            quiet = bool((scatter <= self._quiet(level)).all())
            # A swing that does not fit the model leaves only its scatter, all of it, to say where the rest is.
            u = np.maximum(scatter, self._random(level)) / (np.sqrt(level.count) if quiet else 1.0)
            name = READINGS if quiet else "swing not resolved"
            # A swing has a plane; the noise of quiet readings has none.
            together = 0.0 if quiet else level.correlation()
            if not level.swing_seen:
                # A few readings near a turning point look like rest; nothing is known of the rest point yet.
                u, name = np.full(2, np.nan), _UNSEEN
        names, parts, correlation = self._systematic(level, position)
        budget = self._curve.budget if level.direct else self._line_angles().budget
        return (
            position,
            (name, *names, *budget.names),
            np.concatenate([u.reshape(1, 2, 1), parts, budget.at(level.depth)]),
            np.array([[together], *correlation, *([1.0] for _ in budget.names)]),
        )

    def _systematic(self, level: _Level, position: Array) -> tuple[tuple[str, ...], Array, Array]:
        """Return what does not average out of an angle: names, parts and correlation as `_position` does."""
        if level.direct:
            return (), np.empty((0, 2, 1)), np.empty((0, 1))
        instrument = self._assumptions.instrument
        zero = np.full((2, 1), instrument.u_zero * level.depth)
        parts = np.stack([zero, *of_axes(instrument, position[:, None])])
        scales = correlation_of_scales(instrument, position[:, None])
        return (ZERO, SCALE, AZIMUTH), parts, np.stack([np.zeros(1), scales, np.ones(1)])

    def _station(self, level: _Level) -> Station:
        position, names, parts, correlation = self._position(level)
        if _UNSEEN in names:
            self._unseen.append(level.depth)
        facts = StationFacts(
            numbers=[self._closed],
            depth=np.array([level.depth]),
            time=np.array([level.time]),
            passing=0,
            direction=1,
            measured=position[:, None],
            expected=level.expected[:, None],
            readings=[level.count],
            still=True,
            names=names,
            parts=parts,
            correlation=correlation,
        )
        return one_station(facts, self._assumptions)

    @staticmethod
    def _told(level: _Level) -> RestPoint | None:
        rest = level.rest
        if rest is None:
            return None
        return RestPoint(
            east=float(rest.east),
            north=float(rest.north),
            u_east=float(rest.u_east),
            u_north=float(rest.u_north),
            covariance_east_north=float(rest.covariance[0, 1]),
            period=float(rest.period),
            decay=float(rest.decay),
            swings=float(rest.swings),
            fits=rest.fits,
            message=rest.message,
            u_period=float(rest.u_period),
            free_period=nan if level.tracker.period is None else float(level.tracker.period),
            amplitude=float(rest.amplitude),
            width=float(rest.width),
            swings_needed=float(rest.swings_needed(_WANTED)),
            schuler_east=float(rest.schuler_east),
            schuler_north=float(rest.schuler_north),
        )

    def close(self) -> tuple[Station, ...]:
        """Close the level that the run ends at; its rest point stays the answer."""
        self._final = self._level
        return tuple(self._leave())

    def judged(self) -> Judged | None:
        """Return the rest point at the level, also of a run that has ended, or a running line's newest reading."""
        if self._last is None:
            return None
        level = self._level or self._final
        if level is None:
            row = dict(zip(ROW, self._last.tolist(), strict=True))
            shared = self._curve.covariance if self._last_direct else self._line_angles().covariance
            return Judged(
                **{name: row[name] for name in _OF_A_ROW},
                covariance=float(self._curve.look_up(shared, [row["depth"]])[0]),
            )
        position, _, parts, correlation = self._position(level)
        u_east, u_north = combined(parts)[:, 0]
        return Judged(
            depth=level.depth,
            measured_east=float(position[0]),
            measured_north=float(position[1]),
            expected_east=float(level.expected[0]),
            expected_north=float(level.expected[1]),
            u_east=float(u_east),
            u_north=float(u_north),
            covariance=float(joint(parts, correlation)[0]),
        )

    def rest_point(self) -> RestPoint | None:
        """Return the newest rest point: at this level, else at the last one closed."""
        if self._level is not None and self._level.rest is not None:
            return self._told(self._level)
        return self._rest

    def notes(self) -> tuple[str, ...]:
        """Say what the swing says of itself, and where the model ends."""
        rest = self.rest_point()
        told = [rest.message] if rest and rest.message else []
        if self._unseen:
            shown = ", ".join(f"{depth:g}" for depth in self._unseen[:8])
            more = f" and {len(self._unseen) - 8} more" if len(self._unseen) > 8 else ""
            told.append(
                f"no single swing was seen at {shown}{more} m, so that rest is not known there: stay for longer than "
                f"one, or read by eye {_BY_HAND:g} s apart"
            )
        return (*self._curve.warnings, *told)


def _whole(pairs: Array) -> Flags:
    """Return which columns have no missing value."""
    return np.asarray(np.isfinite(pairs).all(axis=0))


def _correlation(covariance: Array) -> float:
    """Return the correlation of two coordinates; 0 where either is known exactly."""
    sizes = float(np.sqrt(covariance[0, 0] * covariance[1, 1]))
    return float(covariance[0, 1]) / sizes if sizes else 0.0


def _run_length(flags: Flags) -> int:
    """Return how many leading entries are true."""
    first = np.flatnonzero(~flags)
    return int(first[0]) if first.size else flags.size
