"""From the depth shown to true depth, and which depths cannot be: spikes and jumps of a counter.

What a jump means for a sum of tilts is known to the kind of run, that it is an alarm to the engine.
"""

import itertools
from collections import Counter
from dataclasses import dataclass
from typing import NamedTuple

import numpy as np
from numpy.typing import NDArray

from eastfall.physics.hung import stretch
from eastfall.physics.readings import Readings
from eastfall.physics.settings import Assumptions, Depth
from eastfall.physics.steps import steps

Array = NDArray[np.float64]

SPIKE = "depth spike"
SLACK = 0.5
"""Smaller steps are never called a jump [m]: the grain of a coarse counter, and of rows that share a time stamp."""
EARLY = 0.1
"""So much sooner after the one before it may a row bear its stamp than it was read [s]: stamps of arrival are as
uneven as the way from the instrument."""
LASTS = 5
"""So many rows in line with each other, away from those before, are a jump; fewer that come back are a spike."""
_TIME, _DEPTH = 0, 2


class TrueDepth:
    """The correction of a run's depths.

    Parameters
    ----------
    assumptions : Assumptions
        Depth counter and, for an unloaded cable, line and air.
    gravity : float
        At the collar [m/s²]; only for an unloaded cable.
    """

    def __init__(self, assumptions: Assumptions, gravity: float) -> None:
        self._given = assumptions
        self._gravity = gravity
        depth = assumptions.depth
        self._plain = not depth.marks and depth.scale == 1.0 and depth.offset == 0.0
        self._marks = _table(depth)

    def of(self, shown: Array) -> Array:
        """Return true depths, shape (n,) [m], positive down, of shown ones [m]; NaN gives NaN.

        Notes
        -----
        With marks the collar, where none is given at or above it, is a mark that is shown as it is; between marks
        the relation is straight, and beyond the last ones their scale goes on. Else true = offset + scale · shown. An
        unloaded cable is longer by `hung.stretch`, its warmth that of the air halfway down less that at the collar.
        """
        depth = shown if self._plain else self._by_counter(shown)
        if self._given.depth.cable == "as-shown":
            return depth
        line, air = self._given.line, self._given.air
        hanging = np.maximum(depth, 0.0)
        return depth + stretch(line, hanging, self._gravity, 0.5 * air.temperature_gradient * hanging).total

    def _by_counter(self, shown: Array) -> Array:
        if not self._given.depth.marks:
            return self._given.depth.offset + self._given.depth.scale * shown
        true, seen = self._marks
        at = np.clip(np.searchsorted(seen, shown) - 1, 0, seen.size - 2)
        slope = np.diff(true) / np.diff(seen)
        straight: Array = true[at] + slope[at] * (shown - seen[at])
        return straight

    def beyond_marks(self, deepest: float) -> str:
        """Return a note where a true depth [m] lies below the last mark; else nothing."""
        if self._given.depth.marks and deepest > self._marks[0, -1] + SLACK:
            return f"deeper than the last depth mark, {self._marks[0, -1]:g} m: its scale goes on"
        return ""


def _table(depth: Depth) -> Array:
    """Return true and shown depths of the marks, shape (2, n), n at least 2."""
    marks = depth.marks
    if not marks or marks[0][0] > 0.0:
        marks = ((0.0, 0.0), *marks)
    if len(marks) == 1:
        marks = (*marks, (marks[0][0] + 1.0, marks[0][1] + 1.0))
    return np.array(marks, dtype=float).T


class Jump(NamedTuple):
    """A jump: instant [s], depth before and after it [m], and the instant on this machine's clock [s]."""

    time: float
    before: float
    after: float
    host_time: float = np.nan


@dataclass(frozen=True, slots=True, eq=False)
class Piece:
    """Readings without a jump between them; `jump` is the one that led to them."""

    readings: Readings
    jump: Jump | None = None


@dataclass(frozen=True, slots=True)
class _Track:
    """The newest accepted row, the step that led to it, and the newest row with an earlier stamp."""

    time: float
    depth: float
    step: float = 0.0
    lasted: float = 0.0
    earlier_time: float = np.nan
    earlier_depth: float = np.nan

    def to(self, time: float, depth: float) -> "_Track":
        same = time == self.time
        return _Track(
            time,
            depth,
            abs(depth - self.depth),
            time - self.time,
            self.earlier_time if same else self.time,
            self.earlier_depth if same else self.depth,
        )


@dataclass(slots=True)
class _State:
    """What is known between blocks: the accepted track, and that of the rows that wait."""

    track: _Track | None = None
    waiting: _Track | None = None
    lost: int = 0
    """How many of the rows that wait agree with nothing: only kept until a second row is accepted."""
    settled: bool = False
    """Whether two rows in line have been seen."""
    trusting: bool = True
    """False once the first rows show that the times are not those of the line's movement."""


class DepthWatch:
    """Tell spikes and jumps of depth from the line's own movement; the same however rows are cut into blocks.

    A step of more than `SLACK` is out of line if the line would have to be faster than `max_speed`, `EARLY` granted, or
    more than twice as fast as in the step before and `max_acceleration` on top; in less time than that one it may be
    twice as large. Rows out of line wait: if the depth comes back they were a spike and are left aside; if `LASTS` of
    them agree with each other the depth has jumped. Rows that share a time stamp are held against the last one before
    it. Rows without a time are not judged, and none is where the first `LASTS` steps of a run are all out of line: then
    the times are not those of the movement.

    Parameters
    ----------
    limits : Depth
        Largest speed and acceleration.
    unused : Counter
        Where spikes are counted.
    """

    def __init__(self, limits: Depth, unused: Counter[str]) -> None:
        self._limits = limits
        self._unused = unused
        self._state = _State()
        self._waiting = Readings.none()

    def pieces(self, readings: Readings) -> list[Piece]:
        """Take readings with finite depths; return those that count, cut where the depth jumped."""
        if not len(readings):
            return []
        if np.isnan(readings.time[0]):
            untimed = int(np.searchsorted(~np.isnan(readings.time), True))
            return [Piece(readings[:untimed]), *self.pieces(readings[untimed:])]
        track = self._state.track
        if not self._state.trusting:
            return [Piece(readings)]
        if not len(self._waiting) and _plain(track, readings.depth):
            self._state.settled |= len(readings) > 1 or track is not None
            self._state.track = _advanced(track, readings.time, readings.depth)
            return [Piece(readings)]
        joined = Readings.joined([self._waiting, readings])
        walk = _Walk(self._limits, self._state, joined, len(self._waiting))
        walk.go()
        if walk.spikes:
            self._unused[SPIKE] += walk.spikes
        self._waiting = walk.waiting()
        return walk.pieces()

    def close(self) -> list[Piece]:
        """End the run: rows that still wait are left aside, but for the first of a run, which count as they are."""
        waiting, self._waiting = self._waiting, Readings.none()
        self._state.lost, self._state.waiting = 0, None
        if not self._state.settled and len(waiting):
            return [Piece(waiting)]
        if len(waiting):
            self._unused[SPIKE] += len(waiting)
        return []


def _plain(track: _Track | None, depth: Array) -> bool:
    """Whether every step is too small to be called a jump."""
    if track is not None and not abs(depth[0] - track.depth) <= SLACK:
        return False
    found = steps(depth)
    return not found.size or bool(found.max() <= SLACK and found.min() >= -SLACK)


def _advanced(track: _Track | None, time: Array, depth: Array) -> _Track:
    """Accept rows that follow each other; the same as one by one."""
    start = track or _Track(float(time[0]), float(depth[0]))
    earlier = int(np.searchsorted(time, time[-1])) - 1
    if earlier >= 0:
        before = float(time[earlier]), float(depth[earlier])
    elif start.time == time[-1]:
        before = start.earlier_time, start.earlier_depth
    else:
        before = start.time, start.depth
    last_time, last_depth = (time[-2], depth[-2]) if time.size > 1 else (start.time, start.depth)
    return _Track(
        float(time[-1]),
        float(depth[-1]),
        float(abs(depth[-1] - last_depth)),
        float(time[-1] - last_time),
        *before,
    )


def _in_line(limits: Depth, track: _Track, time: float, depth: float) -> bool:
    """Whether a row can follow a track."""
    step, lasted = abs(depth - track.depth), time - track.time
    if step <= SLACK:
        return True
    smooth = True
    if track.lasted > 0.0:
        likely = 2.0 * track.step * max(1.0, lasted / track.lasted)
        smooth = step <= likely + limits.max_acceleration * lasted**2 + SLACK
    if step <= limits.max_speed * (lasted + EARLY) + SLACK and smooth:
        return True
    away = abs(depth - track.earlier_depth)
    return lasted == 0.0 and away <= limits.max_speed * (time - track.earlier_time) + SLACK


class _Walk:
    """One pass over rows among which something is out of line."""

    def __init__(self, limits: Depth, state: _State, readings: Readings, waiting: int) -> None:
        self._limits = limits
        self._state = state
        self._readings = readings
        self._lost = list(range(state.lost))
        self._run = list(range(state.lost, waiting))
        self._keep = np.zeros(len(readings), dtype=bool)
        self._jumps: dict[int, Jump] = {}
        self.spikes = 0

    def go(self) -> None:
        """Judge every row."""
        time, depth = self._readings.time, self._readings.depth
        quiet = np.abs(np.diff(depth)) <= SLACK
        row = len(self._lost) + len(self._run)
        while row < depth.size:
            if not self._state.trusting:
                self._keep[row:] = True
                return
            if not self._run and row and self._keep[row - 1] and quiet[row - 1]:
                # All of a quiet stretch is in line whatever the times say.
                end = row + _leading(quiet[row - 1 :])
                self._state.track = _advanced(self._state.track, time[row:end], depth[row:end])
                self._keep[row:end] = True
                self._state.settled = True
                row = end
            else:
                self._judge(row, float(time[row]), float(depth[row]))
                row += 1

    def _judge(self, row: int, time: float, depth: float) -> None:
        state = self._state
        track, waiting = state.track, state.waiting
        if self._run and waiting is not None and _in_line(self._limits, waiting, time, depth):
            self._run.append(row)
            state.waiting = waiting.to(time, depth)
            if len(self._run) >= LASTS:
                self._jump()
        elif track is None or _in_line(self._limits, track, time, depth):
            self._forget()
            self._keep[row] = True
            state.settled |= track is not None
            state.track = track.to(time, depth) if track else _Track(time, depth)
        elif state.settled:
            self._forget()
            self._run = [row]
            state.waiting = _Track(time, depth, track.step, track.lasted)
        else:
            self._lost, self._run = [*self._lost, *self._run], [row]
            state.waiting = _Track(time, depth, track.step, track.lasted)
            if len(self._lost) + 1 >= LASTS:
                self._keep[[*self._lost, row]] = True
                self._lost, self._run, state.trusting = [], [], False

    def _forget(self) -> None:
        self.spikes += len(self._run) + len(self._lost)
        self._run, self._lost = [], []

    def _jump(self) -> None:
        """Take the rows that wait for the new truth."""
        first, track = self._run[0], self._state.track
        before = track.depth if track else float("nan")
        time, host, depth = self._readings.data[:3, first].tolist()
        self._jumps[first] = Jump(time, before, depth, host)
        self._keep[self._run] = True
        self._state.track, self._state.settled, self._run = self._state.waiting, True, []
        self._forget()

    def waiting(self) -> Readings:
        """Return the rows that still wait, those that agree with nothing first."""
        self._state.lost = len(self._lost)
        return self._readings[np.array([*self._lost, *self._run], dtype=np.intp)]

    def pieces(self) -> list[Piece]:
        """Return what counts, cut at the jumps."""
        found = []
        for begin, end in itertools.pairwise([0, *self._jumps, len(self._readings)]):
            part = self._readings[begin:end][self._keep[begin:end]]
            if len(part):
                found.append(Piece(part, self._jumps.get(begin)))
        return found


def _leading(flags: NDArray[np.bool_]) -> int:
    """Return how many leading entries are true."""
    first = np.flatnonzero(~flags)
    return int(first[0]) if first.size else int(flags.size)
