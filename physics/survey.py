"""The engine: readings in blocks, findings out; state, but no clock, file or port.

Each kind of run makes offsets of the readings (`kinds`); here they are held against the limits, alarms are raised
and cleared, and the whole run is kept. Time comes in with the readings, so a replay repeats the live run exactly.
"""

from collections import Counter
from math import isfinite

import numpy as np
from numpy.typing import NDArray

from eastfall.physics.alarms import Alarm, Change, Rule, against_limit
from eastfall.physics.errors import ParameterError
from eastfall.physics.expected import ExpectedCurve, expected_curve
from eastfall.physics.findings import (
    AlarmChange,
    AlarmView,
    Closure,
    Findings,
    Result,
    Rows,
    Standing,
    Station,
)
from eastfall.physics.kinds.base import ROW, Batch, Judged, KindTracker
from eastfall.physics.kinds.drop import Drop
from eastfall.physics.kinds.guided import Guided
from eastfall.physics.kinds.hung import Hung
from eastfall.physics.limits import limits_at
from eastfall.physics.readings import Readings
from eastfall.physics.settings import Assumptions
from eastfall.physics.verdict import horizontal, verdict

ACTION, WARNING, WALL, SILENT = "action limit", "warning limit", "wall clearance", "feed silent"
_MM = 1000.0

_KINDS: dict[str, type[Guided] | type[Hung] | type[Drop]] = {"guided": Guided, "hung": Hung, "drop": Drop}

Array = NDArray[np.float64]


class Survey:
    """One run, from the first reading to the last.

    Two clocks meet here. Limits are judged on the time of the readings. What only this machine knows (a silent
    feed, a lost link, a person's acknowledgement) comes on the host's clock, and is shown on the readings' clock by
    the difference that the newest reading had.

    Parameters
    ----------
    assumptions : Assumptions
        What prediction and verdict rest on.
    curve : ExpectedCurve, optional
        For the same assumptions, where it stands ready.
    feed_watched : bool
        Whether silence of the feed is an alarm; not for a capture, which has no arrival times.
    """

    def __init__(
        self, assumptions: Assumptions, *, curve: ExpectedCurve | None = None, feed_watched: bool = True
    ) -> None:
        self.assumptions = assumptions
        self.curve = curve or expected_curve(assumptions)
        self._kind: KindTracker = _KINDS[assumptions.run.kind](assumptions, self.curve)
        limits = assumptions.limits
        self._limit_alarms = {
            name: Alarm(Rule(name=name, on_delay=limits.on_delay, off_delay=limits.off_delay))
            for name in (ACTION, WARNING, WALL)
        }
        self._edge_alarms: dict[str, Alarm] = {SILENT: Alarm(Rule(name=SILENT))}
        self._messages: dict[str, str] = {}
        # Between the bodies of a drop series the feed is silent by nature.
        self._feed_watched = feed_watched and assumptions.run.kind != "drop"
        self._stations: dict[int, Station] = {}
        self._changes: list[AlarmChange] = []
        self._frames = 0
        # Time, host time and depth of the newest reading, used or not.
        self._newest: Array = np.full(3, np.nan)
        self._row: Array | None = None
        self._values: dict[str, float] = {}
        self._closed = False

    @property
    def unused(self) -> Counter[str]:
        """Readings that were left aside, by reason."""
        return self._kind.unused

    def feed(self, readings: Readings, rejected: Array | None = None) -> Findings:  # noqa: ARG002
        """Take a block of readings.

        Parameters
        ----------
        readings : Readings
            In the order of arrival. A time before one already seen is held at that one.
        rejected : ndarray, optional
            Host times of the lines of this block that could not be read [s].

        Returns
        -------
        Findings
            Rows one a usable reading, stations closed and alarms changed by this block.
        """
        if not len(readings):
            return Findings(rows=Rows.none())
        readings = self._on_one_clock(readings)
        silence = self._silences(readings)
        self._newest = readings.data[:3, -1].copy()
        batch = self._kind.feed(readings)
        self._frames += len(batch.rows)
        changes = [*silence, *self._judge(batch)]
        self._keep(batch.stations, changes)
        return Findings(rows=batch.rows, stations=batch.stations, alarms=tuple(changes))

    def _on_one_clock(self, readings: Readings) -> Readings:
        """Let time never fall."""
        time = readings.time
        if np.isnan(time).all():
            return readings
        held = np.fmax(np.fmax.accumulate(time), self._newest[0])
        if np.array_equal(held, time):
            return readings
        data = readings.data.copy()
        data[0] = held
        return Readings(data)

    def _silences(self, readings: Readings) -> list[AlarmChange]:
        """Raise and return the silent-feed alarm for every gap before and inside a block."""
        rows = np.concatenate([self._newest[:, None], readings.data[:3]], axis=1)
        if not self._feed_watched or not np.isfinite(rows[1, 1:]).all():
            return []
        if np.isnan(rows[1, 0]):
            # Before the first reading the feed is reckoned from the start of the run, on the host's clock alone.
            rows[:2, 0] = 0.0
        limit = self.assumptions.limits.feed_silent
        changes: list[AlarmChange] = []
        for gap in np.flatnonzero(np.diff(rows[1]) > limit).tolist():
            for row, host, on in (
                (rows[:, gap], rows[1, gap] + limit, True),
                (rows[:, gap + 1], rows[1, gap + 1], False),
            ):
                changes += self._silence(row, float(host), on=on)
        return changes

    def _silence(self, row: Array, host_time: float, *, on: bool) -> list[AlarmChange]:
        message = f"no reading for {self.assumptions.limits.feed_silent:g} s" if on else "readings again"
        return self._edge(SILENT, host_time, on=on, message=message, row=row)

    def _judge(self, batch: Batch) -> list[AlarmChange]:
        """Hold the rows of a block against the limits."""
        if not len(batch.rows):
            return []
        rows, limits = batch.rows.data, self.assumptions.limits
        time = rows[ROW["time"]]
        if np.isnan(time).any():
            time = np.full(time.shape, np.nan_to_num(self._newest[0]))
        length = np.hypot(batch.judged[0], batch.judged[1])
        changes: list[AlarmChange] = []
        for name, row in ((ACTION, "action"), (WARNING, "warning")):
            placed = against_limit(length, rows[ROW[row]], limits.dead_band)
            changes += self._told(self._limit_alarms[name].sample(time, placed), name, time, rows, length)
        if limits.wall_clearance is not None:
            clearance = self._clearance(batch)
            placed = against_limit(-clearance, -limits.wall_clearance, limits.dead_band)
            changes += self._told(self._limit_alarms[WALL].sample(time, placed), WALL, time, rows, clearance)
        self._row = rows[:, -1].copy()
        return sorted(changes, key=lambda one: one.time)

    def _clearance(self, batch: Batch) -> Array:
        """Return the distance from the shaft wall at each row [m]; NaN without a diameter."""
        shaft = self.assumptions.shaft
        if shaft.diameter is None:
            return np.full(len(batch.rows), np.nan)
        rows = batch.rows
        east, north = rows.column("measured_east"), rows.column("measured_north")
        if self.assumptions.run.kind == "guided":
            # What the sum shows holds the lean of the moving line; where the guide is, is the residual.
            east, north = batch.judged
        return self._from_wall(east, north)

    def _from_wall(self, east: Array, north: Array) -> Array:
        shaft, body = self.assumptions.shaft, self.assumptions.body
        size = body.diameter / 2.0 if body and self.assumptions.run.kind == "drop" else 0.0
        away = np.hypot(east - shaft.centre_east, north - shaft.centre_north)
        return (shaft.diameter or np.nan) / 2.0 - size - away

    def _told(
        self, changes: list[Change], name: str, time: Array, rows: Array, value: Array
    ) -> list[AlarmChange]:
        """Put words and a depth to the transitions of a limit alarm."""
        told = []
        for one in changes:
            at = int(np.searchsorted(time, one.time, side="right")) - 1
            row = rows[:, at] if at >= 0 or self._row is None else self._row
            held = float(value[at]) if at >= 0 else self._values.get(name, float("nan"))
            shown = f", {held * _MM:.1f} mm" if isfinite(held) else ""
            depth = float(row[ROW["depth"]])
            message = f"{name} at {depth:.1f} m{shown}"
            self._messages[name] = message
            told.append(
                AlarmChange(time=one.time, depth=depth, name=name, old=one.old, new=one.new, message=message)
            )
        self._values[name] = float(value[-1])
        return told

    def _edge(
        self, name: str, host_time: float, *, on: bool, message: str, row: Array | None = None
    ) -> list[AlarmChange]:
        alarm = self._edge_alarms.setdefault(name, Alarm(Rule(name=name)))
        if alarm.standing == on:
            return []
        self._messages[name] = message
        return self._dated(alarm.set(host_time, on=on), name, row)

    def _dated(self, changes: list[Change], name: str, row: Array | None = None) -> list[AlarmChange]:
        """Move transitions on the host's clock to the readings' clock, by a reading's time, host time and depth."""
        time, host, depth = (self._newest if row is None else row).tolist()
        apart = host - time if isfinite(host - time) else 0.0
        message = self._messages.get(name, "")
        return [
            AlarmChange(
                time=one.time - apart, depth=depth, name=name, old=one.old, new=one.new, message=message
            )
            for one in changes
        ]

    def _keep(self, stations: tuple[Station, ...], changes: list[AlarmChange]) -> Findings:
        for one in stations:
            self._stations[one.number] = one
        self._changes += changes
        return Findings(rows=Rows.none(), stations=stations, alarms=tuple(changes))

    def tick(self, host_time: float) -> Findings:
        """Let time pass without a reading.

        Parameters
        ----------
        host_time : float
            Now [s].

        Returns
        -------
        Findings
            What has fallen due; its instants are those that the next reading would have brought to light.
        """
        changes: list[AlarmChange] = []
        limit = self.assumptions.limits.feed_silent
        before = float(np.nan_to_num(self._newest[1]))
        if self._feed_watched and host_time - before > limit:
            row = self._newest if isfinite(self._newest[1]) else np.array([0.0, 0.0, np.nan])
            changes += self._silence(row, before + limit, on=True)
        for name, alarm in self._edge_alarms.items():
            changes += self._dated(alarm.tick(host_time), name)
        return self._keep((), changes)

    def condition(self, host_time: float, name: str, on: bool, message: str) -> Findings:
        """Take a fault that only the edge knows, such as a lost link.

        Parameters
        ----------
        host_time : float
            [s].
        name : str
            Of the alarm.
        on : bool
            Whether it stands from now on.
        message : str
            What it is about.
        """
        self.tick(host_time)
        return self._keep((), self._edge(name, host_time, on=on, message=message))

    def acknowledge(self, host_time: float, name: str, who: str = "") -> Findings:
        """Acknowledge an alarm.

        Parameters
        ----------
        host_time : float
            [s].
        name : str
            Of the alarm.
        who : str
            The person; kept in the message of the change.

        Raises
        ------
        ParameterError
            If there is no such alarm.
        """
        self.tick(host_time)
        alarm, at = self._named(name, host_time)
        return self._by_hand(name, alarm.acknowledge(at), f"acknowledged by {who}" if who else "acknowledged")

    def shelve(self, host_time: float, name: str, seconds: float, reason: str, who: str = "") -> Findings:
        """Put an alarm aside for some seconds, with a reason.

        Raises
        ------
        ParameterError
            If there is no such alarm, the time is not positive, or there is no reason.
        """
        if not reason.strip():
            raise ParameterError("reason", reason, "", "a few words on why the alarm is shelved")
        self.tick(host_time)
        alarm, at = self._named(name, host_time)
        by = f" by {who}" if who else ""
        return self._by_hand(name, alarm.shelve(at, seconds), f"shelved{by} for {seconds:g} s: {reason}")

    def _named(self, name: str, host_time: float) -> tuple[Alarm, float]:
        """Return an alarm and the instant on its own clock."""
        if name in self._limit_alarms:
            return self._limit_alarms[name], float(np.nan_to_num(self._newest[0]))
        if name in self._edge_alarms:
            return self._edge_alarms[name], host_time
        raise ParameterError(
            "alarm", name, "", f"one of {', '.join([*self._limit_alarms, *self._edge_alarms])}"
        )

    def _by_hand(self, name: str, changes: list[Change], words: str) -> Findings:
        message = f"{self._messages.get(name, name)}; {words}"
        if name in self._limit_alarms:
            depth = float(self._row[ROW["depth"]]) if self._row is not None else float("nan")
            told = [
                AlarmChange(time=one.time, depth=depth, name=name, old=one.old, new=one.new, message=message)
                for one in changes
            ]
        else:
            before = self._messages.get(name, "")
            self._messages[name] = message
            told = self._dated(changes, name)
            self._messages[name] = before
        return self._keep((), told)

    def close(self, host_time: float) -> Findings:
        """End the run: what is open is closed.

        Parameters
        ----------
        host_time : float
            [s]; NaN for a capture.
        """
        if self._closed:
            return Findings(rows=Rows.none())
        self._closed = True
        ticked = self.tick(host_time) if isfinite(host_time) else Findings(rows=Rows.none())
        stations = self._kind.close()
        self._keep(stations, [])
        return Findings(rows=Rows.none(), stations=stations, alarms=ticked.alarms)

    def standing(self) -> Standing | None:
        """Return the answer as it stands; None before the first usable reading."""
        now = self._kind.judged()
        if now is None or self._row is None:
            return None
        warning, action = (float(one[0]) for one in limits_at(self.assumptions.limits, np.array([now.depth])))
        east, north = now.measured_east - now.expected_east, now.measured_north - now.expected_north
        length, u = horizontal(east, north, now.u_east, now.u_north)
        direction = self._row[ROW["direction"]]
        return Standing(
            time=float(self._newest[0]),
            depth=float(self._row[ROW["depth"]]),
            speed=float(self._row[ROW["speed"]]),
            passing=int(self._row[ROW["passing"]]),
            direction="down" if direction > 0 else "up",
            measured_east=now.measured_east,
            measured_north=now.measured_north,
            expected_east=now.expected_east,
            expected_north=now.expected_north,
            u_east=now.u_east,
            u_north=now.u_north,
            warning=warning,
            action=action,
            verdict=verdict(float(length), float(u), action),
            rest_point=self._kind.rest_point(),
            hold_still=None,
            wall_clearance=self._wall_now(now),
            frames=self._frames,
            notes=self._kind.notes(),
        )

    def _wall_now(self, now: Judged) -> float | None:
        if self.assumptions.shaft.diameter is None:
            return None
        east, north = now.measured_east, now.measured_north
        if self.assumptions.run.kind == "guided":
            east, north = east - now.expected_east, north - now.expected_north
        found = float(self._from_wall(np.array(east), np.array(north)))
        return found if isfinite(found) else None

    def alarms(self) -> tuple[AlarmView, ...]:
        """Return every alarm that is not normal, the newest first."""
        depths = {one.name: one.depth for one in self._changes}
        since = {one.name: one.time for one in self._changes}
        views = [
            AlarmView(
                name=name,
                state=alarm.state,
                since=since.get(name, alarm.since),
                depth=depths.get(name, float("nan")),
                message=self._messages.get(name, ""),
            )
            for name, alarm in {**self._limit_alarms, **self._edge_alarms}.items()
            if alarm.state != "normal"
        ]
        return tuple(sorted(views, key=lambda one: -one.since))

    def result(self) -> Result:
        """Return the run so far."""
        stations = tuple(sorted(self._stations.values(), key=lambda one: one.number))
        return Result(
            frames=self._frames,
            stations=stations,
            alarms=tuple(sorted(self._changes, key=lambda one: (one.time, one.name))),
            closure=closure(stations),
            rest_point=self._kind.rest_point(),
        )


def closure(stations: tuple[Station, ...]) -> Closure | None:
    """Compare the first pass down with the pass up after it, at the shallowest station of both.

    Parameters
    ----------
    stations : tuple of Station
        Of a run.

    Returns
    -------
    Closure or None
        Up less down [m]; what the moving line predicts stands beside it, and only the difference of the two is error.
    """
    down = {one.depth: one for one in stations if one.passing == 0 and one.direction == "down"}
    up = {one.depth: one for one in stations if one.passing == 1 and one.direction == "up"}
    common = down.keys() & up.keys()
    if not common:
        return None
    first, last = down[min(common)], up[min(common)]
    return Closure(
        depth=first.depth,
        east=last.measured_east - first.measured_east,
        north=last.measured_north - first.measured_north,
        expected_east=last.expected_east - first.expected_east,
        expected_north=last.expected_north - first.expected_north,
    )
