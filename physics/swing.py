"""The rest point of a swinging bob, from readings as they come, with an honest covariance and the limits of the fit.

The least squares are in `pendulum`, the covariance under irregular air in `scatter`; where the bob ought to hang is
`hung`.
"""

from dataclasses import dataclass
from math import inf, nan, pi, sqrt

import numpy as np
import numpy.typing as npt

from eastfall.physics.earth import EARTH_ROTATION
from eastfall.physics.errors import ParameterError
from eastfall.physics.pendulum import Fit, Samples, refine, search
from eastfall.physics.scatter import Scatter, rest_point_scatter
from eastfall.physics.swing_checks import (
    airy_precession,
    axes,
    harmonic,
    is_smooth,
    schuler_rest,
    spoiled,
    swing_stands_out,
)
from eastfall.physics.swing_store import PER_SWING, SwingStore

Array = npt.NDArray[np.float64]

FEWEST_SWINGS = 1.5
LARGE_ANGLE = 0.1
"""Swing to each side [rad] above which the sine is no longer its angle to a thousandth."""
_CLEANINGS = 3
_POOR = 0.35  # smooth residuals against the swing, rms: above it this is no pendulum
_BENT = 0.03  # of a harmonic against the swing


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class RestPoint:
    """Where the bob would come to rest.

    Parameters
    ----------
    fits : bool
        Whether the readings look like a free swing (or a bob at rest). If not, every number here that rests on the
        model is NaN and `message` says what was seen.
    message : str
        What the crew should know; empty if nothing.
    east, north : float
        Rest point [m].
    covariance : array, shape (2, 2)
        Of it, east first [m²]; twice the standard uncertainty holds the truth in about 95 % of cases.
    period, u_period : float
        Of a full swing and its standard uncertainty [s]; NaN without a swing.
    decay : float
        Time in which the swing falls to 1/e [s]; NaN where it does not fall.
    amplitude, width : float
        Half axes of the ellipse at the newest reading [m]; `width` is negative for a clockwise bob.
    swings : float
        Full swings seen.
    widening : float
        Factor on the uncertainty for irregular air.
    schuler_east, schuler_north : float
        Schuler mean of the turning points, the check on paper [m]; NaN from fewer than three.
    """

    fits: bool
    message: str = ""
    east: float = nan
    north: float = nan
    covariance: Array
    period: float = nan
    u_period: float = nan
    decay: float = nan
    amplitude: float = nan
    width: float = nan
    swings: float = 0.0
    widening: float = nan
    schuler_east: float = nan
    schuler_north: float = nan

    @property
    def u_east(self) -> float:
        """Standard uncertainty of `east` [m]."""
        return sqrt(float(self.covariance[0, 0]))

    @property
    def u_north(self) -> float:
        """Standard uncertainty of `north` [m]."""
        return sqrt(float(self.covariance[1, 1]))

    def swings_needed(self, for_uncertainty: float) -> float:
        """Full swings after which both standard uncertainties should be under a value.

        Parameters
        ----------
        for_uncertainty : float
            [m], more than 0.

        Returns
        -------
        float
            Counted from the first reading; what has been seen where it is good enough already. NaN if the model
            does not fit.

        Raises
        ------
        ParameterError
            If `for_uncertainty` is not positive.

        Notes
        -----
        u falls with one over the root of the time once 1.5 swings are seen.
        """
        if not for_uncertainty > 0.0:
            raise ParameterError("for_uncertainty", for_uncertainty, "m", "more than 0 m")
        worst = max(self.u_east, self.u_north)
        return self.swings * max(1.0, (worst / for_uncertainty) ** 2)


class RestPointTracker:
    """Rest point from a stream of positions.

    Rows are averaged over fixed stretches of time, at least 12 in a swing, of which 1024 are kept: an hour or more
    of a long line. When they are full, neighbours are joined as far as that allows, then the oldest are dropped; so
    cost and memory are bounded. An estimate rests on the rows alone, not on how they were cut into blocks; two
    trackers asked at the same rows give the same answers. Rows with a missing or earlier time or a missing
    position are left out. Copy it with `copy.deepcopy`.

    Parameters
    ----------
    latitude : float
        φ [rad].
    length : float, optional
        Of the line [m]: gives the period to expect, and the finding that the line may be touching. 0, a bob at the
        suspension, counts as unknown.
    gravity : float
        g [m/s²].
    period : float, optional
        Of the free line [s], where it is known better than 2π√(L/g): see `hung.free_period`.
    u_period : float
        Relative standard uncertainty of that [1].

    Raises
    ------
    ParameterError
        If a number is outside its range.
    """

    def __init__(
        self,
        latitude: float,
        length: float | None = None,
        gravity: float = 9.80665,
        period: float | None = None,
        u_period: float = 0.005,
    ) -> None:
        _check("latitude", abs(latitude) <= pi / 2, latitude, "rad", "-pi/2 to pi/2")
        _check("length", length is None or 0.0 <= length < inf, length, "m", "0 m or more")
        _check("gravity", gravity > 0.0, gravity, "m/s²", "more than 0 m/s²")
        _check("period", period is None or 0.0 < period < inf, period, "s", "more than 0 s")
        self.turn = EARTH_ROTATION * float(np.sin(latitude))
        length = length or None
        self.length = length
        self.period = 2.0 * pi * sqrt(length / gravity) if period is None and length is not None else period
        self.u_period = u_period
        self._store = SwingStore(self.period, self.turn)
        self._last: Fit | None = None
        self._rows = self._searched = 0.0  # readings behind the last fit and the last search

    def update(self, time: npt.ArrayLike, east: npt.ArrayLike, north: npt.ArrayLike) -> None:
        """Take rows.

        Parameters
        ----------
        time : array_like, shape (n,)
            [s].
        east, north : array_like, shape (n,)
            Position of the bob [m].

        Raises
        ------
        ParameterError
            If the three differ in length.
        """
        rows = [np.atleast_1d(np.asarray(one, dtype=np.float64)) for one in (time, east, north)]
        if len({one.shape for one in rows}) != 1:
            raise ParameterError(
                "east, north", (rows[1].shape, rows[2].shape), "", f"the shape of time, {rows[0].shape}"
            )
        self._store.add(np.stack(rows))

    def samples(self) -> Samples:
        """Return the kept stretches and the open one, time counting from near the first row."""
        return self._store.samples()

    def estimate(self) -> RestPoint | None:
        """Give the rest point as it stands.

        Returns
        -------
        RestPoint or None
            None before 1.5 swings, or where there are too few readings for the model; from then on a result
            whose `fits` says whether it holds.

        Notes
        -----
        The model is a damped spherical pendulum on the turning Earth,
        ζ(t) = c + e^(-γt) e^(-iΩt) (A e^(iωt) + B e^(-iωt)), ζ = east + i north, Ω = ω_E sin φ, with the turning
        of the ellipse by its own width (`airy_precession`) taken off Ω where the length is known.

        References
        ----------
        Sommerville, W. B. (1972), Quarterly Journal of the Royal Astronomical Society 13, 40-62 (the pendulum of
        Foucault and its ellipse).
        """
        samples = self.samples()
        enough = FEWEST_SWINGS * (self.period or 0.0)
        if samples.time.size < 12 or samples.duration < enough * (1.0 - 1.0 / PER_SWING[0]):
            return None
        every = samples.time.size
        samples, fit, settled = self._clean_fit(samples)
        swings = samples.duration * fit.omega / (2.0 * pi)
        if not swing_stands_out(samples, fit):
            return _at_rest(samples)
        if self.period is None and swings < FEWEST_SWINGS * 0.97:
            return None
        scatter = rest_point_scatter(samples, fit)
        trouble = self._trouble(samples, fit, settled)
        if trouble:
            return RestPoint(fits=False, message=trouble, covariance=np.full((2, 2), nan), swings=swings)
        return self._result(samples, fit, scatter, swings, every - samples.time.size)

    def _clean_fit(self, samples: Samples) -> tuple[Samples, Fit, bool]:
        """Fit, leaving out stretches that a spike has thrown off."""
        fit, settled = self._fit(samples)
        for _ in range(_CLEANINGS):
            off = spoiled(samples, fit)
            if not off.any():
                break
            samples = samples[~off]
            fit, settled = refine(samples, fit.turn, fit.omega, fit.gamma)
            self._last = fit
        return samples, fit, settled

    def _fit(self, samples: Samples) -> tuple[Fit, bool]:
        """Go on from the last fit; search afresh where that is poor, but not again before the record has grown."""
        rows = float(samples.weight.sum())
        if self._last is not None and rows < 2.0 * self._rows:
            fit, settled = refine(
                samples, self.turn - self._airy(self._last), self._last.omega, self._last.gamma
            )
            as_good = settled and fit.cost / rows <= 2.0 * self._last.cost / self._rows
            if as_good or rows < 1.25 * self._searched:
                return self._remember(fit, rows), settled
        self._searched = rows
        fit, settled = search(samples, self.turn, None if self.period is None else 2.0 * pi / self.period)
        if self._airy(fit):
            fit, settled = refine(samples, self.turn - self._airy(fit), fit.omega, fit.gamma)
        return self._remember(fit, rows), settled

    def _remember(self, fit: Fit, rows: float) -> Fit:
        self._last, self._rows = fit, rows
        return fit

    def _airy(self, fit: Fit) -> float:
        """Return the turn of the ellipse by its own width, mid record [rad/s], anticlockwise positive."""
        if self.length is None:
            return 0.0
        major, minor = axes(fit.forward, fit.backward)
        return float(airy_precession(self.length, major, minor, 2.0 * pi / fit.omega))

    def _trouble(self, samples: Samples, fit: Fit, settled: bool) -> str:
        """Say why the readings are not a free swing; empty if they may be one."""
        swing = np.sqrt(
            np.average(np.abs(samples.value - fit.residual - fit.centre) ** 2, weights=samples.weight)
        )
        left = sqrt(fit.cost / samples.weight.sum())
        period = 2.0 * pi / fit.omega
        if not settled:
            return "no free swing fits the readings: the search found no best period"
        if left > _POOR * swing and is_smooth(fit):
            sizes = f"{1e3 * left:.1f} mm are left over of a swing of {1e3 * swing:.1f} mm rms"
            return f"no free swing fits the readings: {sizes}"
        if self.period is not None and not 0.6 < period / self.period < 1.6:
            return f"the period of {period:.1f} s is not that of the free line, {self.period:.1f} s"
        if harmonic(samples, fit) > _BENT:
            return "the swing is bent as if the line met something on the way: no rest point from it"
        return ""

    def _result(
        self, samples: Samples, fit: Fit, scatter: Scatter, swings: float, left_out: int
    ) -> RestPoint:
        age = float(samples.time[-1]) - fit.middle
        shrunk = np.exp(-fit.gamma * age)
        major, minor = axes(fit.forward * shrunk, fit.backward * shrunk)
        u_omega = self._u_omega(samples, fit, scatter)
        period = 2.0 * pi / fit.omega
        u_period = period * u_omega / fit.omega
        schuler = schuler_rest(samples, fit)
        return RestPoint(
            fits=True,
            message="; ".join(self._notes(period, u_period, major, scatter, left_out)),
            east=fit.centre.real,
            north=fit.centre.imag,
            covariance=scatter.covariance,
            period=period,
            u_period=u_period,
            decay=1.0 / fit.gamma if fit.gamma > 0.0 else nan,
            amplitude=major,
            width=minor,
            swings=swings,
            widening=scatter.widening,
            schuler_east=schuler.real,
            schuler_north=schuler.imag,
        )

    @staticmethod
    def _u_omega(samples: Samples, fit: Fit, scatter: Scatter) -> float:
        """Return the standard uncertainty of ω [rad/s], widened as that of the rest point."""
        freedom = max(2.0 * samples.time.size - 8.0, 1.0)
        return float(scatter.widening * sqrt(fit.cost / freedom * max(fit.inverse[0, 0], 0.0)))

    def _notes(
        self, period: float, u_period: float, amplitude: float, scatter: Scatter, left_out: int
    ) -> list[str]:
        notes = []
        if self.period is not None and period < self.period * (1.0 - 2.0 * self.u_period) - 2.0 * u_period:
            notes.append(
                f"the line may be touching: it swings in {0.5 * period:.2f} s from side to side, "
                f"free it would take {0.5 * self.period:.2f} s"
            )
        if self.length is not None and amplitude > LARGE_ANGLE * self.length:
            notes.append(
                f"large swing: {amplitude / self.length:.2f} rad to each side, the model is for small ones"
            )
        if scatter.colour > 0.5:
            notes.append(
                f"irregular air or a moving rest point: uncertainty widened {scatter.widening:.1f} times"
            )
        if left_out:
            notes.append(f"{left_out} of the averaged stretches left out: spikes")
        return notes


def _check(name: str, ok: bool, value: object, unit: str, expected: str) -> None:
    if not ok:
        raise ParameterError(name, value, unit, expected)


def _at_rest(samples: Samples) -> RestPoint:
    """Mean of readings in which no swing can be seen."""
    mean = complex(np.average(samples.value, weights=samples.weight))
    residual = samples.value - mean
    fit = Fit(
        middle=float(samples.time[0]),
        centre=mean,
        forward=0j,
        backward=0j,
        omega=0.0,
        gamma=0.0,
        turn=0.0,
        residual=residual,
        cost=float(np.sum(samples.weight * np.abs(residual) ** 2)),
        basis=np.ones((1, samples.time.size), dtype=np.complex128),
        slopes=np.empty((0, samples.time.size), dtype=np.complex128),
        normal=np.empty((0, 0)),
    )
    scatter = rest_point_scatter(samples, fit)
    return RestPoint(
        fits=True,
        message="no swing stands out of the readings: the rest point is their mean",
        east=mean.real,
        north=mean.imag,
        covariance=scatter.covariance,
        widening=scatter.widening,
    )
