"""Published closed forms for falling bodies, which checks hold the integration against; no prediction uses them."""

from math import pi

import numpy as np
import numpy.typing as npt

from eastfall.physics.earth import EARTH_ROTATION, Array

SIDEREAL_DAY = 86164.1
"""τ [s], as printed with Olbers's formula."""


def fall_time(height: npt.ArrayLike, gravity: npt.ArrayLike) -> Array:
    """Time of a fall from rest under constant gravity.

    Parameters
    ----------
    height : array_like
        h [m], 0 or more.
    gravity : array_like
        g [m/s²].

    Returns
    -------
    array
        √(2h/g) [s], broadcast.
    """
    time: Array = np.sqrt(2.0 * np.asarray(height, dtype=np.float64) / np.asarray(gravity, dtype=np.float64))
    return time


def eastward(
    height: npt.ArrayLike, latitude: npt.ArrayLike, gravity: npt.ArrayLike, rotation: float = EARTH_ROTATION
) -> Array:
    """Eastward deflection of a body falling from rest, to first order in the Earth's rotation.

    Parameters
    ----------
    height : array_like
        h [m], 0 or more.
    latitude : array_like
        φ [rad].
    gravity : array_like
        g [m/s²].
    rotation : float
        ω [rad/s].

    Returns
    -------
    array
        ⅓ ω cos φ √(8h³/g) [m], broadcast; positive east.

    References
    ----------
    Kibble, T. W. B. & Berkshire, F. H. (2004), Classical Mechanics, 5th ed.
    """
    h, g = np.asarray(height, dtype=np.float64), np.asarray(gravity, dtype=np.float64)
    offset: Array = rotation / 3.0 * np.cos(latitude) * np.sqrt(8.0 * h**3 / g)
    return offset


def thrown_up(
    height: npt.ArrayLike, latitude: npt.ArrayLike, gravity: npt.ArrayLike, rotation: float = EARTH_ROTATION
) -> Array:
    """Eastward offset of a body thrown straight up to a height when it is back at its start.

    Parameters
    ----------
    height : array_like
        h [m] reached, 0 or more.
    latitude : array_like
        φ [rad].
    gravity : array_like
        g [m/s²].
    rotation : float
        ω [rad/s].

    Returns
    -------
    array
        -(4/3) ω cos φ √(8h³/g) [m], broadcast; negative: it lands to the west.

    References
    ----------
    Goldstein, H., Poole, C. & Safko, J. (2002), Classical Mechanics, 3rd ed., chapter 4, exercises.
    """
    offset: Array = -4.0 * eastward(height, latitude, gravity, rotation)
    return offset


def equatorward(
    height: npt.ArrayLike,
    latitude: npt.ArrayLike,
    gravity: npt.ArrayLike,
    coefficient: npt.ArrayLike,
    rotation: float = EARTH_ROTATION,
) -> Array:
    """Equatorward deflection of a body falling from rest, to second order in the Earth's rotation.

    Parameters
    ----------
    height : array_like
        h [m].
    latitude : array_like
        φ [rad].
    gravity : array_like
        g [m/s²].
    coefficient : array_like
        C [1], which depends on the reference line and the field: `equatorward_coefficients`.
    rotation : float
        ω [rad/s].

    Returns
    -------
    array
        C h² ω² sin φ cos φ/g [m], broadcast; positive south in the northern hemisphere.

    References
    ----------
    Sivukhin, D. V., General Course of Physics, vol. I (C = 2/3); Marion, J. B. & Thornton, S. T., Classical
    Dynamics of Particles and Systems, problem 10-13 (C = 4).
    """
    h = np.asarray(height, dtype=np.float64)
    turning = rotation**2 * np.sin(latitude) * np.cos(latitude)
    offset: Array = (
        np.asarray(coefficient, dtype=np.float64) * h**2 * turning / np.asarray(gravity, dtype=np.float64)
    )
    return offset


def curvature_ratio(
    curvature: float, latitude: float, gravity: float, rotation: float = EARTH_ROTATION
) -> float:
    """Curvature of the plumb line in units of what rotation alone would give.

    Parameters
    ----------
    curvature : float
        κ [rad/m].
    latitude : float
        φ [rad], neither 0 nor ±π/2.
    gravity : float
        g [m/s²].
    rotation : float
        ω [rad/s].

    Returns
    -------
    float
        K = κ g/(ω² sin φ cos φ) [1]: 0 in a constant field, 4 for a sphere, about 3.06 for the ellipsoid.
    """
    return float(curvature * gravity / (rotation**2 * np.sin(latitude) * np.cos(latitude)))


def equatorward_coefficients(ratio: float) -> dict[str, float]:
    """Coefficients of the equatorward deflection for the three reference lines.

    Parameters
    ----------
    ratio : float
        K of `curvature_ratio` [1].

    Returns
    -------
    dict
        C [1] against the `straight` vertical at the release, 2/3 - K/6; against the `field-line`, 2/3 + K/3; against a
        `hung-line`, the bob of a light line, 2/3 + 5K/6.

    Notes
    -----
    A field line bends by ½κh² and a hung bob by κh², that is by K/2 and K in units of h² ω² s c/g, toward the pole.
    """
    straight = 2.0 / 3.0 - ratio / 6.0
    return {"straight": straight, "field-line": straight + ratio / 2.0, "hung-line": straight + ratio}


def drag_time(height: npt.ArrayLike, gravity: float, terminal: float) -> Array:
    """Time of a fall from rest with drag at constant coefficient.

    Parameters
    ----------
    height : array_like
        h [m], 0 or more.
    gravity : float
        g [m/s²].
    terminal : float
        Terminal speed V [m/s].

    Returns
    -------
    array
        t [s] from h = (V²/g) ln cosh(gt/V), in the shape of `height`.
    """
    lengths = np.asarray(height, dtype=np.float64) * gravity / terminal**2
    # arcosh(e^x) = x + ln(1 + √(1 - e^(-2x))), which does not overflow.
    time: Array = terminal / gravity * (lengths + np.log1p(np.sqrt(-np.expm1(-2.0 * lengths))))
    return time


def drag_eastward(
    height: npt.ArrayLike, latitude: float, gravity: float, terminal: float, rotation: float = EARTH_ROTATION
) -> Array:
    """Eastward deflection of a fall from rest with the vertical drag of a constant coefficient.

    Parameters
    ----------
    height : array_like
        h [m], 0 or more.
    latitude : float
        φ [rad].
    gravity : float
        g [m/s²].
    terminal : float
        Terminal speed V [m/s].
    rotation : float
        ω [rad/s].

    Returns
    -------
    array
        E = 2ω cos φ (V²/g)[t - (V/g) gd(gt/V)] [m], in the shape of `height`; gd(x) = 2 arctan tanh(x/2).

    Notes
    -----
    First order in ω. The eastward motion is u' = 2ω cos φ v - (g v/V²) u: drag acts along the velocity against the
    air, so it brakes the small eastward speed in the same proportion as the fall.
    """
    pace = gravity / terminal
    time = drag_time(height, gravity, terminal)
    gudermann = 2.0 * np.arctan(np.tanh(0.5 * pace * time))
    offset: Array = 2.0 * rotation * np.cos(latitude) * terminal / pace * (time - gudermann / pace)
    return offset


def olbers(fallen: float, time: float, latitude: float, gravity: float, day: float = SIDEREAL_DAY) -> float:
    """Eastward deflection from a measured height and time of fall, the delay by air to first order.

    Parameters
    ----------
    fallen : float
        a, in any unit of length.
    time : float
        t [s] that the fall took.
    latitude : float
        φ [rad].
    gravity : float
        g, in that unit of length per s².
    day : float
        τ, one turn of the Earth [s].

    Returns
    -------
    float
        E = (4π cos φ t/3τ)(a - δ/2) with δ = ½ g t² - a, in the unit of `fallen`; positive east.

    References
    ----------
    Olbers, W. (1803), in Benzenberg, J. F. (1804), Versuche über das Gesetz des Falls.
    """
    lag = 0.5 * gravity * time**2 - fallen
    return float(4.0 * pi * np.cos(latitude) * time / (3.0 * day) * (fallen - 0.5 * lag))


def orbit_fall(
    height: float, radius: float, gm: float, rotation: float = EARTH_ROTATION
) -> tuple[float, float]:
    """Fall at the equator of a turning point-mass Earth, as a Kepler orbit.

    Parameters
    ----------
    height : float
        h [m] fallen from rest against the Earth.
    radius : float
        R of the release [m]; its circular speed is above ωR.
    gm : float
        GM [m³/s²].
    rotation : float
        ω [rad/s].

    Returns
    -------
    tuple of float
        Time [s], and offset from the plumb line through the release [m], positive east.

    Notes
    -----
    The release is the orbit's apogee: 1 - e = ω²R³/GM, a = R/(1 + e). With ψ the eccentric anomaly from there,
    sin²(ψ/2) = h'/(2ae), t = √(a³/GM)(ψ + e sin ψ), tan(θ/2) = √((1 - e)/(1 + e)) tan(ψ/2). The plumb line at the
    equator is straight and points to the centre; the fallen height along it is h = R - r cos(θ - ωt).

    References
    ----------
    Any text on celestial mechanics.
    """
    slow = rotation**2 * radius**3 / gm
    eccentricity = 1.0 - slow
    semi_major = radius / (1.0 + eccentricity)
    inward, time, east = height, 0.0, 0.0
    # The offset lowers the level of the plumb line's point by E²/2R, 40 nm for 1 km: two rounds settle it.
    for _ in range(3):
        psi = 2.0 * np.arcsin(np.sqrt(inward / (2.0 * semi_major * eccentricity)))
        time = float(np.sqrt(semi_major**3 / gm) * (psi + eccentricity * np.sin(psi)))
        angle = 2.0 * np.arctan(np.sqrt(slow / (1.0 + eccentricity)) * np.tan(0.5 * psi)) - rotation * time
        east = float((radius - inward) * np.sin(angle))
        inward = float(height - (radius - inward) * (1.0 - np.cos(angle)))
    return time, east
