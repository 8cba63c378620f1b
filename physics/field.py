"""Gravity along and beside the straight vertical through the collar, to first order in the horizontal offset.

The ellipsoid's own formulas are in `earth`; what moves or hangs in the field is in `fall` and the line modules.
"""

from collections.abc import Sequence
from dataclasses import dataclass
from math import isfinite

import numpy as np
import numpy.typing as npt

from eastfall.physics.earth import (
    EARTH_ROTATION,
    GRAVITATIONAL_CONSTANT,
    WGS84,
    Array,
    Ellipsoid,
    meridian_radius,
    normal_gravity,
    plumbline_curvature,
    prime_vertical_radius,
)
from eastfall.physics.errors import ParameterError
from eastfall.physics.settings import Site

Layers = Sequence[tuple[float, float]]
Deflections = Sequence[tuple[float, float, float]]


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class LocalField:
    """The field of gravity around one collar, in its own frame (north, east, down).

    The frame's down is the direction of gravity at the collar. Build it with `local_field` from a site, or with
    `assemble_field` from its parts. Every method broadcasts; NaN gives NaN.

    Parameters
    ----------
    latitude : float
        Geodetic [rad], north positive.
    plumb_latitude : float
        Angle of the plumb line at the collar against the plane of the equator [rad]; above the ellipsoid its
        curvature makes it larger than `latitude`.
    gravity : float
        |g| at the collar [m/s²].
    curvature : float
        κ of the normal plumb line [rad/m], north positive.
    meridian_radius, prime_vertical_radius : float
        Principal radii of the level surface through the collar [m].
    measured_to : float
        Depth of the deepest measured deflection [m]; 0 where there is none.
    layer_tops : array, shape (layers,)
        Upper ends of the layers of rock [m]; the first is -inf, the open air above the collar.
    layer_terms : array, shape (2, layers)
        a [m³/s²] and b [1/s²] of g = a/r² + b r in each layer, r from the centre of curvature.
    knots : array, shape (knots,)
        Depths where the slope of the felt vertical changes its rate [m].
    slopes, rates, lines : array, shape (2, knots)
        (north, east) at each knot: slope [rad], its rate below [rad/m], the field line [m].
    """

    latitude: float
    plumb_latitude: float
    gravity: float
    curvature: float
    meridian_radius: float
    prime_vertical_radius: float
    measured_to: float
    layer_tops: Array
    layer_terms: Array
    knots: Array
    slopes: Array
    rates: Array
    lines: Array

    @property
    def mean_radius(self) -> float:
        """Radius of a sphere with the level surface's mean curvature [m]."""
        return 2.0 / (1.0 / self.meridian_radius + 1.0 / self.prime_vertical_radius)

    @property
    def breaks(self) -> tuple[float, ...]:
        """Depths where the field has a kink, in rising order [m]."""
        return tuple(sorted({float(d) for d in (*self.layer_tops[1:], *self.knots[1:])}))

    def gravity_at(self, depth: npt.ArrayLike) -> Array:
        """Gravity on the straight vertical.

        Parameters
        ----------
        depth : array_like
            z [m] below the collar, negative above it.

        Returns
        -------
        array
            g(z) [m/s²], in the shape of `depth`.

        Notes
        -----
        Bruns's dg/dz = 2 g/(R - z) + 2 ω² - 4πGρ(z), R the mean radius of curvature of the level surface at the
        collar, has the solution g = a/r² + b r with r = R - z and b = (4πGρ - 2ω²)/3 in each layer, a from
        continuity. Layers count as going round the Earth; a nearer ore body is not seen.

        References
        ----------
        Hofmann-Wellenhof, B. & Moritz, H. (2006), Physical Geodesy (Bruns's formula; Poincaré-Prey reduction).
        """
        z = np.asarray(depth, dtype=np.float64)
        radius = self.mean_radius - z
        terms = self.layer_terms[:, _interval(self.layer_tops, z)]
        value: Array = terms[0] / radius**2 + terms[1] * radius
        return value

    def slope(self, depth: npt.ArrayLike) -> tuple[Array, Array]:
        """Direction of the felt vertical, against that at the collar.

        Parameters
        ----------
        depth : array_like
            z [m].

        Returns
        -------
        tuple of array
            (north, east) [rad], in the shape of `depth`: the horizontal lean of the downward vertical. κ z, or
            the measured deflections, linear between measurements; below the deepest one the normal curvature
            goes on from the measured value.
        """
        z = np.asarray(depth, dtype=np.float64)
        i = _interval(self.knots, z)
        turned = self.slopes[:, i] + self.rates[:, i] * (z - self.knots[i])
        return turned[0], turned[1]

    def field_line(self, depth: npt.ArrayLike) -> tuple[Array, Array]:
        """Offset of the curved vertical through the collar from the straight one.

        Parameters
        ----------
        depth : array_like
            z [m].

        Returns
        -------
        tuple of array
            (north, east) [m], in the shape of `depth`: the integral of `slope`, ½κz² without measured deflections.
        """
        z = np.asarray(depth, dtype=np.float64)
        i = _interval(self.knots, z)
        u = z - self.knots[i]
        offset = self.lines[:, i] + (self.slopes[:, i] + 0.5 * self.rates[:, i] * u) * u
        return offset[0], offset[1]

    def slope_rate(self, depth: npt.ArrayLike) -> tuple[Array, Array]:
        """Curvature of the felt vertical (north, east) [rad/m], in the shape of `depth` [m]."""
        rate = self.rates[:, _interval(self.knots, np.asarray(depth, dtype=np.float64))]
        return rate[0], rate[1]

    def acceleration(
        self, north: npt.ArrayLike, east: npt.ArrayLike, down: npt.ArrayLike
    ) -> tuple[Array, Array, Array]:
        """Gravity near the straight vertical, linear in the horizontal offset.

        Parameters
        ----------
        north, east : array_like
            Offset from the straight vertical [m].
        down : array_like
            Depth along it [m].

        Returns
        -------
        tuple of array
            (north, east, down) [m/s²], broadcast; attraction and centrifugal, without Coriolis.

        Notes
        -----
        g_N = g(z) slope_N(z) - (g/M) N, g_E = g(z) slope_E(z) - (g/N') E,
        g_z = g(z) + g (slope_N' N + slope_E' E), with slope' = κ where nothing was measured: the symmetric
        tensor of second derivatives of the potential (∂g_N/∂z = ∂g_z/∂N = κ g).

        References
        ----------
        Heiskanen, W. A. & Moritz, H. (1967), Physical Geodesy, chapter 2 (curvatures of level surfaces).
        """
        vertical = self.gravity_at(down)
        lean_north, lean_east = self.slope(down)
        turn_north, turn_east = self.slope_rate(down)
        x, y = np.asarray(north, dtype=np.float64), np.asarray(east, dtype=np.float64)
        return (
            vertical * lean_north - (self.gravity / self.meridian_radius) * x,
            vertical * lean_east - (self.gravity / self.prime_vertical_radius) * y,
            vertical + self.gravity * (turn_north * x + turn_east * y),
        )


def _interval(starts: Array, depth: Array) -> npt.NDArray[np.intp]:
    """Index of the interval that holds each depth; what lies above the first belongs to the first."""
    return np.maximum(np.searchsorted(starts, depth, side="right") - 1, 0)


def local_field(site: Site, *, ellipsoid: Ellipsoid = WGS84) -> LocalField:
    """Field of gravity around the collar of a site.

    Parameters
    ----------
    site : settings.Site
        Its gravity, where measured, replaces normal gravity; its deflections replace the normal curvature.
    ellipsoid : Ellipsoid

    Returns
    -------
    LocalField

    Raises
    ------
    ParameterError
        If a layer or a deflection is unusable: see `assemble_field`.
    """
    phi = site.latitude
    curvature = float(plumbline_curvature(phi, ellipsoid, site.elevation))
    normal = float(normal_gravity(phi, site.elevation, ellipsoid))
    return assemble_field(
        latitude=phi,
        gravity=normal if site.gravity is None else site.gravity,
        plumb_latitude=phi + curvature * site.elevation,
        curvature=curvature,
        meridian_radius=float(meridian_radius(phi, ellipsoid)) + site.elevation,
        prime_vertical_radius=float(prime_vertical_radius(phi, ellipsoid)) + site.elevation,
        rock_density=site.rock_density,
        deflections=site.deflections,
    )


def assemble_field(
    *,
    latitude: float,
    gravity: float,
    curvature: float,
    meridian_radius: float,
    prime_vertical_radius: float,
    rock_density: Layers = ((0.0, 2670.0),),
    deflections: Deflections = (),
    plumb_latitude: float | None = None,
) -> LocalField:
    """Field of gravity from its parts, for an Earth that need not be an ellipsoid.

    Parameters
    ----------
    latitude : float
        [rad].
    gravity : float
        At the collar [m/s²].
    curvature : float
        κ [rad/m], north positive.
    meridian_radius, prime_vertical_radius : float
        Radii of the level surface [m].
    rock_density : sequence of (float, float)
        (from depth [m], density [kg/m³]), rising; open air above the first.
    deflections : sequence of (float, float, float)
        (depth [m], north [rad], east [rad]) of the lower vertical against that at the collar, rising.
    plumb_latitude : float, optional
        [rad]; by default `latitude`.

    Returns
    -------
    LocalField

    Raises
    ------
    ParameterError
        If a density is negative or not finite, a deflection above the collar, or one at it that is not zero.
    """
    mean_radius = 2.0 / (1.0 / meridian_radius + 1.0 / prime_vertical_radius)
    tops, terms = _layers(gravity, mean_radius, rock_density)
    knots, slopes, rates = _bends(curvature, deflections)
    steps = np.diff(knots)
    pieces = (slopes[:, :-1] + 0.5 * rates[:, :-1] * steps) * steps
    lines = np.concatenate([np.zeros((2, 1)), np.cumsum(pieces, axis=1)], axis=1)
    for array in (tops, terms, knots, slopes, rates, lines):
        array.setflags(write=False)
    return LocalField(
        latitude=latitude,
        plumb_latitude=latitude if plumb_latitude is None else plumb_latitude,
        gravity=gravity,
        curvature=curvature,
        meridian_radius=meridian_radius,
        prime_vertical_radius=prime_vertical_radius,
        measured_to=float(knots[-1]),
        layer_tops=tops,
        layer_terms=terms,
        knots=knots,
        slopes=slopes,
        rates=rates,
        lines=lines,
    )


def _layers(gravity: float, mean_radius: float, rock_density: Layers) -> tuple[Array, Array]:
    """Tops and the two terms of g = a/r² + b r of every layer, continuous across them."""
    for _, one in rock_density:
        if not (one >= 0.0 and isfinite(one)):
            raise ParameterError("rock_density", one, "kg/m³", "0 or more, finite")
    tops = np.array([-np.inf, *(top for top, _ in rock_density)])
    density = np.array([0.0, *(one for _, one in rock_density)])
    linear = (4.0 * np.pi * GRAVITATIONAL_CONSTANT * density - 2.0 * EARTH_ROTATION**2) / 3.0
    # From one layer to the next a changes by -Δb r³ at their border; the level is set by g at the collar.
    borders = (mean_radius - tops[1:]) ** 3
    inverse = np.concatenate([[0.0], -np.cumsum(np.diff(linear) * borders)])
    at_collar = int(_interval(tops, np.zeros(())))
    level = (gravity - linear[at_collar] * mean_radius) * mean_radius**2
    return tops, np.stack([inverse + (level - inverse[at_collar]), linear])


def _bends(curvature: float, deflections: Deflections) -> tuple[Array, Array, Array]:
    """Knots, slopes there and rates below them: normal curvature, or the measured deflections."""
    rows = np.array([(0.0, 0.0, 0.0), *deflections], dtype=np.float64)
    if len(rows) > 1 and rows[1, 0] == 0.0:
        if np.any(rows[1, 1:] != 0.0):
            raise ParameterError(
                "deflections", deflections[0], "m, rad, rad", "zero at the collar: they refer to it"
            )
        rows = rows[1:]
    if not np.all(np.isfinite(rows)) or np.any(np.diff(rows[:, 0]) <= 0.0):
        raise ParameterError(
            "deflections", deflections, "m, rad, rad", "finite rows, rising from the collar down"
        )
    knots, slopes = rows[:, 0].copy(), rows[:, 1:].T.copy()
    rates = np.empty_like(slopes)
    rates[:, :-1] = np.diff(slopes, axis=1) / np.diff(knots)
    rates[:, -1] = (curvature, 0.0)
    return knots, slopes, rates
