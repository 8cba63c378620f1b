"""When a guided run closes a station, and in which order: crossings, halts, and passes that stop just short of one.

What a station says follows from its row and is worked out by the kind.
"""

from collections.abc import Iterator
from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from eastfall.physics.halts import Rest
from eastfall.physics.passes import Passes, Stretch, crossings, reached, station_at
from eastfall.physics.settings import Run

Array = NDArray[np.float64]

_TURN = 0.2
"""Coming back by more than this ends a pass [m]: beyond the jerking of a rope, below any station spacing in use."""
_REACHED = 0.05
"""A pass that turns this close to a station has reached it, and a halt so close is a halt there [m]."""
_END, _CROSSING, _HALT = 0, 1, 2

KEPT = (
    "time",
    "depth",
    "measured_east",
    "measured_north",
    "expected_east",
    "expected_north",
    "weight",
    "slope_east",
    "slope_north",
    "lever",
    "pull_east",
    "pull_north",
    "face",
)
"""What is known of a row for the station that may be closed there."""
TIME, DEPTH, WEIGHT, LEVER, FACE = (KEPT.index(one) for one in ("time", "depth", "weight", "lever", "face"))
MEASURED, EXPECTED, SLOPE, PULL = (
    slice(KEPT.index(f"{one}_east"), KEPT.index(f"{one}_north") + 1)
    for one in ("measured", "expected", "slope", "pull")
)


@dataclass(frozen=True, slots=True, eq=False)
class Due:
    """A station that is due: at which row of the block, what it closes on, and under which number."""

    row: int
    order: int
    depth: float
    at: Array
    readings: int
    passing: int
    direction: int
    rest: Rest | None = None
    number: int = -1


class Closing:
    """Find the stations that rows close; the same however rows are cut into blocks.

    Parameters
    ----------
    run : Run
        Spacing of stations.
    shaft_depth, last : float
        Of the shaft, and no station deeper than the second [m].
    crossed : bool
        Whether stations are taken in passing; else at halts alone.
    """

    def __init__(self, run: Run, shaft_depth: float, last: float, *, crossed: bool) -> None:
        self._every = run.station_every
        self._near = min(_REACHED, run.station_every / 10.0)
        self._last_station = last
        self._crossed = crossed
        self._passes = Passes(min(_TURN, run.station_every / 4.0), shaft_depth / 2.0)
        self._extreme: Array | None = None
        self._before: Array | None = None
        self._taken = 0
        self._next = 0
        self._numbers: dict[tuple[int, float], tuple[int, bool]] = {}

    def take(
        self, columns: tuple[Array, ...], rests: list[tuple[int, Rest]]
    ) -> tuple[Array, Array, list[Due]]:
        """Take the columns of a block in the order of `KEPT`, and its halts; return passes and what is due.

        Returns
        -------
        passing, direction : ndarray, shape (n,)
            Number and direction of the pass at each row.
        due : list of Due
            In the order in which the rows bring them about.
        """
        passes = np.empty((2, columns[DEPTH].size))
        due: list[Due] = []
        for stretch in self._passes.stretches(columns[DEPTH]):
            passes[:, stretch.rows] = [[stretch.passing], [stretch.direction]]
            if self._crossed:
                due += self._crossings(stretch, columns)
            self._remember(stretch, columns)
            if stretch.ended:
                due += self._end_of_pass(stretch.passing, stretch.direction, stretch.rows.stop)
        for row, rest in rests:
            number, direction = passes[:, row].astype(int).tolist()
            depth = self._label(rest.depth)
            due.append(Due(row, _HALT, depth, _column(columns, row), rest.count, number, direction, rest))
        if not due:
            return passes[0], passes[1], due
        in_order = sorted(due, key=lambda one: (one.row, one.order))
        return passes[0], passes[1], list(self._numbered(in_order))

    def _crossings(self, stretch: Stretch, columns: tuple[Array, ...]) -> Iterator[Due]:
        done, first = 0, stretch.rows.start
        for depth, row in crossings(stretch, self._every, self._last_station):
            after = _column(columns, first + row)
            before = _column(columns, first + row - 1) if row else self._before
            readings, self._taken = self._taken + row + 1 - done, 0
            done = row + 1
            at = _between(before, after, depth)
            yield Due(first + row, _CROSSING, depth, at, readings, stretch.passing, stretch.direction)
        self._taken += stretch.extreme.size - done

    def _remember(self, stretch: Stretch, columns: tuple[Array, ...]) -> None:
        depth = columns[DEPTH][stretch.rows]
        if not depth.size:
            return
        at = int(np.argmax(stretch.direction * depth))
        extreme = self._extreme
        if stretch.first or extreme is None or stretch.direction * (depth[at] - extreme[DEPTH]) > 0.0:
            self._extreme = _column(columns, stretch.rows.start + at)
        self._before = _column(columns, stretch.rows.stop - 1)

    def _end_of_pass(self, passing: int, direction: int, row: int) -> Iterator[Due]:
        """Close the station that a pass stopped just short of."""
        if self._extreme is None or not self._crossed:
            return
        depth = float(self._extreme[DEPTH])
        short_of = direction * station_at(reached(direction * depth, self._every) + 1, self._every) + 0.0
        near = direction * (short_of - depth) <= self._near
        if near and 0.0 <= short_of <= self._last_station:
            readings, self._taken = self._taken, 0
            yield Due(row, _END, float(short_of), self._extreme, readings, passing, direction)

    def _label(self, depth: float) -> float:
        """Return the station depth that a halt was made at, or its own."""
        station = station_at(round(depth / self._every), self._every)
        return station if abs(station - depth) <= self._near and station >= 0.0 else depth

    def _numbered(self, due: list[Due]) -> Iterator[Due]:
        """Give numbers; a halt renews the station taken in passing there, and is not replaced by one."""
        for one in due:
            known = self._numbers.get((one.passing, one.depth))
            still = one.rest is not None
            if known is not None and known[1] and not still:
                continue
            if known is None:
                number, self._next = self._next, self._next + 1
            else:
                number = known[0]
            if self._numbers and next(iter(self._numbers))[0] != one.passing:
                self._numbers = {}
            self._numbers[one.passing, one.depth] = number, still
            yield replace(one, number=number)

    def jump(self, depth: float) -> None:
        """Go on from another depth [m]: no station between is taken."""
        self._passes.jump(depth)
        if self._before is not None:
            self._before = self._before.copy()
            self._before[DEPTH] = depth
            self._extreme = self._before

    def close(self) -> list[Due]:
        """Close the station that the last pass stopped just short of."""
        ends = list(self._end_of_pass(self._passes.passing, self._passes.direction, 0))
        return list(self._numbered(ends))


def _column(columns: tuple[Array, ...], row: int) -> Array:
    return np.array([one[row] for one in columns])


def _between(before: Array | None, after: Array, depth: float) -> Array:
    """Interpolate a row at a depth between two rows; without a row before, the row itself."""
    if before is None or after[DEPTH] == before[DEPTH]:
        return after
    share = (depth - before[DEPTH]) / (after[DEPTH] - before[DEPTH])
    at = before + share * (after - before)
    at[FACE] = after[FACE]
    return at
