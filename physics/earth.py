"""Normal gravity and its shape around a point of the ellipsoid, and gravity inside layered shells.

What these mean for one shaft (layers of rock, measured values, offsets) is `field`.
"""

from collections.abc import Sequence
from dataclasses import dataclass
from itertools import pairwise
from math import isfinite

import numpy as np
import numpy.typing as npt

from eastfall.physics.errors import ParameterError

Array = npt.NDArray[np.float64]

EARTH_ROTATION = 7.292115e-5
"""[rad/s]; Moritz, H. (1980), Geodetic Reference System 1980, Bulletin géodésique 54(3), 395-405."""

GRAVITATIONAL_CONSTANT = 6.67430e-11
"""[m³/(kg s²)]; CODATA 2018, Tiesinga et al. (2021), Rev. Mod. Phys. 93, 025010."""


@dataclass(frozen=True, slots=True, kw_only=True)
class Ellipsoid:
    """A level ellipsoid of revolution: the shape and gravity of a normal Earth.

    Parameters
    ----------
    name, source : str
        What it is called, and where its numbers are printed.
    semimajor_axis : float
        Equatorial radius a [m].
    flattening : float
        f [1].
    gm : float
        Geocentric gravitational constant, atmosphere included [m³/s²].
    rotation : float
        ω [rad/s].
    equatorial_gravity : float
        γe [m/s²].
    somigliana : float
        k of Somigliana's closed formula [1].
    """

    name: str
    source: str
    semimajor_axis: float
    flattening: float
    gm: float
    rotation: float
    equatorial_gravity: float
    somigliana: float

    @property
    def eccentricity_squared(self) -> float:
        """First eccentricity squared, e² = f (2 - f) [1]."""
        return self.flattening * (2.0 - self.flattening)

    @property
    def gravity_ratio(self) -> float:
        """Helmert's ratio m = ω² a² b / GM [1]."""
        a = self.semimajor_axis
        return self.rotation**2 * a**3 * (1.0 - self.flattening) / self.gm


WGS84 = Ellipsoid(
    name="WGS84",
    source="NGA.STND.0036_1.0.0_WGS84 (2014), Department of Defense World Geodetic System 1984",
    semimajor_axis=6378137.0,
    flattening=1.0 / 298.257223563,
    gm=3.986004418e14,
    rotation=EARTH_ROTATION,
    equatorial_gravity=9.7803253359,
    somigliana=0.00193185265241,
)

GRS80 = Ellipsoid(
    name="GRS80",
    source="Moritz, H. (1980), Geodetic Reference System 1980, Bulletin géodésique 54(3), 395-405",
    semimajor_axis=6378137.0,
    flattening=1.0 / 298.257222101,
    gm=3.986005e14,
    rotation=EARTH_ROTATION,
    equatorial_gravity=9.7803267715,
    somigliana=0.001931851353,
)


def _checked_latitude(latitude: npt.ArrayLike) -> Array:
    phi = np.asarray(latitude, dtype=np.float64)
    if np.any(np.abs(phi) > np.pi / 2):
        raise ParameterError("latitude", latitude, "rad", "-pi/2 to pi/2")
    return phi


def normal_gravity(
    latitude: npt.ArrayLike, height: npt.ArrayLike = 0.0, ellipsoid: Ellipsoid = WGS84
) -> Array:
    """Gravity of the level ellipsoid on and near its surface.

    Parameters
    ----------
    latitude : array_like
        Geodetic latitude φ [rad], -π/2 to π/2; NaN gives NaN.
    height : array_like
        Height h above the ellipsoid [m]; broadcasts with `latitude`.
    ellipsoid : Ellipsoid

    Returns
    -------
    array
        γ [m/s²], attraction and centrifugal together, positive down.

    Raises
    ------
    ParameterError
        If a latitude is outside -π/2 to π/2.

    Notes
    -----
    γ = γe (1 + k s²)/√(1 - e² s²), s = sin φ, and above it the second-order formula
    γ_h = γ [1 - 2 (1 + f + m - 2 f s²) h/a + 3 h²/a²]; the terms left out are of order (h/a)³.

    References
    ----------
    Moritz, H. (1980), Bulletin géodésique 54(3) (Somigliana's formula).
    Heiskanen, W. A. & Moritz, H. (1967), Physical Geodesy, chapter 2 (the height formula).
    """
    s2 = np.sin(_checked_latitude(latitude)) ** 2
    surface = (
        ellipsoid.equatorial_gravity
        * (1.0 + ellipsoid.somigliana * s2)
        / np.sqrt(1.0 - ellipsoid.eccentricity_squared * s2)
    )
    f, m = ellipsoid.flattening, ellipsoid.gravity_ratio
    ratio = np.asarray(height, dtype=np.float64) / ellipsoid.semimajor_axis
    scaled: Array = surface * (1.0 - 2.0 * (1.0 + f + m - 2.0 * f * s2) * ratio + 3.0 * ratio**2)
    return scaled


def meridian_radius(latitude: npt.ArrayLike, ellipsoid: Ellipsoid = WGS84) -> Array:
    """Radius of curvature M of the ellipsoid along the meridian.

    Parameters
    ----------
    latitude : array_like
        φ [rad].
    ellipsoid : Ellipsoid

    Returns
    -------
    array
        M = a (1 - e²)/(1 - e² s²)^(3/2) [m], in the shape of `latitude`.

    Raises
    ------
    ParameterError
        If a latitude is outside -π/2 to π/2.

    References
    ----------
    Heiskanen, W. A. & Moritz, H. (1967), Physical Geodesy (radii of curvature).
    """
    e2 = ellipsoid.eccentricity_squared
    w = 1.0 - e2 * np.sin(_checked_latitude(latitude)) ** 2
    radius: Array = ellipsoid.semimajor_axis * (1.0 - e2) / w**1.5
    return radius


def prime_vertical_radius(latitude: npt.ArrayLike, ellipsoid: Ellipsoid = WGS84) -> Array:
    """Radius of curvature N of the ellipsoid across the meridian.

    Parameters
    ----------
    latitude : array_like
        φ [rad].
    ellipsoid : Ellipsoid

    Returns
    -------
    array
        N = a/√(1 - e² s²) [m], in the shape of `latitude`.

    Raises
    ------
    ParameterError
        If a latitude is outside -π/2 to π/2.

    References
    ----------
    Heiskanen, W. A. & Moritz, H. (1967), Physical Geodesy (radii of curvature).
    """
    w = 1.0 - ellipsoid.eccentricity_squared * np.sin(_checked_latitude(latitude)) ** 2
    radius: Array = ellipsoid.semimajor_axis / np.sqrt(w)
    return radius


def plumbline_curvature(
    latitude: npt.ArrayLike, ellipsoid: Ellipsoid = WGS84, height: npt.ArrayLike = 0.0
) -> Array:
    """Curvature of the plumb line of normal gravity on and near the ellipsoid.

    Parameters
    ----------
    latitude : array_like
        φ [rad].
    ellipsoid : Ellipsoid
    height : array_like
        h above the ellipsoid [m]; broadcasts with `latitude`.

    Returns
    -------
    array
        κ [rad/m]: going down, the direction of gravity turns by κ toward north for every metre. Positive in
        the northern and negative in the southern hemisphere (toward the nearer pole).

    Raises
    ------
    ParameterError
        If a latitude is outside -π/2 to π/2.

    Notes
    -----
    κ = (1/γ)(1/M) dγ/dφ with dγ/dφ taken along the level surface. On the ellipsoid Somigliana's formula gives
    γ'/γ = s c [2k/(1 + k s²) + e²/(1 - e² s²)], s = sin φ, c = cos φ. At height h the level surface falls by
    h γ'/γ per radian toward the pole, to first order in h, and γ there is that of `normal_gravity`.

    References
    ----------
    Heiskanen, W. A. & Moritz, H. (1967), Physical Geodesy, chapter 2 (curvature of the plumb line).
    """
    phi = _checked_latitude(latitude)
    h, a, f = np.asarray(height, dtype=np.float64), ellipsoid.semimajor_axis, ellipsoid.flattening
    s, c = np.sin(phi), np.cos(phi)
    k, e2 = ellipsoid.somigliana, ellipsoid.eccentricity_squared
    growth = s * c * (2.0 * k / (1.0 + k * s**2) + e2 / (1.0 - e2 * s**2))
    lapse = 2.0 * (1.0 + f + ellipsoid.gravity_ratio - 2.0 * f * s**2) / a - 6.0 * h / a**2
    shrunk = normal_gravity(phi, h, ellipsoid) / normal_gravity(phi, 0.0, ellipsoid)
    along_level = growth * (shrunk + lapse * h) + 8.0 * f * s * c * h / a
    curvature: Array = along_level / (shrunk * (meridian_radius(phi, ellipsoid) + h))
    return curvature


def free_air_gradient(
    gravity: npt.ArrayLike,
    meridian: npt.ArrayLike,
    prime_vertical: npt.ArrayLike,
    rotation: float = EARTH_ROTATION,
) -> Array:
    """Growth of gravity with depth in open air, by Bruns's formula.

    Parameters
    ----------
    gravity : array_like
        g [m/s²].
    meridian, prime_vertical : array_like
        Principal radii of curvature of the level surface [m].
    rotation : float
        ω [rad/s].

    Returns
    -------
    array
        F = g (1/M + 1/N) + 2 ω² [1/s²], positive: gravity grows downwards.

    References
    ----------
    Heiskanen, W. A. & Moritz, H. (1967), Physical Geodesy, chapter 2 (Bruns's formula).
    """
    curvatures = 1.0 / np.asarray(meridian, dtype=np.float64) + 1.0 / np.asarray(
        prime_vertical, dtype=np.float64
    )
    gradient: Array = np.asarray(gravity, dtype=np.float64) * curvatures + 2.0 * rotation**2
    return gradient


@dataclass(frozen=True, slots=True, kw_only=True)
class Shell:
    """A spherical shell whose density is a polynomial in radius.

    Parameters
    ----------
    inner, outer : float
        Radii [m]; 0 <= inner < outer.
    coefficients : tuple of float
        ρ(r) = Σ c_k (r/scale)^k [kg/m³].
    scale : float
        [m].
    """

    inner: float
    outer: float
    coefficients: tuple[float, ...]
    scale: float = 1.0

    def __post_init__(self) -> None:
        if not (0.0 <= self.inner < self.outer and isfinite(self.outer)):
            raise ParameterError("shell", (self.inner, self.outer), "m", "0 <= inner < outer")

    def moment(self, radius: npt.ArrayLike) -> Array:
        """∫ ρ r² dr [kg] of the part of the shell inside `radius` [m]."""
        r = np.clip(np.asarray(radius, dtype=np.float64), self.inner, self.outer)
        total = np.zeros_like(r)
        for power, coefficient in enumerate(self.coefficients):
            share = coefficient / (self.scale**power * (power + 3))
            total += share * (r ** (power + 3) - self.inner ** (power + 3))
        return total


def shell_gravity(
    radius: npt.ArrayLike, shells: Sequence[Shell], gravitational_constant: float = GRAVITATIONAL_CONSTANT
) -> Array:
    """Attraction inside, between and outside spherical shells that do not turn.

    Parameters
    ----------
    radius : array_like
        Distance from the centre r [m], more than 0; NaN gives NaN.
    shells : sequence of Shell
        They may not overlap; gaps are empty.
    gravitational_constant : float
        G [m³/(kg s²)].

    Returns
    -------
    array
        g(r) = (4πG/r²) ∫₀ʳ ρ r² dr [m/s²], toward the centre, in the shape of `radius`.

    Raises
    ------
    ParameterError
        If a radius is not positive, or two shells overlap.

    References
    ----------
    Newton, I. (1687), Principia, book I, propositions 70, 71 and 73 (zero inside a shell).
    """
    r = np.asarray(radius, dtype=np.float64)
    if np.any(r <= 0.0):
        raise ParameterError("radius", radius, "m", "more than 0 m")
    ordered = sorted(shells, key=lambda shell: shell.inner)
    for below, above in pairwise(ordered):
        if above.inner < below.outer:
            raise ParameterError("shells", (below.outer, above.inner), "m", "shells that do not overlap")
    moment = sum((shell.moment(r) for shell in ordered), np.zeros_like(r))
    attraction: Array = 4.0 * np.pi * gravitational_constant * moment / r**2
    return attraction
