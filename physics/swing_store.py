"""Rows of a swing kept as averages over short stretches of time, bounded in number for as long as it is watched.

What they say is the business of `swing`.
"""

from math import inf, log2, pi

import numpy as np
import numpy.typing as npt

from eastfall.physics.binning import Bins, TimeBins
from eastfall.physics.pendulum import Samples, rough_omega

Array = npt.NDArray[np.float64]

CAPACITY = 1024  # bins kept
PER_SWING = (24, 12)  # bins in a swing: of the newest, and the fewest when old ones are joined
_UNKNOWN_WIDTH = 0.1  # of a bin [s] while the period is not known


class SwingStore:
    """Bins of positions, joined or dropped from the old end when they are too many.

    Parameters
    ----------
    period : float or None
        Of the free line [s]; None to let the readings tell how wide a bin may grow.
    turn : float
        Ω, the clockwise turning of the swing plane [rad/s].
    """

    def __init__(self, period: float | None, turn: float) -> None:
        self._turn = turn
        self._bins = TimeBins(_UNKNOWN_WIDTH if period is None else period / PER_SWING[0], 2)
        self._widest = None if period is None else int(log2(PER_SWING[0] / PER_SWING[1]))
        self._kept = np.empty((7, 0))  # number, level, rows, time, spread, east, north
        self._latest = -inf

    def add(self, block: Array) -> None:
        """Take rows of time [s], east and north [m], shape (3, n); the unusable and the late are left out."""
        good = np.isfinite(block).all(axis=0)
        highest = np.maximum.accumulate(np.where(good, block[0], -inf))
        good &= block[0] >= np.maximum(highest, self._latest)
        if good.any():
            block = block[:, good]
            self._latest = float(block[0, -1])
            self._append(self._bins.add(block[0], block[1:])[1])

    def _append(self, closed: Bins) -> None:
        fresh = np.stack(
            [
                closed.number,
                np.zeros_like(closed.time),
                closed.rows,
                closed.time,
                closed.spread,
                *closed.means,
            ]
        )
        while fresh.shape[1]:
            room = CAPACITY - self._kept.shape[1]
            self._kept = np.concatenate([self._kept, fresh[:, :room]], axis=1)
            fresh = fresh[:, room:]
            if self._kept.shape[1] == CAPACITY:
                self._make_room()

    def _make_room(self) -> None:
        """Join neighbours, the lowest level first, and drop the oldest where that does not help."""
        if self._widest is None:
            self._widest = self._widest_level()
        for level in range(self._widest):
            if self._kept.shape[1] > 0.875 * CAPACITY:
                self._kept = _joined(self._kept, level)
        if self._kept.shape[1] > 0.875 * CAPACITY:
            self._kept = self._kept[:, CAPACITY // 4 :].copy()

    def _widest_level(self) -> int:
        """How often bins may be doubled when only the readings tell the period."""
        swing = 2.0 * pi / rough_omega(self.samples(), self._turn)
        return max(int(log2(swing / PER_SWING[1] / self._bins.width)), 0)

    def samples(self) -> Samples:
        """Return the kept stretches and the open one, time counting from near the first row."""
        held = self._bins.open_bin()
        last = np.stack([held.number, held.number, held.rows, held.time, held.spread, *held.means])
        _, _, count, time, spread, east, north = np.concatenate([self._kept, last], axis=1)
        return Samples(time=time, spread=spread, weight=count, value=east + 1j * north)


def _joined(store: Array, level: int) -> Array:
    """Join bins of one level that are halves of the same wider one."""
    number, levels = store[0], store[1]
    wide = np.where(levels == level, np.floor(number / 2.0), np.nan)
    starts = np.flatnonzero(np.concatenate([[True], wide[1:] != wide[:-1]]))  # NaN differs from itself
    count = np.add.reduceat(store[2], starts)
    means = np.add.reduceat(store[2] * store[3:], starts, axis=1) / count
    parent = np.repeat(np.arange(starts.size), np.diff(np.append(starts, number.size)))
    about = store[2] * (store[3] - means[0, parent]) ** 2
    means[1] += np.add.reduceat(about, starts) / count
    risen = levels[starts] + (levels[starts] == level)
    kept = np.where(levels[starts] == level, wide[starts], number[starts])
    return np.concatenate([[kept, risen, count], means])
