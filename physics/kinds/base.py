"""What every kind of run gives the engine, and what they share; the kinds themselves stand beside this."""

from collections import Counter
from dataclasses import dataclass
from typing import Protocol

import numpy as np
from numpy.typing import NDArray

from eastfall.physics.budget import combined, joint
from eastfall.physics.depth import Jump
from eastfall.physics.expected import ExpectedCurve
from eastfall.physics.findings import ROW_FIELDS, FaceSums, Halt, RestPoint, Rows, Station, Verdict
from eastfall.physics.limits import limits_at
from eastfall.physics.readings import Readings
from eastfall.physics.settings import Assumptions, Limits
from eastfall.physics.verdict import horizontal, verdicts
from eastfall.physics.wall import gap, place

Array = NDArray[np.float64]
ROW = {name: number for number, name in enumerate(ROW_FIELDS)}
MEASURED = slice(ROW["measured_east"], ROW["measured_north"] + 1)
EXPECTED = slice(ROW["expected_east"], ROW["expected_north"] + 1)
"""East and north of a row, which stand beside each other in `ROW_FIELDS`."""


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class Batch:
    """What a kind makes of a block of readings.

    Parameters
    ----------
    rows : Rows
        One a usable reading.
    judged : ndarray, shape (2, n)
        The residual that limits are held against at each row, east and north [m]; NaN where there is none yet.
    stations : tuple of Station
        Closed (or, with a number seen before, renewed) in this block.
    """

    rows: Rows
    judged: Array
    stations: tuple[Station, ...] = ()

    @classmethod
    def none(cls) -> "Batch":
        """Return an empty batch."""
        return cls(rows=Rows.none(), judged=np.empty((2, 0)))


@dataclass(frozen=True, slots=True, kw_only=True)
class Judged:
    """The offset that the verdict is about, now: lengths in metres, offsets east and north."""

    depth: float
    measured_east: float
    measured_north: float
    expected_east: float
    expected_north: float
    u_east: float
    u_north: float
    covariance: float = 0.0
    """Of the two [m²]."""


class KindTracker(Protocol):
    """A kind of run, fed in blocks; its findings do not depend on how the blocks are cut."""

    unused: Counter[str]
    """Readings left aside, by reason."""
    u_of_rows: bool
    """Whether every row must state its uncertainty; else only stations and the newest row need."""

    def feed(self, readings: Readings) -> Batch:
        """Take a block."""

    def close(self) -> tuple[Station, ...]:
        """Close what is open at the end of the run."""

    def judged(self) -> Judged | None:
        """Return the offset that the verdict is about now."""

    def rest_point(self) -> RestPoint | None:
        """Return the rest point of a swing, where the kind has one."""

    def notes(self) -> tuple[str, ...]:
        """Return what a reader must know of the answer."""

    def jump(self, jump: Jump) -> None:
        """Take note that the depth jumps before the next block."""

    def hold_still(self) -> float | None:
        """Return the seconds until a halt closes a station; None while moving, or where it has."""

    def faces(self) -> FaceSums | None:
        """Return the sums of readings in two faces, where there are any."""


class Plain:
    """What a kind without a sum of its own answers."""

    u_of_rows = True

    def jump(self, jump: Jump) -> None:
        """Do nothing: each reading stands for itself."""

    def hold_still(self) -> float | None:
        """Return nothing: there is no hold to wait for."""
        return None

    def faces(self) -> FaceSums | None:
        """Return nothing: faces are not paired here."""
        return None


def rows_of(count: int) -> Array:
    """Return an empty table of findings for `count` rows."""
    return np.full((len(ROW_FIELDS), count), np.nan)


def fill_limits(rows: Array, limits: Limits) -> None:
    """Put the limits in force beside each row's depth."""
    rows[ROW["warning"]], rows[ROW["action"]] = limits_at(limits, rows[ROW["depth"]])


def usable(readings: Readings, good: NDArray[np.bool_], reason: str, unused: Counter[str]) -> Readings:
    """Keep the good rows of a block and count the others under a reason."""
    if good.all():
        return readings
    unused[reason] += int(np.count_nonzero(~good))
    return readings[good]


def inside_shaft(readings: Readings, curve: ExpectedCurve, unused: Counter[str]) -> Readings:
    """Leave aside readings without a depth, or with one where there is no shaft."""
    depth = readings.depth
    readings = usable(readings, np.isfinite(depth), "no depth", unused)
    depth = readings.depth
    good = (depth >= -1.0) & (depth <= curve.depth[-1])
    return usable(readings, good, "depth outside the shaft", unused)


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class StationFacts:
    """What a kind knows when it closes stations; `stations_of` adds what follows from it.

    Parameters
    ----------
    numbers : list of int, length n
        Of the stations.
    depth, time : ndarray, shape (n,)
        [m], [s].
    passing, direction : int
        Pass, and +1 for down or -1 for up.
    measured, expected : ndarray, shape (2, n)
        East and north [m].
    readings : list of int, length n
        That went into each.
    still : bool
        Whether they were taken at rest.
    names : tuple of str
        Of the inputs of the uncertainty.
    parts : ndarray, shape (len(names), 2, n)
        Standard uncertainty from each input [m], signs kept where one cause moves east and north together. Inputs are
        uncorrelated with each other.
    correlation : ndarray, shape (len(names), n)
        Of the east and the north part of each: 1 of one cause, 0 of two independent ones.
    halt : Halt, optional
        What a single station at rest was closed from.
    face : ndarray, shape (n,), optional
        0 or pi [rad], NaN where it is not known.
    before : Station, optional
        The station before the first in the same pass; the others follow each other.
    """

    numbers: list[int]
    depth: Array
    time: Array
    passing: int
    direction: int
    measured: Array
    expected: Array
    readings: list[int]
    still: bool
    names: tuple[str, ...]
    parts: Array
    correlation: Array
    halt: Halt | None = None
    face: Array | None = None
    before: Station | None = None


def one_station(facts: StationFacts, assumptions: Assumptions) -> Station:
    """Judge a single station."""
    return stations_of(facts, assumptions)[0]


def stations_of(facts: StationFacts, assumptions: Assumptions) -> list[Station]:
    """Judge stations: combined uncertainty of the residual, and the verdicts."""
    u, shared = combined(facts.parts), joint(facts.parts, facts.correlation)
    residual = facts.measured - facts.expected
    length, u_length = horizontal(residual[0], residual[1], u[0], u[1], shared)
    warning, action = limits_at(assumptions.limits, facts.depth)
    words = verdicts(length, u_length, action)
    columns = np.stack(
        [facts.depth, facts.time, *facts.measured, *facts.expected, *u, warning, action, shared]
    )
    parts, correlations = facts.parts.transpose(2, 0, 1).tolist(), facts.correlation.T.tolist()
    face = [None] * len(words) if facts.face is None else [_known(one) for one in facts.face.tolist()]
    walls = _clearances(facts, u, shared, assumptions)
    leans = _leans(facts, residual, assumptions.limits)
    return [
        Station(
            number=facts.numbers[at],
            depth=row[0],
            passing=facts.passing,
            direction="down" if facts.direction > 0 else "up",
            time=row[1],
            measured_east=row[2],
            measured_north=row[3],
            expected_east=row[4],
            expected_north=row[5],
            u_east=row[6],
            u_north=row[7],
            warning=row[8],
            action=row[9],
            verdict=words[at],
            readings=facts.readings[at],
            still=facts.still,
            inputs=facts.names,
            parts=tuple((east, north) for east, north in parts[at]),
            correlations=tuple(correlations[at]),
            covariance=row[10],
            halt=facts.halt,
            face=face[at],
            lean=leans[at][0],
            u_lean=leans[at][1],
            lean_verdict=leans[at][2],
            clearance=walls[at][0],
            u_clearance=walls[at][1],
            clearance_verdict=walls[at][2],
        )
        for at, row in enumerate(columns.T.tolist())
    ]


_Judgement = tuple[float | None, float | None, Verdict | None]
_NOTHING: _Judgement = (None, None, None)


def _known(value: float) -> float | None:
    return None if value != value else value  # noqa: PLR0124 (NaN, without an import)


def _clearances(facts: StationFacts, u: Array, shared: Array, assumptions: Assumptions) -> list[_Judgement]:
    """Return clearance from the wall, its standard uncertainty [m] and the verdict at each station."""
    shaft = assumptions.shaft
    if shaft.diameter is None:
        return [_NOTHING] * len(facts.numbers)
    east, north = place(assumptions.run.kind, facts.measured, facts.expected)
    clear, bound = gap(shaft, east, north, body_width(assumptions)), assumptions.limits.wall_clearance
    _, u_away = horizontal(east - shaft.centre_east, north - shaft.centre_north, u[0], u[1], shared)
    words = [None] * clear.size if bound is None else verdicts(-clear, u_away, -bound)
    return list(zip(clear.tolist(), u_away.tolist(), words, strict=True))


def body_width(assumptions: Assumptions) -> float:
    """Return the diameter of the body that falls [m]; a probe and a bob are taken as points."""
    body = assumptions.body
    return body.diameter if body and assumptions.run.kind == "drop" else 0.0


RANDOM = "tilt, random"
"""The input that gains with every reading, so that its part between two stations is a difference of squares."""
READINGS, REST_POINT = "readings", "rest point"
"""Of a bob: the mean of quiet readings, and what a swing says."""
MARK, MARKS = "reading of the mark", "scatter of the marks"
"""Of falling bodies: what is assumed of each landing mark, and what a series of them shows."""
OF_A_RELEASE = frozenset(
    {"release point east", "release point north", "release speed east", "release speed north", MARK}
)
"""Inputs that are drawn anew with every body."""
BY_READINGS = frozenset({RANDOM, READINGS, REST_POINT, MARKS}) | OF_A_RELEASE
"""Inputs whose part falls with the square root of the number of readings."""


def _leans(facts: StationFacts, residual: Array, limits: Limits) -> list[_Judgement]:
    """Return the residual's change a metre of depth from the station before, its u and the verdict."""
    before = facts.before
    if before is not None:
        first = np.array([[before.residual_east], [before.residual_north]])
        known = dict(zip(before.inputs, before.parts, strict=True))
        earlier = np.array([known.get(name, (0.0, 0.0)) for name in facts.names])[:, :, None]
        top = before.depth
    else:
        first, earlier, top = residual[:, :1], facts.parts[:, :, :1], float(facts.depth[0])
    step = np.abs(np.diff(facts.depth, prepend=top))
    change = np.diff(residual, axis=1, prepend=first)
    parts = np.diff(facts.parts, axis=2, prepend=earlier)
    if RANDOM in facts.names:
        row = facts.names.index(RANDOM)
        squares = np.diff(facts.parts[row] ** 2, axis=1, prepend=earlier[row] ** 2)
        parts[row] = np.sqrt(np.abs(squares))
    u_east, u_north = combined(parts)
    length, u = horizontal(change[0], change[1], u_east, u_north, joint(parts, facts.correlation))
    with np.errstate(divide="ignore", invalid="ignore"):
        lean, u_lean = length / step, u / step
    words = [None] * step.size if limits.lean is None else verdicts(lean, u_lean, limits.lean)
    found = zip(lean.tolist(), u_lean.tolist(), words, step.tolist(), strict=True)
    return [one[:3] if one[3] > 0.0 else _NOTHING for one in found]
