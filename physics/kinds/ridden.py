"""How far west a plumb guide seems to have gone, ∫ ε dz: what was summed row by row put right once speeds are known.

The speed at a row, without looking ahead, is `moving`; what is expected of a guide is `plumbguide`.
"""

from collections.abc import Callable

import numpy as np
from numpy.typing import NDArray

from eastfall.physics.binning import TimeBins
from eastfall.physics.steps import steps, steps_from

Array = NDArray[np.float64]

_KNOT = 0.7
"""Rows this close in time [s] share a knot: long enough for readings that arrive 30 ms late or early (0.1 mm in 54 mm
at 8 m/s and 10 Hz), short enough for the corners of a winch's ramps (the same at 2 m/s²)."""


class Ridden:
    """What is still to be added to a running ∫ ε dz; to the last bit the same however the rows are cut into blocks.

    A sum that looks at no later row leans on speeds that overshoot where a winch stops speeding up, and on steps that
    seem to run where a line was read at rest alone. Here rows are averaged into knots, and what was summed up to one is
    put right once the next has closed. From knot to knot the lean is that of the mean speed between them, as the tilts
    of a steady pull give it by the trapezoidal rule. Over a pause without rows it is that at its two ends, where the
    tilts were read: their speed is that of the parabola through a knot and its neighbours, in which the nearer one
    weighs more.

    Parameters
    ----------
    lean : callable
        ε [rad] of speeds [m/s], accelerations [m/s²] and depths [m].
    depth : float
        That the journey begins at [m].
    summed, missing : float
        The running sum there, and what is to be added to it [m].
    """

    def __init__(
        self, lean: Callable[[Array, Array, Array], Array], depth: float, summed: float, missing: float
    ) -> None:
        self._lean = lean
        self._bins = TimeBins(_KNOT, 2)
        self._knots = np.empty(
            (4, 0)
        )  # time, depth, sum and acceleration of the newest knot and of the one before
        self._settled = np.array([[depth], [summed + missing]])
        self._missing = np.array([missing])
        self._angle: float | None = None  # ε at the last settled knot

    def update(self, time: Array, depth: Array, summed: Array, acceleration: Array) -> Array:
        """Take rows.

        Parameters
        ----------
        time : ndarray, shape (n,)
            Finite and not falling [s]; n is not 0.
        depth, summed : ndarray, shape (n,)
            Finite; depth and the running sum [m].
        acceleration : ndarray, shape (n,)
            Of the line [m/s²]; NaN is none.

        Returns
        -------
        ndarray, shape (n,) or (1,)
            To be added to the running sum [m].
        """
        number, closed = self._bins.add(time, np.stack([depth, summed]))
        if not closed.time.size:
            return self._missing
        older = self._knots.shape[1] - 1
        closers = np.searchsorted(number, np.arange(1, closed.time.size + 1))
        pull = np.nan_to_num(acceleration[closers])
        missing = self._settle(np.stack([closed.time, *closed.means, pull]))
        return missing[np.maximum(number + older, 0) - max(older, 0)]

    def _settle(self, new: Array) -> Array:
        """Take knots; return what is missing at the last knot settled before and at those that are now, shape (m,)."""
        first = max(self._knots.shape[1] - 1, 0)
        knots = np.concatenate([self._knots, new], axis=1)
        self._knots = knots[:, -2:].copy()
        missing = self._missing
        if knots.shape[1] > first + 1:
            here = slice(first, -1)
            depth, summed, pull = knots[1:, here]
            span, into, at = _speeds(*knots[:2])
            angle = self._lean(at[here], pull, depth)
            ends = angle - 0.5 * steps_from(float(angle[0]) if self._angle is None else self._angle, angle)
            middle = np.where(span[here] > 2.0 * _KNOT, ends, self._lean(into[here], pull, depth))
            terms = np.concatenate([self._settled[1], middle * steps_from(float(self._settled[0, 0]), depth)])
            ridden = np.cumsum(terms)[1:]
            missing = np.concatenate([missing, ridden - summed])
            self._settled, self._angle = np.array([depth[-1:], ridden[-1:]]), float(angle[-1])
            self._missing = missing[-1:].copy()
        return missing


def _speeds(time: Array, depth: Array) -> tuple[Array, Array, Array]:
    """Return for each knot the time since the one before [s], the mean speed from there, and the speed at the knot.

    The first has the mean speed to its neighbour for all; the speed at the newest is not known, and NaN.
    """
    span = steps(time)
    chord = steps(depth) / span
    at = (chord[:-1] * span[1:] + chord[1:] * span[:-1]) / (span[:-1] + span[1:])
    return (
        np.concatenate([[0.0], span]),
        np.concatenate([chord[:1], chord]),
        np.concatenate([chord[:1], at, [np.nan]]),
    )
