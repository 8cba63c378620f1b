"""Passes of a run: where it turns, and where it crosses a station; what a station says is not decided here."""

from collections.abc import Iterator
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

Array = NDArray[np.float64]

_FIRST_LOOK = 256
"""Rows looked at for a turn before looking further in doubled steps, so that many turns stay cheap."""


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class Stretch:
    """A run of rows of one block within one pass.

    Parameters
    ----------
    rows : slice
        Of the block.
    passing : int
        Number of the pass, from 0.
    direction : int
        +1 down, -1 up.
    before : float
        The extreme depth of the pass before these rows [m]: at its first row where the pass before turned; NaN at the
        first row of the run.
    first : bool
        Whether the pass begins with these rows.
    extreme : ndarray, shape (n,)
        The extreme depth so far at each row [m].
    ended : bool
        Whether the row after these is the first of the next pass.
    """

    rows: slice
    passing: int
    direction: int
    before: float
    first: bool
    extreme: Array
    ended: bool


class Passes:
    """Find the passes in a stream of depths.

    A pass ends when the depth has come back from its extreme by more than `turn`; smaller movement (a jerking rope, a
    noisy encoder) does not end it. The outcome does not depend on how the depths are cut into blocks.

    Parameters
    ----------
    turn : float
        [m].
    upward_below : float
        A run whose first reading is deeper than this is taken to start upward [m].
    """

    def __init__(self, turn: float, upward_below: float) -> None:
        self._turn = turn
        self._upward_below = upward_below
        self.passing = 0
        self.direction = 0
        self._extreme = np.nan
        self._fresh = True

    def jump(self, depth: float) -> None:
        """Go on in the same pass from another depth [m]."""
        if not np.isnan(self._extreme):
            self._extreme = depth

    def stretches(self, depth: Array) -> Iterator[Stretch]:
        """Cut a block of finite depths, shape (n,) [m], into stretches."""
        if depth.size and self.direction == 0:
            self.direction = -1 if depth[0] > self._upward_below else 1
        start = 0
        while start < depth.size:
            before = self._extreme
            end, extreme = self._until_turn(depth, start)
            ended = end < depth.size
            if end > start:
                self._extreme = float(extreme[-1])
            # Without rows where a turn falls on a block's first row: the pass is told of its end all the same.
            yield Stretch(
                rows=slice(start, end),
                passing=self.passing,
                direction=self.direction,
                before=before,
                first=self._fresh,
                extreme=extreme,
                ended=ended,
            )
            self._fresh = ended
            if ended:
                self.passing += 1
                self.direction = -self.direction
            start = end

    def _until_turn(self, depth: Array, start: int) -> tuple[int, Array]:
        """Return where the next pass begins (or the end of the block) and the extremes up to there."""
        look, sign = _FIRST_LOOK, self.direction
        extreme = np.empty(0)
        at, top = start, sign * self._extreme
        parts = []
        while at < depth.size:
            along = sign * depth[at : at + look]
            if np.isnan(top):
                top = along[0]
            highest = np.maximum(np.maximum.accumulate(along), top)
            turned = np.flatnonzero(along < highest - self._turn)
            if turned.size:
                parts.append(highest[: turned[0]])
                at += int(turned[0])
                break
            parts.append(highest)
            top = highest[-1]
            at += along.size
            look *= 2
        if parts:
            extreme = sign * np.concatenate(parts)
        return at, extreme


def crossings(stretch: Stretch, every: float, last: float) -> Iterator[tuple[float, int]]:
    """Find the stations that the extreme of a pass has reached.

    Parameters
    ----------
    stretch : Stretch
        Of a block.
    every : float
        Spacing of stations, counted from the collar [m].
    last : float
        No station deeper than this [m].

    Yields
    ------
    depth, row : float, int
        Of the station [m], and the first row of the stretch (counted from its own start) at or beyond it.
    """
    if not stretch.extreme.size:
        return
    sign = stretch.direction
    along = sign * stretch.extreme
    at_start = np.isnan(stretch.before)
    begin = float(along[0]) if at_start else sign * stretch.before
    # A station exactly at the first row of a run belongs to it; later on one exactly at the last extreme was taken.
    first = reached(begin, every)
    first += not at_start or station_at(first, every) < begin
    for number in range(first, reached(float(along[-1]), every) + 1):
        depth = sign * station_at(number, every) + 0.0
        if 0.0 <= depth <= last:
            yield depth, int(np.searchsorted(along, station_at(number, every)))


def station_at(number: int, every: float) -> float:
    """Return where a station is [m]: to the nanometre, so that the seventh of 0.2 m is the 1.4 that a probe reads."""
    return round(number * every, 9) + 0.0


def reached(along: float, every: float) -> int:
    """Return the number of the last station at or before `along` [m], judged by what `station_at` says of it."""
    number = round(along / every)
    return number if station_at(number, every) <= along else number - 1
