"""The sum of tilts of an instrument that is stopped to be read: from halt to halt, level between."""

import numpy as np
from numpy.typing import NDArray

from eastfall.physics.halts import Rest
from eastfall.physics.robust import EFFICIENCY
from eastfall.physics.settings import Guide
from eastfall.physics.tilt import OffsetSum

Array = NDArray[np.float64]


class StillSum:
    """Sum of the robust means of halts.

    Parameters
    ----------
    guide : Guide
        Known start and method.
    u_tilt : float
        Standard uncertainty of one reading [rad]: a mean is taken for no better than that allows.
    """

    def __init__(self, guide: Guide, u_tilt: float) -> None:
        self._sum = OffsetSum(guide.start_east, guide.start_north, guide.method)
        self._u_tilt = u_tilt
        self._depths: list[float] = []
        self._variances: list[float] = []
        self._variance = 0.0
        self._lever, self._turned = 0j, 0j
        # Depth, measured east and north, variance, slope east and north, and the zero's lever at the last halt.
        self.held: Array = np.array([np.nan, guide.start_east, guide.start_north, 0.0, 0.0, 0.0, 0.0])

    def take(self, azimuth: Array, rests: list[tuple[int, Rest]]) -> Array:
        """Return what is held at each row, shape (7, n), given azimuths of A [rad], and halts with their rows."""
        count = azimuth.size
        out = np.empty((self.held.size, count))
        start = 0
        for row, rest in rests:
            out[:, start:row] = self.held[:, None]
            self.held = self._after(rest, float(azimuth[row]))
            start = row
        out[:, start:] = self.held[:, None]
        return out

    def _after(self, rest: Rest, azimuth: float) -> Array:
        east, north, _ = self._sum.update([rest.depth], [rest.north.mean], [rest.east.mean])
        variance = self._grown(rest)
        slopes = rest.east.mean, rest.north.mean
        turned = complex(np.exp(1j * azimuth))
        if len(self._depths) > 1:
            self._lever += 0.5 * (self._turned + turned) * (self._depths[-1] - self._depths[-2])
        self._turned = turned
        return np.array([rest.depth, east[0], north[0], variance, *slopes, abs(self._lever)])

    def _grown(self, rest: Rest) -> float:
        """Return the variance of the sum [m²]: a halt weighs by half of the two steps beside it."""
        own = max(np.nan_to_num(rest.east.scatter), np.nan_to_num(rest.north.scatter), self._u_tilt)
        self._depths = [*self._depths[-2:], rest.depth]
        self._variances = [*self._variances[-1:], own**2 / (EFFICIENCY * rest.count)]
        steps = np.diff(self._depths)
        if not steps.size:
            return 0.0
        before = steps[-2] if steps.size > 1 else 0.0
        # The halt before this one has both its steps only now.
        self._variance += (0.5 * (before + steps[-1])) ** 2 * self._variances[0]
        return float(self._variance + (0.5 * steps[-1]) ** 2 * self._variances[1])

    def jump(self, by: float) -> None:
        """Move the last halts by a jump of depth [m], so that it is not summed."""
        if self._depths:
            self._depths = [one + by for one in self._depths]
            self._sum.jump(self._depths[-1])
