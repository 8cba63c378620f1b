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
        rows = np.concatenate([self._last, np.concatenate([bend[None], slope])[:, good]], axis=1)
        change, middle = np.diff(rows, axis=1), 0.5 * (rows[:, 1:] + rows[:, :-1])
        steps = middle[0] * change[1:] + 0.5 * middle[1:] * change[0]
        sums = np.cumsum(np.concatenate([self._gained, steps], axis=1), axis=1)
        first = 1 if self._last.shape[1] or not rows.shape[1] else 0
        self._last, self._gained = rows[:, -1:].copy(), sums[:, -1:].copy()
        gained: Array = sums[:, np.maximum(np.cumsum(good) - 1 + first, 0)]
        return gained
