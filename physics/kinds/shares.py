"""What each input puts into the uncertainty of a sum of tilts; how the sum is made is the guided kind's business."""

from dataclasses import dataclass
from math import sqrt

import numpy as np
from numpy.typing import NDArray

from eastfall.physics.kinds.base import RANDOM
from eastfall.physics.settings import Assumptions

Array = NDArray[np.float64]

ZERO, SCALE, AZIMUTH, DEPTH, COUNTER = "tilt, zero", "tilt, scale", "azimuth", "depth", "depth, zero"
BENDS = "line over bends"
MISSING, JUMPED = "readings missing", "depth jump"


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class Summed:
    """Where a sum of tilts stands, row by row.

    Parameters
    ----------
    offset : ndarray, shape (2, n)
        Measured, east and north [m].
    weight : ndarray, shape (n,)
        Σ w² of the readings summed so far [m²]; of halts, the variance itself.
    slope : ndarray, shape (2, n)
        East and north [m/m].
    lever : ndarray, shape (n,)
        What a zero offset is multiplied by: |∫ exp(iα) dz|, α the azimuth of A; the depth gone, where that stays [m].
    bend : ndarray, shape (n,)
        v²/g of the line [m].
    """

    offset: Array
    weight: Array
    slope: Array
    lever: Array
    bend: Array

    def __getitem__(self, part: slice) -> "Summed":
        return Summed(
            offset=self.offset[:, part],
            weight=self.weight[part],
            slope=self.slope[:, part],
            lever=self.lever[part],
            bend=self.bend[part],
        )


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
        self._guide = assumptions.guide
        self._u_counter = assumptions.depth.u_offset
        self._random = instrument.u_tilt if assumptions.guide.readings == "all" else 1.0
        self._first: Array | None = None
        self._added: dict[str, Array] = {}
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
            Standard uncertainties [m].

        Notes
        -----
        A probe that follows a guide of slope P' at speed v is pulled sideways by v² P'' + a P', which it shows as a
        tilt. Since a dz = ½ d(v²), the sum gains (v² P' - ½ v² P'(0))/g once the line has got up to speed. It is left
        in, and counted as uncertainty.
        """
        instrument = self._instrument
        parts = np.empty((len(self.names), 2, summed.weight.size))
        east = np.abs(summed.offset[0] - self._guide.start_east)
        north = np.abs(summed.offset[1] - self._guide.start_north)
        parts[0] = self._random * np.sqrt(summed.weight)
        parts[1] = instrument.u_zero * summed.lever
        parts[2] = instrument.u_scale * east, instrument.u_scale * north
        parts[3] = instrument.u_azimuth * north, instrument.u_azimuth * east
        parts[4] = instrument.u_depth_fraction * east, instrument.u_depth_fraction * north
        parts[5] = summed.bend * np.abs(summed.slope - 0.5 * self.begin(summed))
        if self._u_counter:
            parts[6] = self._u_counter * np.abs(summed.slope)
        for row, one in enumerate(reversed(self._added.values()), start=1):
            parts[-row] = one[:, None]
        return parts

    def begin(self, summed: Summed) -> Array:
        """Take note of the slope that the run begins with, of its first rows; return it, shape (2, 1) [m/m]."""
        if self._first is None:
            self._first = summed.slope[:, :1].copy()
        return self._first

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
