"""Where readings of a guided run are missing; what that leaves open is `shares`."""

import numpy as np
from numpy.typing import NDArray

from eastfall.physics.readings import Readings
from eastfall.physics.steps import steps_from

Array = NDArray[np.float64]

_BRIDGED = 0.5
"""A longer stretch without a usable reading is missing, and no longer a step from row to row [m]."""


class Gaps:
    """Find where readings are missing: left aside, or not sent for longer than the feed's own rhythm explains.

    Parameters
    ----------
    silent : float
        A shorter pause is none [s].
    """

    def __init__(self, silent: float) -> None:
        self._silent = silent
        self._missed = False
        self._rows = 0
        self._began = np.nan
        self._last: tuple[float, float] | None = None

    def ends(self, readings: Readings, good: NDArray[np.bool_]) -> list[int]:
        """Return at which of the good rows of a block a stretch of more than `_BRIDGED` without readings ends."""
        depth, time = readings.depth[good], readings.time[good]
        if not depth.size:
            self._missed |= good.size > 0
            return []
        before = self._last or (float(depth[0]), float(time[0]))
        if not self._rows:
            self._began = float(time[0])
        far = np.abs(steps_from(before[0], depth)) > _BRIDGED
        ends: list[int] = []
        if far.any():
            missing = self._pauses(time, before[1])
            rows = np.flatnonzero(good)
            missing |= np.diff(rows, prepend=rows[0] if self._missed else -1) != 1
            ends = np.flatnonzero(far & missing).tolist()
        self._missed = not good[-1]
        self._last = float(depth[-1]), float(time[-1])
        self._rows += depth.size
        return ends

    def _pauses(self, time: Array, before: float) -> NDArray[np.bool_]:
        """Return before which rows the feed paused for ten times its mean interval."""
        mean = (time - self._began) / (self._rows + np.arange(1.0, time.size + 1.0))
        pauses: NDArray[np.bool_] = steps_from(before, time) > np.maximum(self._silent, 10.0 * mean)
        return pauses

    def jump(self, depth: float) -> None:
        """Go on at another depth [m]."""
        if self._last is not None:
            self._last = depth, self._last[1]
