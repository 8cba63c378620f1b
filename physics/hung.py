"""Where a real wire and its bob hang still in a real field: wire weight, buoyancy, air across it, lean, stretch.

The integrals are in `wire`, the swing about the rest point is `swing`. The wire is perfectly flexible
and its slopes are small: `Hang.is_linear` says where they are not.
"""

from dataclasses import dataclass

import numpy as np
import numpy.typing as npt

from eastfall.physics.air import AirColumn
from eastfall.physics.errors import ParameterError
from eastfall.physics.field import LocalField
from eastfall.physics.settings import Line
from eastfall.physics.wire import Wire, check_line

Array = npt.NDArray[np.float64]

_STEEPEST = 0.05
"""Slope [rad] up to which the linear theory is good to about a thousandth of the deflection (slope²/2)."""


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class Hang:
    """Where bobs hang, and what the line does at the collar; every array has the shape of `length`.

    Offsets are from the straight vertical through the suspension.

    Parameters
    ----------
    length : array
        Of the line [m].
    bob_east, bob_north : array
        Offset of the bob [m].
    air_east, air_north : array
        The part of it that the cross-flow makes [m].
    slope_east, slope_north : array
        Of the line at the collar [rad].
    tension : array
        At the collar [N].
    """

    length: Array
    bob_east: Array
    bob_north: Array
    air_east: Array
    air_north: Array
    slope_east: Array
    slope_north: Array
    tension: Array

    @property
    def is_linear(self) -> npt.NDArray[np.bool_]:
        """Whether the slope at the collar is small enough for the theory, line by line."""
        return np.asarray(np.hypot(self.slope_east, self.slope_north) <= _STEEPEST)

    @property
    def is_swamped(self) -> npt.NDArray[np.bool_]:
        """Whether the air moves the bob farther than everything else together, line by line."""
        air = np.hypot(self.air_east, self.air_north)
        rest = np.hypot(self.bob_east - self.air_east, self.bob_north - self.air_north)
        return np.asarray(air > rest)


def hang(field: LocalField, line: Line, lengths: npt.ArrayLike, air: AirColumn | None = None) -> Hang:
    """Rest offsets of bobs on lines of several lengths.

    Parameters
    ----------
    field : LocalField
        Gravity and the direction of the vertical by depth, measured deflections included.
    line : settings.Line
        With `line_speed` the lean of a line that is running is in the result.
    lengths : array_like
        L [m], 0 or more; NaN gives NaN.
    air : AirColumn, optional
        For buoyancy and cross-flow; None is vacuum.

    Returns
    -------
    Hang
        In the shape of `lengths`.

    Raises
    ------
    ParameterError
        If a length is negative, or the line or its bob has no weight left in the air.

    Notes
    -----
    (T x')' = -q(z), x(0) = 0, T x' = Q at the bob, with T(z) = M' g(L) + ∫_z^L λ' g dz, side load
    q = λ' g s(z) + λ 2ωvc + ½ρ|w|w d C_D and end load Q of the same kind; s the slope of the vertical, primes less
    buoyancy, v the line speed (east only), w the air's velocity. Two integrations in order, by five-point
    Gauss-Legendre rules between the kinks of field and air. A light wire gives κL², a bare one ¾κL².

    References
    ----------
    Heiskanen, W. A. & Moritz, H. (1967), Physical Geodesy, section 5-14 (curvature of the plumb line).
    """
    length = _checked_lengths(lengths)
    flat = length.ravel()
    wire = Wire(field, line, air, float(np.nanmax(flat, initial=0.0)))
    offset, at_collar = wire.deflect(flat, flat)
    shaped = [one.reshape(length.shape) for one in (*offset, *at_collar)]
    return Hang(
        length=length,
        bob_east=shaped[0] + shaped[2],
        bob_north=shaped[1] + shaped[3],
        air_east=shaped[2],
        air_north=shaped[3],
        slope_east=(shaped[5] + shaped[7]) / shaped[4],
        slope_north=(shaped[6] + shaped[8]) / shaped[4],
        tension=shaped[4],
    )


def shape(
    field: LocalField, line: Line, length: float, depths: npt.ArrayLike, air: AirColumn | None = None
) -> tuple[Array, Array]:
    """Offsets of one line along its length.

    Parameters
    ----------
    field : LocalField
    line : settings.Line
    length : float
        L [m].
    depths : array_like
        [m], 0 to L; NaN gives NaN.
    air : AirColumn, optional

    Returns
    -------
    east, north : array
        From the straight vertical [m], in the shape of `depths`.

    Raises
    ------
    ParameterError
        If a depth is outside the line, or as in `hang`.
    """
    whole = float(_checked_lengths(length))
    depth = np.asarray(depths, dtype=np.float64)
    if np.any(depth < 0.0) or np.any(depth > whole):
        raise ParameterError("depths", depths, "m", f"0 to the length of the line, {whole} m")
    wire = Wire(field, line, air, whole)
    offset, _ = wire.deflect(depth.ravel(), np.full(depth.size, whole))
    return (offset[0] + offset[2]).reshape(depth.shape), (offset[1] + offset[3]).reshape(depth.shape)


def _checked_lengths(lengths: npt.ArrayLike) -> Array:
    length = np.asarray(lengths, dtype=np.float64)
    if np.any(length < 0.0) or np.any(np.isinf(length)):
        raise ParameterError("lengths", lengths, "m", "0 m or more, finite")
    return length


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class Stretch:
    """How much longer a loaded, warm line is than its reel says [m]; every array has the shape of the length."""

    bob: Array
    wire: Array
    thermal: Array

    @property
    def total(self) -> Array:
        """All of it [m]."""
        return self.bob + self.wire + self.thermal


def stretch(
    line: Line, length: npt.ArrayLike, gravity: npt.ArrayLike, warmer: npt.ArrayLike = 0.0
) -> Stretch:
    """Elastic and thermal stretch of a hanging line.

    Parameters
    ----------
    line : settings.Line
    length : array_like
        L of the unloaded line [m].
    gravity : array_like
        g [m/s²].
    warmer : array_like
        Mean temperature of the line above that of its calibration [K].

    Returns
    -------
    Stretch
        By the bob MgL/(AE), by its own weight λgL²/(2AE), by temperature αLΔT; longer is positive.

    Raises
    ------
    ParameterError
        If the diameter or Young's modulus is not positive.

    References
    ----------
    Timoshenko, S. (1955), Strength of Materials, part I, 3rd ed., sections 4 and 5.
    """
    if not (line.diameter > 0.0 and line.young > 0.0):
        raise ParameterError("diameter, young", (line.diameter, line.young), "m, Pa", "more than 0")
    L, g = np.asarray(length, dtype=np.float64), np.asarray(gravity, dtype=np.float64)
    stiffness = 0.25 * np.pi * line.diameter**2 * line.young
    return Stretch(
        bob=line.bob_mass * g * L / stiffness,
        wire=0.5 * line.mass_per_length * g * L * L / stiffness,
        thermal=line.thermal_expansion * L * np.asarray(warmer, dtype=np.float64),
    )


def converge(separation: npt.ArrayLike, length: npt.ArrayLike, radius: npt.ArrayLike) -> Array:
    """How much nearer two bobs hang to each other than their suspensions.

    Parameters
    ----------
    separation : array_like
        s of the suspensions [m].
    length : array_like
        L [m].
    radius : array_like
        Radius of curvature of the level surface in the direction from one to the other [m]: see `radius_toward`.

    Returns
    -------
    array
        s L/R [m], broadcast; positive is nearer.

    Raises
    ------
    ParameterError
        If the radius is not positive.
    """
    R = np.asarray(radius, dtype=np.float64)
    if np.any(R <= 0.0):
        raise ParameterError("radius", radius, "m", "more than 0 m")
    nearer: Array = np.asarray(separation, dtype=np.float64) * np.asarray(length, dtype=np.float64) / R
    return nearer


def radius_toward(field: LocalField, azimuth: npt.ArrayLike) -> Array:
    """Radius of curvature of the level surface in a direction.

    Parameters
    ----------
    field : LocalField
    azimuth : array_like
        α from true north [rad].

    Returns
    -------
    array
        R [m]; 1/R = cos² α/M + sin² α/N (Euler).
    """
    alpha = np.asarray(azimuth, dtype=np.float64)
    curvature = np.cos(alpha) ** 2 / field.meridian_radius + np.sin(alpha) ** 2 / field.prime_vertical_radius
    radius: Array = 1.0 / curvature
    return radius


def swing_wait(amplitude: npt.ArrayLike, decay: npt.ArrayLike, below: npt.ArrayLike) -> Array:
    """Time until a swing has died down to a size.

    Parameters
    ----------
    amplitude : array_like
        Now [m], 0 or more.
    decay : array_like
        Time in which the amplitude falls to 1/e [s].
    below : array_like
        The size to wait for [m].

    Returns
    -------
    array
        decay ln(amplitude/below) [s], broadcast; 0 where the swing is small enough already.

    Raises
    ------
    ParameterError
        If `decay` or `below` is not positive, or an amplitude is negative.
    """
    size, wanted = np.asarray(amplitude, dtype=np.float64), np.asarray(below, dtype=np.float64)
    for name, value, unit in (("decay", np.asarray(decay, dtype=np.float64), "s"), ("below", wanted, "m")):
        if np.any(value <= 0.0):
            raise ParameterError(name, value, unit, f"more than 0 {unit}")
    if np.any(size < 0.0):
        raise ParameterError("amplitude", amplitude, "m", "0 m or more")
    wait: Array = np.asarray(decay, dtype=np.float64) * np.log(np.maximum(size / wanted, 1.0))
    return wait


def single_swing(length: npt.ArrayLike) -> Array:
    """Time of one swing from side to side by the shaft rule.

    Parameters
    ----------
    length : array_like
        L [m].

    Returns
    -------
    array
        √L [s]: π√(L/g) with π² for g. A line that swings faster touches something.

    References
    ----------
    Lueger, O. (1904), Lexikon der gesamten Technik, "Schachtlotung".
    """
    seconds: Array = np.sqrt(np.asarray(length, dtype=np.float64))
    return seconds


def free_period(line: Line, length: npt.ArrayLike, gravity: npt.ArrayLike, air_density: float = 0.0) -> Array:
    """Period of a full small swing of a bob on a wire with mass.

    Parameters
    ----------
    line : settings.Line
    length : array_like
        L [m].
    gravity : array_like
        g [m/s²].
    air_density : float
        Mean along the line [kg/m³], for buoyancy.

    Returns
    -------
    array
        2π √(L (M + λL/3)/(g (M' + λ'L/2))) [s], broadcast, primes less buoyancy.

    Notes
    -----
    Rayleigh's quotient of the straight line, too short by at most the order of (λL/M)²; the air carried along is
    left out.

    References
    ----------
    Rayleigh, Lord (1894), The Theory of Sound, 2nd ed., section 88.
    """
    check_line(line, None)
    L, g = np.asarray(length, dtype=np.float64), np.asarray(gravity, dtype=np.float64)
    floating = air_density * 0.25 * np.pi * line.diameter**2 if line.mass_per_length > 0.0 else 0.0
    inertia = line.bob_mass + line.mass_per_length * L / 3.0
    weight = (
        line.bob_mass * (1.0 - air_density / line.bob_density) + 0.5 * (line.mass_per_length - floating) * L
    )
    period: Array = 2.0 * np.pi * np.sqrt(L * inertia / (g * weight))
    return period
