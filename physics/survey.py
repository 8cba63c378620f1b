"""The engine: readings in blocks, findings out; state, but no clock, file or port.

Each kind of run makes offsets of the readings (`kinds`), here they are held against the limits and the whole run is
kept; alarms are on the `board`. Time comes in with the readings, so a replay repeats the live run exactly.
"""

from collections import Counter
from math import isfinite

import numpy as np
from numpy.typing import NDArray

from eastfall.physics.alarms import against_limit
from eastfall.physics.board import ACTION, BAD_LINES, JUMP, SILENT, WALL, WARNING, Board
from eastfall.physics.combine import best_estimate, closure, face_notes
from eastfall.physics.depth import DepthWatch, Piece, TrueDepth
from eastfall.physics.expected import ExpectedCurve, expected_curve
from eastfall.physics.feedwatch import FeedWatch
from eastfall.physics.findings import AlarmChange, AlarmView, Findings, Result, Rows, Standing, Station
from eastfall.physics.guards import Guards, Sighting
from eastfall.physics.kinds.base import (
    EXPECTED,
    MEASURED,
    ROW,
    Batch,
    Judged,
    KindTracker,
    body_width,
    inside_shaft,
)
from eastfall.physics.kinds.drop import Drop
from eastfall.physics.kinds.guided import Guided
from eastfall.physics.kinds.hung import Hung
from eastfall.physics.limits import limits_at
from eastfall.physics.readings import CHANNELS, Readings
from eastfall.physics.settings import Assumptions
from eastfall.physics.verdict import horizontal, verdict
from eastfall.physics.wall import gap, place

__all__ = ["ACTION", "BAD_LINES", "JUMP", "SILENT", "WALL", "WARNING", "Survey", "closure"]

_KINDS: dict[str, type[Guided] | type[Hung] | type[Drop]] = {"guided": Guided, "hung": Hung, "drop": Drop}
_TILTS = slice(CHANNELS.index("tilt_a"), CHANNELS.index("tilt_b") + 1)
_NONE = np.empty(0)

Array = NDArray[np.float64]


class Survey:
    """One run, from the first reading to the last.

    Parameters
    ----------
    assumptions : Assumptions
        What prediction and verdict rest on.
    curve : ExpectedCurve, optional
        For the same assumptions, where it stands ready.
    feed_watched : bool
        Whether silence of the feed and unreadable lines are alarms; not for a capture, which has no arrival times.
    notes : tuple of str
        What the edge knows that a reader of the answer must know too.
    u_of_rows : bool
        False where nobody looks at the uncertainty of single rows: stations and the answer have theirs all the same,
        and a guided run takes a sixth less time.
    """

    def __init__(
        self,
        assumptions: Assumptions,
        *,
        curve: ExpectedCurve | None = None,
        feed_watched: bool = True,
        notes: tuple[str, ...] = (),
        u_of_rows: bool = True,
    ) -> None:
        self.assumptions = assumptions
        self.curve = curve or expected_curve(assumptions)
        self._kind: KindTracker = _KINDS[assumptions.run.kind](assumptions, self.curve)
        self._kind.u_of_rows = u_of_rows
        self._guards = Guards(assumptions.instrument, assumptions.limits)
        self._true_depth = TrueDepth(assumptions, self.curve.models.field.gravity)
        self._watch = DepthWatch(assumptions.depth, self._kind.unused)
        self._board = Board(assumptions.limits)
        self._feed_watch = FeedWatch(self._board, assumptions.limits, watched=feed_watched)
        self._notes = notes
        self._stations: dict[int, Station] = {}
        self._frames = 0
        self._deepest = -np.inf
        self._row: Array | None = None
        self._closed = False

    @property
    def unused(self) -> Counter[str]:
        """Readings that were left aside, by reason."""
        return self._kind.unused

    # -- readings --------------------------------------------------------------------------------------------------

    def feed(self, readings: Readings, rejected: Array | None = None) -> Findings:
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
            Rows one a usable reading, stations closed and alarms changed by this block. Readings whose depth is out of
            line are held back for a few rows, until it is known what to make of them.
        """
        bad = _NONE if rejected is None else rejected
        if not len(readings):
            return self._keep((), self._feed_watch.take(readings, bad))
        readings = self._on_true_depth(self._on_one_clock(readings))
        changes = self._feed_watch.take(readings, bad)
        return self._count(self._pieces(self._guarded(readings, changes)), changes)

    def _count(self, pieces: list[Piece], changes: list[AlarmChange]) -> Findings:
        """Let the kind of run take readings that count, and judge what it makes of them."""
        batches = []
        for piece in pieces:
            if piece.jump is not None:
                self._kind.jump(piece.jump)
                changes += self._board.jumped(*piece.jump)
            batches.append(self._kind.feed(piece.readings))
            changes += self._judge(batches[-1])
        stations = tuple(station for one in batches for station in one.stations)
        self._keep(stations, changes)
        return Findings(rows=_rows(batches), stations=stations, alarms=tuple(changes))

    def _on_true_depth(self, readings: Readings) -> Readings:
        shown = readings.depth
        true = self._true_depth.of(shown)
        if true is not shown:
            data = readings.data.copy()
            data[2] = true
            readings = Readings(data)
        return readings

    def _guarded(self, readings: Readings, changes: list[AlarmChange]) -> Readings:
        """Let the guards look at a block, and blank tilts that mean nothing."""
        sightings, bad = self._guards.feed(readings)
        for one in sightings:
            changes += self._board.see(one)
        if bad is None or self.assumptions.run.kind != "guided":
            return readings
        data = readings.data.copy()
        data[_TILTS, bad] = np.nan
        return Readings(data)

    def _pieces(self, readings: Readings) -> list[Piece]:
        readings = inside_shaft(readings, self.curve, self._kind.unused)
        if self.assumptions.run.kind != "guided":
            return [Piece(readings)] if len(readings) else []
        return self._watch.pieces(readings)

    def _on_one_clock(self, readings: Readings) -> Readings:
        """Let time never fall."""
        time, newest = readings.time, self._board.newest[0]
        if time[0] >= newest and (time[1:] >= time[:-1]).all():
            return readings
        if np.isnan(time).all():
            return readings
        held = np.fmax(np.fmax.accumulate(time), newest)
        if np.array_equal(held, time):
            return readings
        data = readings.data.copy()
        data[0] = held
        return Readings(data)

    def _judge(self, batch: Batch) -> list[AlarmChange]:
        """Hold the rows of a block against the limits."""
        if not len(batch.rows):
            return []
        rows, limits = batch.rows.data, self.assumptions.limits
        time, depth, host = rows[ROW["time"]], rows[ROW["depth"]], rows[ROW["host_time"]]
        if np.isnan(time).any():
            time = np.full(time.shape, np.nan_to_num(self._board.newest[0]))
        self._frames += len(batch.rows)
        self._row = rows[:, -1].copy()
        self._board.depth = float(depth[-1])
        self._deepest = max(self._deepest, float(depth.max()))
        east, north = batch.judged
        length = np.sqrt(east * east + north * north)  # a quarter of the time of numpy.hypot
        seen = [
            Sighting(name, time, against_limit(length, rows[ROW[row]], limits.dead_band), depth, length, host)
            for name, row in ((ACTION, "action"), (WARNING, "warning"))
        ]
        if limits.wall_clearance is not None:
            clearance = self._clearance(batch)
            placed = against_limit(-clearance, -limits.wall_clearance, limits.dead_band)
            seen.append(Sighting(WALL, time, placed, depth, clearance, host))
        changes = [change for one in seen for change in self._board.see(one)]
        return sorted(changes, key=lambda one: one.time)

    def _clearance(self, batch: Batch) -> Array:
        """Return the distance from the shaft wall at each row [m]; NaN without a diameter."""
        return self._from_wall(batch.rows.data[MEASURED], batch.rows.data[EXPECTED])

    def _from_wall(self, measured: Array, expected: Array) -> Array:
        given = self.assumptions
        east, north = place(given.run.kind, measured, expected)
        return gap(given.shaft, east, north, body_width(given))

    def _keep(self, stations: tuple[Station, ...], changes: list[AlarmChange]) -> Findings:
        for one in stations:
            self._stations[one.number] = one
        self._board.keep(changes)
        return Findings(rows=Rows.none(), stations=stations, alarms=tuple(changes))

    # -- time and people: whoever hands on a word lets time pass up to it first ---------------------------------------

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
        return self._keep((), self._feed_watch.tick(host_time))

    def mark(self, host_time: float, depth: float, east: float, north: float) -> Findings:
        """Take one offset that a person read and typed in, such as where a body landed.

        Parameters
        ----------
        host_time : float
            When it was typed [s].
        depth : float
            [m].
        east, north : float
            Offset from the run's reference line [m].
        """
        time, host, _ = self._board.newest
        apart = host - time if np.isfinite(host - time) else 0.0
        reading = Readings.of(
            time=[host_time - apart], host_time=[host_time], depth=[depth], east=[east], north=[north]
        )
        return self.feed(reading)

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
        return self._keep((), self._board.turn(name, host_time, on=on, message=message))

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
        return self._keep((), self._board.acknowledge(host_time, name, who))

    def shelve(self, host_time: float, name: str, seconds: float, reason: str, who: str = "") -> Findings:
        """Put an alarm aside for some seconds, with a reason.

        Raises
        ------
        ParameterError
            If there is no such alarm, the time is not positive, or there is no reason.
        """
        return self._keep((), self._board.shelve(host_time, name, seconds, reason, who))

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
        counted = self._count(self._watch.close(), [])
        stations = self._kind.close()
        self._keep(stations, [])
        return Findings(
            rows=counted.rows,
            stations=(*counted.stations, *stations),
            alarms=(*ticked.alarms, *counted.alarms),
        )

    def standing(self) -> Standing | None:
        """Return the answer as it stands; None before the first usable reading."""
        now = self._kind.judged()
        if now is None or self._row is None:
            return None
        warning, action = (float(one[0]) for one in limits_at(self.assumptions.limits, np.array([now.depth])))
        east, north = now.measured_east - now.expected_east, now.measured_north - now.expected_north
        length, u = horizontal(east, north, now.u_east, now.u_north, now.covariance)
        direction = self._row[ROW["direction"]]
        return Standing(
            time=float(self._board.newest[0]),
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
            hold_still=self._kind.hold_still(),
            wall_clearance=self._wall_now(now),
            frames=self._frames,
            notes=self._all_notes(),
            covariance=now.covariance,
        )

    def _wall_now(self, now: Judged) -> float | None:
        measured, expected = (now.measured_east, now.measured_north), (now.expected_east, now.expected_north)
        found = float(self._from_wall(np.array(measured), np.array(expected)))
        return found if isfinite(found) else None

    def _all_notes(self) -> tuple[str, ...]:
        deeper = self._true_depth.beyond_marks(self._deepest)
        spikes = self._guards.spikes.found if self.assumptions.run.kind == "guided" else 0
        apart = f"{spikes} tilt readings stood apart from those before them and were left aside"
        told = ((deeper,) if deeper else ()) + ((apart,) if spikes else ())
        return (*self._notes, *self._kind.notes(), *told)

    def alarms(self) -> tuple[AlarmView, ...]:
        """Return every alarm that is not normal, the newest first."""
        return self._board.views()

    def result(self) -> Result:
        """Return the run so far."""
        stations = tuple(sorted(self._stations.values(), key=lambda one: one.number))
        faces = self._kind.faces()
        best, about = best_estimate(stations, self.assumptions)
        return Result(
            frames=self._frames,
            stations=stations,
            alarms=tuple(sorted(self._board.changes, key=lambda one: (one.time, one.name))),
            closure=closure(stations),
            rest_point=self._kind.rest_point(),
            faces=faces,
            best=best,
            notes=(*self._all_notes(), *about, *face_notes(faces, self.assumptions.instrument)),
        )


def _rows(batches: list[Batch]) -> Rows:
    if len(batches) == 1:
        return batches[0].rows
    return Rows(np.concatenate([one.rows.data for one in batches], axis=1)) if batches else Rows.none()
