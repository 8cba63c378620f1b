"""What the bends of a guide put into a sum of tilts: a probe that follows them at speed is pulled sideways.

How much of it counts as uncertainty is `shares`.
"""

import numpy as np
from numpy.typing import NDArray

Array = NDArray[np.float64]


class SidePull:
    """Running sum, row by row; it does not depend, to the last bit, on how the rows are cut into blocks.

    Notes
    -----
    On a guide of slope P' at speed v, speeding up by a, the probe is pulled sideways by v² P'' + a P', which it shows
    as a tilt of that over g. With a dz = ½ d(v²) the sum over depth gains ∫ (v² dP' + ½ P' d(v²))/g. At a steady speed
    that is v² (P' - P'(0))/g; of a journey at V with short ramps there stays ½ V² (P' - P'(0))/g at rest.
    """

    def __init__(self) -> None:
        self._last = np.empty((3, 0))  # v²/g and slope of the last row with a speed
        self._gained = np.zeros((2, 1))

    def update(self, bend: Array, slope: Array) -> Array:
        """Take rows.

        Parameters
        ----------
        bend : ndarray, shape (n,)
            v²/g [m]; rows with NaN are passed over, the next good one is joined to the last.
        slope : ndarray, shape (2, n)
            East and north [m/m].

        Returns
        -------
        ndarray, shape (2, n)
            What the sum has gained so far, east and north [m].
        """
        good = np.isfinite(bend)
        if good.all():
            return self._sum(bend, slope)
        before = self._gained
        gained: Array = np.concatenate([before, self._sum(bend[good], slope[:, good])], axis=1)
        return gained[:, np.cumsum(good)]

    def _sum(self, bend: Array, slope: Array) -> Array:
        known = self._last.shape[1]
        rows = np.concatenate([self._last, [bend, *slope]], axis=1)
        if not rows.size:
            return rows[1:]
        middle = 0.5 * (rows[:, 1:] + rows[:, :-1])
        change = rows[:, 1:] - rows[:, :-1]
        terms = np.empty((2, rows.shape[1]))
        terms[:, :1] = self._gained
        np.multiply(middle[0], change[1:], out=terms[:, 1:])
        middle[1:] *= 0.5 * change[0]
        terms[:, 1:] += middle[1:]
        sums = np.cumsum(terms, axis=1)
        self._last, self._gained = rows[:, -1:].copy(), sums[:, -1:].copy()
        return sums[:, known:]
