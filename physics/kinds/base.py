"""What every kind of run gives the engine, and what they share; the kinds themselves stand beside this."""

from collections import Counter
from dataclasses import dataclass
from typing import Protocol

import numpy as np
from numpy.typing import NDArray

from eastfall.physics.expected import ExpectedCurve
from eastfall.physics.findings import ROW_FIELDS, RestPoint, Rows, Station
from eastfall.physics.limits import limits_at
from eastfall.physics.readings import Readings
from eastfall.physics.settings import Limits
from eastfall.physics.verdict import horizontal, verdicts

Array = NDArray[np.float64]
ROW = {name: number for number, name in enumerate(ROW_FIELDS)}


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


class KindTracker(Protocol):
    """A kind of run, fed in blocks; its findings do not depend on how the blocks are cut."""

    unused: Counter[str]
    """Readings left aside, by reason."""

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
    number : int
        Of the first; the others count on from it.
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
        Standard uncertainty from each input, taken as uncorrelated [m].
    """

    number: int
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


def one_station(facts: StationFacts, limits: Limits) -> Station:
    """Judge a single station."""
    return stations_of(facts, limits)[0]


def stations_of(facts: StationFacts, limits: Limits) -> list[Station]:
    """Judge stations: uncertainty of the residual by the root sum of squares (GUM, eq. 10), and the verdict on it."""
    u = np.sqrt(np.sum(facts.parts**2, axis=0))
    residual = facts.measured - facts.expected
    length, u_length = horizontal(residual[0], residual[1], u[0], u[1])
    warning, action = limits_at(limits, facts.depth)
    words = verdicts(length, u_length, action)
    columns = np.stack([facts.depth, facts.time, *facts.measured, *facts.expected, *u, warning, action])
    parts = np.abs(facts.parts).transpose(2, 0, 1).tolist()
    return [
        Station(
            number=facts.number + at,
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
        )
        for at, row in enumerate(columns.T.tolist())
    ]
