"""Halts of a probe: when it rests, for how long still, and the robust mean of what it showed; pure, row by row."""

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from eastfall.physics.robust import RobustMean, huber_mean
from eastfall.physics.steps import steps_from

Array = NDArray[np.float64]

BAND = 0.02
"""A probe that moves less than this is at rest [m]: the grain of a counter, and the breathing of a rope."""
_CELLS = 8
"""Rest is looked for from the beginning of each such part of the hold."""
_UNSETTLED = 4.0
"""Halves of a hold whose means differ by more than this many of their own uncertainties: the probe still swings."""


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class Rest:
    """One halt: mean time [s] and depth [m], robust slopes [m/m], how long [s], from how many readings."""

    time: float
    depth: float
    east: RobustMean
    north: RobustMean
    seconds: float
    count: int


class HaltFinder:
    """Find halts in a stream of rows; the same however they are cut into blocks.

    A halt is found once the depth has stayed within `BAND` for the hold and the tilt has settled; the next one only
    after the probe has moved on.

    Parameters
    ----------
    hold : float
        [s].
    """

    def __init__(self, hold: float) -> None:
        self._hold = hold
        self._cell = np.nan
        self._rows: list[Array] = []
        self._low = self._high = np.nan
        self._began = np.nan
        self._at: float | None = None
        """The depth of the halt that was found and not left yet."""

    def feed(self, rows: Array) -> list[tuple[int, Rest]]:
        """Take rows.

        Parameters
        ----------
        rows : ndarray, shape (4, n)
            Time [s], depth [m], slope east and north [m/m]; finite.

        Returns
        -------
        list of (int, Rest)
            Halts, and the row of this block at which each was complete.
        """
        if self._at is None and not self._rows and self._in_cell(rows[0, 0]) and self._in_cell(rows[0, -1]):
            return []  # on the way, and no cell in which a halt could begin opens: time does not fall
        found: list[tuple[int, Rest]] = []
        starts = self._starts(rows)
        row = 0
        while row < rows.shape[1]:
            if self._at is not None:
                row += self._staying(rows[1, row:])
            elif self._rows:
                row = self._go_on(rows, row, found)
            else:
                later = starts[np.searchsorted(starts, row) :]
                if not later.size:
                    break
                row = int(later[0])
                self._begin(float(rows[0, row]))
                row = self._go_on(rows, row, found)
        return found

    def _in_cell(self, time: float) -> bool:
        return bool(np.floor(time * (_CELLS / self._hold)) == self._cell)

    def _starts(self, rows: Array) -> NDArray[np.intp]:
        """Return the rows from which a halt may begin: the first of each cell of time without movement."""
        cell = np.floor(rows[0] * (_CELLS / self._hold))
        opens = np.flatnonzero(steps_from(self._cell, cell) != 0.0)
        self._cell = float(cell[-1])
        if not opens.size:
            return opens
        depth = rows[1]
        quiet = np.maximum.reduceat(depth, opens) - np.minimum.reduceat(depth, opens) <= BAND
        return opens[quiet]

    def _begin(self, time: float) -> None:
        self._began, self._low, self._high = time, np.inf, -np.inf

    def _staying(self, depth: Array) -> int:
        """Return for how many rows the probe stays at the halt that was found."""
        away = np.flatnonzero(np.abs(depth - (self._at or 0.0)) > BAND)
        if not away.size:
            return int(depth.size)
        self._at = None
        return int(away[0])

    def _go_on(self, rows: Array, row: int, found: list[tuple[int, Rest]]) -> int:
        """Carry a halt on from a row; return the row to go on from."""
        due = row + int(np.searchsorted(rows[0, row:], self._began + self._hold))
        part = rows[:, row : due + 1]
        high = np.maximum(np.maximum.accumulate(part[1]), self._high)
        low = np.minimum(np.minimum.accumulate(part[1]), self._low)
        moved = np.flatnonzero(high - low > BAND)
        if moved.size:
            self._rows = []
            # The row that moved may itself open a cell; a row that opened this one cannot have moved.
            return row + int(moved[0])
        self._rows.append(part.copy())
        self._high, self._low = float(high[-1]), float(low[-1])
        if due < rows.shape[1]:
            self._complete(due, found)
        return row + part.shape[1]

    def _complete(self, row: int, found: list[tuple[int, Rest]]) -> None:
        held = np.concatenate(self._rows, axis=1)
        if not _settled(held):
            later = held[:, held[0] >= self._began + 0.5 * self._hold]
            self._rows, self._began = [later], float(later[0, 0])
            self._high, self._low = float(later[1].max()), float(later[1].min())
            return
        self._rows = []
        depth = float(np.median(held[1]))
        self._at = depth
        found.append(
            (
                row,
                Rest(
                    time=float(held[0, -1]),
                    depth=depth,
                    east=huber_mean(held[2]),
                    north=huber_mean(held[3]),
                    seconds=float(held[0, -1] - held[0, 0]),
                    count=held.shape[1],
                ),
            )
        )

    def moved(self) -> None:
        """Forget the halt that is open: the depth has jumped."""
        self._rows, self._at = [], None

    def to_go(self, now: float) -> float | None:
        """Return the seconds to wait until a halt is complete; None while moving or when it is complete."""
        held = now - self._began
        return max(self._hold - held, 0.0) if self._rows and held >= self._hold / _CELLS else None


def _settled(held: Array) -> bool:
    """Whether the halves of a hold agree."""
    half = held.shape[1] // 2
    if half < 4:
        return True
    for slope in held[2:]:
        first, second = huber_mean(slope[:half]), huber_mean(slope[half:])
        if abs(first.mean - second.mean) > _UNSETTLED * float(np.hypot(first.u, second.u)):
            return False
    return True
