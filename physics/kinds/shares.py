"""What each input puts into the uncertainty of a sum of tilts; how the sum is made is the guided kind's business."""

from dataclasses import dataclass
from math import cos, sin, sqrt

import numpy as np
from numpy.typing import NDArray

from eastfall.physics.kinds.base import RANDOM
from eastfall.physics.settings import Assumptions, Instrument

Array = NDArray[np.float64]

ZERO, SCALE, AZIMUTH, DEPTH, COUNTER = "tilt, zero", "tilt, scale", "azimuth", "depth", "depth, zero"
BENDS = "line over bends"
MISSING, JUMPED = "readings missing", "depth jump"


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class Summed:
    """Where a sum of tilts stands, row by row.

    Parameters
    ----------
    depth : ndarray, shape (n,)
        That the offsets stand for [m].
    offset : ndarray, shape (2, n)
        Measured, east and north [m].
    weight : ndarray, shape (n,)
        Σ w² of the readings summed so far [m²]; of halts, the variance itself.
    slope : ndarray, shape (2, n)
        East and north [m/m].
    lever : ndarray, shape (n,)
        What a zero offset is multiplied by: |∫ exp(iα) dz|, α the azimuth of A; the depth gone, where that stays [m].
    pull : ndarray, shape (2, n)
        What the bends of the guide have put into the sum, east and north [m]: see `sidepull`.
    """

    depth: Array
    offset: Array
    weight: Array
    slope: Array
    lever: Array
    pull: Array

    def __getitem__(self, part: slice) -> "Summed":
        return Summed(
            depth=self.depth[part],
            offset=self.offset[:, part],
            weight=self.weight[part],
            slope=self.slope[:, part],
            lever=self.lever[part],
            pull=self.pull[:, part],
        )


def of_axes(instrument: Instrument, offset: Array) -> tuple[Array, Array]:
    """Give what the scales and the azimuth of the A axis put into an offset that was summed from tilts.

    Parameters
    ----------
    instrument : Instrument
    offset : ndarray, shape (2, n)
        From the start of the sum, east and north [m].

    Returns
    -------
    scale, azimuth : ndarray, shape (2, n)
        Standard uncertainties [m]; that of the azimuth with its signs.

    Notes
    -----
    Each axis errs by a scale of its own: an offset p along A and q along B, A at azimuth α, is wrong by
    u √(p² sin² α + q² cos² α) toward east and u √(p² cos² α + q² sin² α) toward north, so that an offset due north errs
    east as well. An azimuth error turns the offset.
    """
    s, c, along_a, along_b = _axes(instrument, offset)
    scale = np.hypot([s * along_a, c * along_a], [c * along_b, s * along_b])
    turned = np.stack([offset[1], -offset[0]])
    return instrument.u_scale * scale, instrument.u_azimuth * turned


def correlation_of_scales(instrument: Instrument, offset: Array) -> Array:
    """Give the correlation of what the scales of both axes put into east and into north of an offset.

    Parameters
    ----------
    instrument : Instrument
    offset : ndarray, shape (2, n)
        From the start of the sum, east and north [m].

    Returns
    -------
    ndarray, shape (n,)
        With the p, q and α of `of_axes` the covariance is u² sin α cos α (p² - q²); 0 where a part is.
    """
    s, c, along_a, along_b = _axes(instrument, offset)
    a, b = along_a * along_a, along_b * along_b
    shared, east, north = s * c * (a - b), s * s * a + c * c * b, c * c * a + s * s * b
    sizes = np.sqrt(east * north)
    return np.divide(shared, sizes, out=np.zeros_like(sizes), where=sizes > 0.0)


def _axes(instrument: Instrument, offset: Array) -> tuple[float, float, Array, Array]:
    """Return sine and cosine of the azimuth of A, and the offset along A and along B [m]."""
    alpha = instrument.a_azimuth + instrument.north_offset
    s, c = sin(alpha), cos(alpha)
    return s, c, s * offset[0] + c * offset[1], c * offset[0] - s * offset[1]


class Shares:
    """The uncertainty of a sum of tilts, input by input.

    Parameters
    ----------
    assumptions : Assumptions
        Instrument and guide.
    """

    def __init__(self, assumptions: Assumptions) -> None:
        instrument = assumptions.instrument
        self._instrument = instrument
        guide = assumptions.guide
        self._start = np.array([[guide.start_east], [guide.start_north]])
        self._u_counter = assumptions.depth.u_offset
        self._random = instrument.u_tilt if guide.readings == "all" else 1.0
        self._added: dict[str, Array] = {}
        self._jumps_shared = 0.0
        self._leans = _Spread()

    @property
    def names(self) -> tuple[str, ...]:
        """Inputs, in the order of `parts`."""
        counter = (COUNTER,) if self._u_counter else ()
        return (RANDOM, ZERO, SCALE, AZIMUTH, DEPTH, BENDS, *counter, *self._added)

    def parts(self, summed: Summed) -> Array:
        """Return the parts.

        Parameters
        ----------
        summed : Summed
            Of n rows.

        Returns
        -------
        ndarray, shape (len(names), 2, n)
            Standard uncertainties [m]; signed where one cause moves east and north together.

        Notes
        -----
        A station stands at the depth that the counter shows. Where the counter errs by a share d of depth, the sum of
        steps errs by d (P - P0), and the guide is met d z too high: together d |P - P0 - z P'|. What the bends of the
        guide put into the sum is left in, and counted as uncertainty.
        """
        instrument = self._instrument
        parts = np.empty((len(self.names), 2, summed.weight.size))
        gone = summed.offset - self._start
        parts[0] = self._random * np.sqrt(summed.weight)
        parts[1] = instrument.u_zero * summed.lever
        parts[2], parts[3] = of_axes(instrument, gone)
        parts[4] = instrument.u_depth_fraction * (gone - summed.depth * summed.slope)
        parts[5] = summed.pull
        if self._u_counter:
            parts[6] = self._u_counter * summed.slope
        for row, one in enumerate(reversed(self._added.values()), start=1):
            parts[-row] = one[:, None]
        return parts

    def correlation(self, summed: Summed) -> Array:
        """Return the correlation of the east and the north part of each input.

        Returns
        -------
        ndarray, shape (len(names), n)

        Notes
        -----
        What both axes err by alike and each for itself, noise and zeros, stays uncorrelated however they are turned.
        The azimuth, the counter and the pull of the bends move the offset along one line. A stretch without readings
        is bridged in east and in north by themselves.
        """
        found = np.zeros((len(self.names), summed.weight.size))
        found[2] = correlation_of_scales(self._instrument, summed.offset - self._start)
        found[3 : 7 if self._u_counter else 6] = 1.0
        if JUMPED in self._added:
            sizes = float(np.prod(self._added[JUMPED]))
            found[self.names.index(JUMPED)] = self._jumps_shared / sizes if sizes else 0.0
        return found

    def lean(self, east: float, north: float) -> None:
        """Take note of the mean slope between two stations [m/m]: how much the guide varies."""
        self._leans.add(np.array([east, north]))

    def bridge(self, length: float, before: Array, after: Array) -> None:
        """Add what a stretch without readings leaves open.

        Parameters
        ----------
        length : float
            Of the stretch [m].
        before, after : ndarray, shape (2,)
            Slope at its ends [m/m].

        Notes
        -----
        The mean slope of the stretch is known no better than slopes of the guide differ: half the difference of its
        ends, or the spread between stations so far, whichever is larger.
        """
        apart = np.maximum(0.5 * np.abs(after - before), self._leans.deviation())
        self._add(MISSING, length * apart)

    def jumped(self, length: float, slope: Array) -> None:
        """Add what a jump of depth [m] leaves open: by so much of the guide the sum, or its depth, may be wrong."""
        self._jumps_shared += length**2 * float(slope[0] * slope[1])
        self._add(JUMPED, abs(length) * np.hypot(slope, self._instrument.u_tilt))

    def _add(self, name: str, u: Array) -> None:
        self._added[name] = np.hypot(self._added.get(name, np.zeros(2)), u)

    @property
    def is_bridged(self) -> bool:
        """Whether a stretch without readings was bridged."""
        return MISSING in self._added


class _Spread:
    """Welford's running variance of a pair of values."""

    def __init__(self) -> None:
        self._count = 0
        self._mean = np.zeros(2)
        self._squares = np.zeros(2)

    def add(self, values: Array) -> None:
        self._count += 1
        away = values - self._mean
        self._mean = self._mean + away / self._count
        self._squares = self._squares + away * (values - self._mean)

    def deviation(self) -> Array:
        """Return the standard deviation, shape (2,); zero from fewer than two."""
        if self._count < 2:
            return np.zeros(2)
        return np.sqrt(self._squares) / sqrt(self._count - 1)
