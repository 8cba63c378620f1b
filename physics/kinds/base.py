"""What every kind of run gives the engine, and what they share; the kinds themselves stand beside this."""

from collections import Counter
from collections.abc import Iterable
from dataclasses import dataclass
from typing import Protocol

import numpy as np
from numpy.typing import NDArray

from eastfall.physics.expected import ExpectedCurve
from eastfall.physics.findings import ROW_FIELDS, RestPoint, Rows, Share, Station
from eastfall.physics.limits import limits_at
from eastfall.physics.readings import Readings
from eastfall.physics.settings import Limits
from eastfall.physics.verdict import horizontal, verdict

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


def combined(shares: Iterable[Share]) -> tuple[Share, ...]:
    """Return the shares that are not nil, largest first."""
    kept = [one for one in shares if one.east or one.north]
    return tuple(sorted(kept, key=lambda one: -(one.east**2 + one.north**2)))


def root_sum(shares: Iterable[Share]) -> tuple[float, float]:
    """Combine uncorrelated shares to standard uncertainties east and north [m] (GUM, eq. 10)."""
    listed = list(shares)
    return float(np.sqrt(sum(one.east**2 for one in listed))), float(
        np.sqrt(sum(one.north**2 for one in listed))
    )


@dataclass(frozen=True, slots=True, kw_only=True)
class StationFacts:
    """What a kind knows when it closes a station; `station` adds what follows from it."""

    number: int
    depth: float
    passing: int
    direction: int
    time: float
    measured: tuple[float, float]
    expected: tuple[float, float]
    readings: int
    still: bool
    shares: tuple[Share, ...]


def station(facts: StationFacts, limits: Limits) -> Station:
    """Judge a station."""
    u_east, u_north = root_sum(facts.shares)
    east, north = facts.measured[0] - facts.expected[0], facts.measured[1] - facts.expected[1]
    length, u = horizontal(east, north, u_east, u_north)
    warning, action = (float(one[0]) for one in limits_at(limits, np.array([facts.depth])))
    return Station(
        number=facts.number,
        depth=facts.depth,
        passing=facts.passing,
        direction="down" if facts.direction > 0 else "up",
        time=facts.time,
        measured_east=facts.measured[0],
        measured_north=facts.measured[1],
        expected_east=facts.expected[0],
        expected_north=facts.expected[1],
        u_east=u_east,
        u_north=u_north,
        warning=warning,
        action=action,
        verdict=verdict(float(length), float(u), action),
        readings=facts.readings,
        still=facts.still,
        shares=facts.shares,
    )
