"""Tilts that stand apart from those before them for a row or two: knocks and slips of a digit, not the guide."""

from math import isfinite

import numpy as np
from numpy.typing import NDArray

from eastfall.physics.readings import CHANNELS, Readings

Flags = NDArray[np.bool_]

_ROWS = slice(CHANNELS.index("depth"), CHANNELS.index("tilt_b") + 1)
"""Depth and the two tilts, which stand beside each other in a block."""
_BEFORE = 5
"""Rows that a tilt is held against, by their median: two spikes among them do not move it."""
_STEP, _REACH = 1.0, 3.0
"""Rows farther apart than this, one from the next or over all of them, say nothing of each other [m]."""


class TiltSpikes:
    """Find spikes in a stream of tilts; the same however the rows are cut into blocks.

    A tilt on either axis that differs from the median of the five before it by more than `apart` is a spike. Where the
    guide itself bends so much at once, the first three rows behind the bend are taken for spikes, and the sum goes
    over them in one step.

    Parameters
    ----------
    apart : float
        [rad].
    """

    def __init__(self, apart: float) -> None:
        self._apart = apart
        self._last = np.empty((3, 0))
        self.found = 0

    def feed(self, readings: Readings, blank: Flags | None = None) -> Flags | None:
        """Take a block, less rows that are blank already; return which rows are spikes, or None where none is."""
        rows = readings.data[_ROWS]
        joined = np.concatenate((self._last, rows), axis=1)
        if blank is None and self._is_calm(joined[1:]) and isfinite(joined[0].max(initial=0.0)):
            self._last = joined[:, -_BEFORE:].copy()
            return None
        whole = np.isfinite(rows).all(axis=0)
        if blank is not None:
            whole &= ~blank
        joined = np.concatenate((self._last, rows[:, whole]), axis=1)
        known = self._last.shape[1]
        self._last = joined[:, -_BEFORE:].copy()
        if joined.shape[1] <= _BEFORE or self._is_calm(joined[1:]):
            return None
        spiky = np.zeros(joined.shape[1], dtype=bool)
        rows = joined.shape[1] - _BEFORE
        before = np.array([joined[1:, first : first + rows] for first in range(_BEFORE)])
        # The median is the middle row: numpy.median costs six times as much on a live block.
        before.sort(axis=0)
        away = np.abs(joined[1:, _BEFORE:] - before[_BEFORE // 2])
        depth = joined[0]
        near = (np.abs(depth[_BEFORE:] - depth[_BEFORE - 1 : -1]) <= _STEP) & (
            np.abs(depth[_BEFORE:] - depth[:-_BEFORE]) <= _REACH
        )
        spiky[_BEFORE:] = (away > self._apart).any(axis=0) & near
        flags = np.zeros(len(readings), dtype=bool)
        flags[whole] = spiky[known:]
        self.found += int(np.count_nonzero(flags))
        return flags if flags.any() else None

    def _is_calm(self, tilts: NDArray[np.float64]) -> bool:
        """Tell at little cost that no row can be far from the five before it: no step is a fifth of that.

        A missing tilt is not calm.
        """
        steps = tilts[:, 1:] - tilts[:, :-1]
        most = self._apart / _BEFORE
        return bool(steps.max(initial=-most) <= most and steps.min(initial=most) >= -most)
