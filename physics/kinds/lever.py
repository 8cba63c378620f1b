"""The lever of a zero offset: how far a constant error of the tilts has carried a sum, as the probe turns."""

import numpy as np
from numpy.typing import NDArray

Array = NDArray[np.float64]


class Lever:
    """|∫ exp(iα) dz| row by row; the same however rows are cut into blocks.

    Equal zero errors of A and B carry the sum by zero times this. While the azimuth is nowhere told it is constant, and
    the lever the depth gone; a probe turned by 180° at the bottom comes back with twice the depth.

    Parameters
    ----------
    azimuth : float
        Of A while it is not told [rad].
    """

    def __init__(self, azimuth: float) -> None:
        self._azimuth = azimuth
        self._start: float | None = None
        self._depth = 0.0
        self._sum: Array | None = None

    def update(self, depth: Array, azimuth: Array, told: NDArray[np.bool_]) -> Array:
        """Take rows: depth [m], azimuth of A [rad], and whether face or azimuth was told; return the lever [m]."""
        if self._start is None:
            self._start = self._depth = float(depth[0])
        lever = np.abs(depth - self._start)
        first = 0 if self._sum is not None else int(np.argmax(told)) if told.any() else depth.size
        if first < depth.size:
            before = float(depth[first - 1]) if first else self._depth
            lever[first:] = self._turning(depth[first:], azimuth[first:], before)
        self._depth = float(depth[-1])
        return lever

    def _turning(self, depth: Array, azimuth: Array, before: float) -> Array:
        if self._sum is None:
            gone = before - (self._start or 0.0)
            self._sum = gone * np.array([np.cos(self._azimuth), np.sin(self._azimuth)])
        terms = np.empty((2, depth.size + 1))
        terms[:, 0] = self._sum
        np.multiply(
            np.stack([np.cos(azimuth), np.sin(azimuth)]), np.diff(depth, prepend=before), out=terms[:, 1:]
        )
        sums = np.cumsum(terms, axis=1)
        self._sum = sums[:, -1].copy()
        return np.hypot(sums[0, 1:], sums[1, 1:])

    def jump(self, by: float) -> None:
        """Pass over a jump of depth [m]."""
        if self._start is not None:
            self._start += by
            self._depth += by
