"""What a plumb guide would have shown on the journey so far: the curved vertical, and the lean of the moving line."""

import numpy as np
from numpy.typing import NDArray

from eastfall.physics.depth import Jump
from eastfall.physics.expected import ExpectedCurve
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

    def ride(self, depth: Array, speed: Array, acceleration: Array) -> tuple[Array, Array]:
        """Return ∫ ε dz so far at each row [m], how far west a plumb guide seems to have gone, and ε there [rad].

        The speed of a row is that of the step that led to it. While it is not known yet (the first fractions of a
        second of a run) steps are kept waiting for the first speed that is, and ε is NaN.
        """
        site = self._curve.assumptions.site
        most = 0.5 * self._curve.models.field.gravity
        felt = np.interp(depth, self._curve.depth, self._curve.gravity) - np.maximum(
            np.minimum(np.where(np.isnan(acceleration), 0.0, acceleration), most), -most
        )
        angle = lean(speed, site.latitude, felt)
        known = np.isfinite(speed)
        before = float(self._ridden_to if self._ridden_to is not None else depth[0])
        terms = np.zeros(depth.size + 1)
        terms[0] = self._ridden
        travelled, turned = (depth, angle) if known.all() else (depth[known], angle[known])
        terms[1:][known] = turned * steps_from(before, travelled)
        ridden = np.cumsum(terms)[1:]
        self._ridden = float(ridden[-1])
        self._ridden_to = float(travelled[-1]) if travelled.size else before
        return ridden, angle

    def jump(self, jump: Jump) -> None:
        """Go on at another depth: what lies between was not travelled."""
        if self._still is not None:
            ends = self._curve.look_up(self._curve.plumb, [jump.before, jump.after])
            self._still = self._still + ends[:, 1:] - ends[:, :1]
        if self._ridden_to is not None:
            self._ridden_to += jump.after - jump.before
        self._speed = LineSpeed()
