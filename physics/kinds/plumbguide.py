"""What a plumb guide would have shown on the journey so far: the curved vertical, and the lean of the moving line."""

import numpy as np
from numpy.typing import NDArray

from eastfall.physics.depth import Jump
from eastfall.physics.expected import ExpectedCurve
from eastfall.physics.kinds.ridden import Ridden
from eastfall.physics.moving import LineSpeed, lean
from eastfall.physics.readings import Readings
from eastfall.physics.steps import steps_from

Array = NDArray[np.float64]


class PlumbGuide:
    """The expected offset of a guided run, row by row.

    Parameters
    ----------
    curve : ExpectedCurve
        Of the run.
    """

    def __init__(self, curve: ExpectedCurve) -> None:
        self._curve = curve
        self._speed = LineSpeed()
        self._journey: Ridden | None = None
        self._latest = -np.inf
        self._missing = 0.0
        self._still: Array | None = None
        self._ridden = 0.0
        self._ridden_to: float | None = None
        self.start: float | None = None
        """Depth that the sum begins at [m]."""
        self.without_clock = False

    def begin(self, depth: float) -> None:
        """Let the sum begin at a depth [m]; later calls change nothing."""
        if self._still is None:
            self.start = depth
            self._still = self._curve.look_up(self._curve.plumb, [depth])

    def at_rest(self, depth: Array) -> Array:
        """Return what a probe at rest shows, from the beginning on, shape (2, n) [m]; zero before it has begun."""
        if self._still is None:
            return np.zeros((2, depth.size))
        found: Array = self._curve.look_up(self._curve.plumb, depth) - self._still
        return found

    def line_speed(self, readings: Readings) -> tuple[Array, Array]:
        """Return speed and acceleration of the line; without a clock the site's speed stands in."""
        speed, acceleration = self._speed.update(readings.time, readings.depth)
        unknown = np.isnan(readings.time)
        if unknown.any():
            self.without_clock = True
            before = readings.depth[0] if self._ridden_to is None else self._ridden_to
            steps = np.sign(steps_from(before, readings.depth))
            speed = np.where(unknown, steps * abs(self._curve.assumptions.guide.line_speed), speed)
        return speed, acceleration

    def ride(self, time: Array, depth: Array, speed: Array, acceleration: Array) -> tuple[Array, Array]:
        """Return ∫ ε dz so far at each row [m], how far west a plumb guide seems to have gone, and ε there [rad].

        The speed of a row is that of the step that led to it. While it is not known yet (the first fractions of a
        second of a run) steps are kept waiting for the first speed that is, and ε is NaN. What was summed so is put
        right as the rows after it tell more.
        """
        angle = self._lean(speed, acceleration, depth)
        known = np.isfinite(speed)
        before = float(self._ridden_to if self._ridden_to is not None else depth[0])
        terms = np.zeros(depth.size + 1)
        terms[0] = self._ridden
        travelled, turned = (depth, angle) if known.all() else (depth[known], angle[known])
        terms[1:][known] = turned * steps_from(before, travelled)
        ridden = np.cumsum(terms)[1:]
        missing = self._put_right(time, depth, ridden, acceleration)
        self._ridden = float(ridden[-1])
        self._ridden_to = float(travelled[-1]) if travelled.size else before
        self._missing = float(missing[-1])
        return ridden + missing, angle

    def _lean(self, speed: Array, acceleration: Array, depth: Array) -> Array:
        """Return ε, positive on the way down [rad]; of an acceleration no more than half of gravity is believed."""
        most = 0.5 * self._curve.models.field.gravity
        felt = np.interp(depth, self._curve.depth, self._curve.gravity) - np.maximum(
            np.minimum(np.where(np.isnan(acceleration), 0.0, acceleration), most), -most
        )
        return lean(speed, self._curve.assumptions.site.latitude, felt)

    def _put_right(self, time: Array, depth: Array, ridden: Array, acceleration: Array) -> Array:
        """Return what is to be added to a sum row by row [m]; rows without a clock, or earlier ones, tell nothing."""
        if self._journey is None:
            start = depth[0] if self._ridden_to is None else self._ridden_to
            self._journey = Ridden(self._lean, float(start), self._ridden, self._missing)
        if steps_from(self._latest, time).min() >= 0.0 and time[-1] < np.inf:
            self._latest = float(time[-1])
            return self._journey.update(time, depth, ridden, acceleration)
        known = np.where(np.isfinite(time), time, -np.inf)
        highest = np.maximum.accumulate(np.concatenate([[self._latest], known]))
        self._latest = float(highest[-1])
        good = np.isfinite(time) & (time >= highest[:-1])
        missing = np.full(1 + np.count_nonzero(good), self._missing)
        if good.any():
            missing[1:] = self._journey.update(time[good], depth[good], ridden[good], acceleration[good])
        return missing[np.cumsum(good)]

    def jump(self, jump: Jump) -> None:
        """Go on at another depth: what lies between was not travelled."""
        if self._still is not None:
            ends = self._curve.look_up(self._curve.plumb, [jump.before, jump.after])
            self._still = self._still + ends[:, 1:] - ends[:, :1]
        if self._ridden_to is not None:
            self._ridden_to += jump.after - jump.before
        self._speed = LineSpeed()
        self._journey, self._latest = None, -np.inf
