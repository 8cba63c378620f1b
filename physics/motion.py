"""The equation of motion of a body falling through air on the turning Earth, for one body or many at once.

It states the forces; `descent` integrates them down the shaft, `throw` for a body thrown up or aside, `ensemble` for
many bodies at once.
"""

from dataclasses import dataclass, fields
from math import pi
from typing import NamedTuple

import numpy as np

from eastfall.physics.air import AirColumn
from eastfall.physics.drag import scaled_morrison_rows
from eastfall.physics.earth import EARTH_ROTATION, Array
from eastfall.physics.errors import ParameterError
from eastfall.physics.field import LocalField
from eastfall.physics.settings import Body


@dataclass(frozen=True, slots=True, kw_only=True)
class Release:
    """How a body leaves the hand, in the frame of the collar.

    Parameters
    ----------
    east, north : float
        Offset from the straight vertical [m].
    depth : float
        Of the release below the collar [m].
    speed_east, speed_north, speed_down : float
        Velocity against the shaft [m/s]; a negative `speed_down` is a throw upwards.
    spin_east, spin_north, spin_down : float
        Angular velocity [rad/s], taken as kept all the way.
    """

    east: float = 0.0
    north: float = 0.0
    depth: float = 0.0
    speed_east: float = 0.0
    speed_north: float = 0.0
    speed_down: float = 0.0
    spin_east: float = 0.0
    spin_north: float = 0.0
    spin_down: float = 0.0


Value = float | Array


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class Variation:
    """Changes of what a fall depends on, each a number or one value per member of an ensemble.

    The defaults change nothing. Factors multiply, shifts add.

    Parameters
    ----------
    gravity_factor : array_like
        Of gravity everywhere [1].
    gravity_gradient : array_like
        Shift of dg/dz [1/s²], as from another density of the rock (-4πG Δρ).
    latitude : array_like
        Shift [rad]; it turns the Coriolis acceleration only, its share in gravity and curvature is their own shift.
    curvature_north, curvature_east : array_like
        Shift of the bending of the vertical [rad/m].
    drag_factor, air_density_factor, cross_flow_factor : array_like
        Of the drag coefficient, the density of the air (drag and buoyancy), every cross-flow [1].
    air_vertical : array_like
        Shift of the air's own speed [m/s], down positive.
    east, north : array_like
        Shift of the release [m].
    speed_east, speed_north, speed_down : array_like
        Shift of the release velocity [m/s].
    spin_east, spin_north, spin_down : array_like
        Shift of the spin [rad/s].
    """

    gravity_factor: Value = 1.0
    gravity_gradient: Value = 0.0
    latitude: Value = 0.0
    curvature_north: Value = 0.0
    curvature_east: Value = 0.0
    drag_factor: Value = 1.0
    air_density_factor: Value = 1.0
    cross_flow_factor: Value = 1.0
    air_vertical: Value = 0.0
    east: Value = 0.0
    north: Value = 0.0
    speed_east: Value = 0.0
    speed_north: Value = 0.0
    speed_down: Value = 0.0
    spin_east: Value = 0.0
    spin_north: Value = 0.0
    spin_down: Value = 0.0

    @property
    def members(self) -> int:
        """How many bodies fall: the common length of what is not a single number."""
        shape = np.broadcast_shapes(*(np.shape(getattr(self, one.name)) for one in fields(self)))
        if len(shape) > 1:
            raise ParameterError("variation", shape, "", "numbers or arrays of one dimension")
        return int(shape[0]) if shape else 1

    @property
    def only_release(self) -> bool:
        """Whether the members differ in their release alone, spin not included, and feel the nominal forces."""
        forced = (one.name for one in fields(self) if one.name not in _OF_RELEASE)
        return all(np.array_equal(getattr(self, name), getattr(UNCHANGED, name)) for name in forced)

    def part(self, chosen: slice) -> "Variation":
        """Take the members of a slice; single numbers stay."""
        rows = {one.name: np.asarray(getattr(self, one.name), dtype=np.float64) for one in fields(self)}
        return Variation(**{name: row[chosen] if row.size > 1 else row for name, row in rows.items()})


UNCHANGED = Variation()
_OF_RELEASE = ("east", "north", "speed_east", "speed_north", "speed_down")


class Surroundings(NamedTuple):
    """What the forces need to know about the depths of the bodies; each broadcasts to (nodes, members).

    Gravity, its restoring and its turning part are net of buoyancy. No wind is None, which saves its subtraction.
    """

    gravity_north: Array
    gravity_east: Array
    gravity_down: Array
    restore_north: Array
    restore_east: Array
    """Horizontal gravity lost per metre of offset [1/s²]."""
    turn_north: Array
    turn_east: Array | None
    """Vertical gravity gained per metre of offset [1/s²]."""
    weight: Array
    """Share of gravity left by buoyancy."""
    density: Array
    viscosity: Array
    air_east: Array | None = None
    air_north: Array | None = None
    air_down: Array | None = None


class Acceleration(NamedTuple):
    """Acceleration [m/s²] and the rate [1/s] by which drag acts on the velocity against the air."""

    east: Array
    north: Array
    down: Array
    drag_rate: Array | float


class Forces:
    """Gravity, Coriolis, drag, buoyancy and the lift of a spinning sphere on one body or an ensemble.

    Parameters
    ----------
    field : LocalField
    body : settings.Body or None
        None is a point mass that air does not touch.
    air : AirColumn or None
        None is vacuum.
    release : Release
        Only its spin is used here.
    variation : Variation

    Notes
    -----
    r̈ = g(r)(1 - ρ/ρ_b) - 2 ω×ṙ - (ρ Cd A/2m)|u| u + (π a³ ρ/m) Ω×u, u = ṙ - air, in north, east, down, with
    ω = ω(cos φ, 0, -sin φ). Buoyancy takes the volume of a sphere of the body's diameter. The mass of air that an
    accelerating body carries along (half its volume for a sphere) is left out: for steel 8e-5 of the acceleration,
    and only while the body still accelerates.

    References
    ----------
    Goldstein, H., Poole, C. & Safko, J. (2002), Classical Mechanics, 3rd ed., section 4.10 (Coriolis).
    Rubinow, S. I. & Keller, J. B. (1961), J. Fluid Mech. 11, 447-459 (lift of a spinning sphere at small Re; at large
    Re it is an estimate of the size only).
    """

    def __init__(
        self,
        field: LocalField,
        body: Body | None,
        air: AirColumn | None,
        release: Release,
        variation: Variation,
    ) -> None:
        self.field = field
        self.variation = variation
        self.air = None if body is None or air is None or air.is_vacuum else air
        self.body = body
        latitude = field.plumb_latitude + np.asarray(variation.latitude, dtype=np.float64)
        self.coriolis_sine = 2.0 * EARTH_ROTATION * np.sin(latitude)
        self.coriolis_cosine = 2.0 * EARTH_ROTATION * np.cos(latitude)
        self.spin = (
            release.spin_east + np.asarray(variation.spin_east, dtype=np.float64),
            release.spin_north + np.asarray(variation.spin_north, dtype=np.float64),
            release.spin_down + np.asarray(variation.spin_down, dtype=np.float64),
        )
        self.spins = any(bool(np.any(one != 0.0)) for one in self.spin)

    def surroundings(self, depth: Array) -> Surroundings:
        """Field and air at the depths of the bodies, shape (nodes, 1) or (nodes, members) [m]."""
        change, field = self.variation, self.field
        gravity = field.gravity_at(depth) * change.gravity_factor + change.gravity_gradient * depth
        lean_north, lean_east = field.slope(depth)
        turn_north, turn_east = field.slope_rate(depth)
        turn_east = turn_east + change.curvature_east
        density, weight = self._buoyancy(depth)
        sunk = Surroundings(
            gravity_north=gravity * weight * (lean_north + change.curvature_north * depth),
            gravity_east=gravity * weight * (lean_east + change.curvature_east * depth),
            gravity_down=gravity * weight,
            restore_north=weight * (field.gravity / field.meridian_radius),
            restore_east=weight * (field.gravity / field.prime_vertical_radius),
            turn_north=weight * field.gravity * (turn_north + change.curvature_north),
            turn_east=weight * field.gravity * turn_east if np.any(turn_east) else None,
            weight=weight,
            density=density,
            viscosity=np.ones(()) if self.air is None else self.air.viscosity(depth),
        )
        return sunk if self.air is None else self._with_wind(sunk, depth, self.air)

    def _buoyancy(self, depth: Array) -> tuple[Array, Array]:
        """Density of the air, and the share of gravity that it leaves."""
        if self.air is None or self.body is None:
            return np.zeros(()), np.ones(())
        density: Array = self.air.density(depth) * self.variation.air_density_factor
        return density, 1.0 - density / (self.body.mass / (pi * self.body.diameter**3 / 6.0))

    def _with_wind(self, sunk: Surroundings, depth: Array, air: AirColumn) -> Surroundings:
        change = self.variation
        if air.settings.cross_flow:
            east, north = air.cross_flow(depth)
            sunk = sunk._replace(
                air_east=east * change.cross_flow_factor, air_north=north * change.cross_flow_factor
            )
        down = air.vertical + np.asarray(change.air_vertical, dtype=np.float64)
        return sunk._replace(air_down=down) if np.any(down) else sunk

    def acceleration(
        self, around: Surroundings, east: Array, north: Array, *, v_east: Array, v_north: Array, v_down: Array
    ) -> Acceleration:
        """Acceleration of bodies at their offsets [m] and velocities [m/s], shape (nodes, members)."""
        sine, cosine = self.coriolis_sine, self.coriolis_cosine
        a_north = around.gravity_north - around.restore_north * north - sine * v_east
        a_east = around.gravity_east - around.restore_east * east + sine * v_north + cosine * v_down
        a_down = around.gravity_down + around.turn_north * north - cosine * v_east
        if around.turn_east is not None:
            a_down = a_down + around.turn_east * east
        if self.air is None or self.body is None:
            return Acceleration(a_east, a_north, a_down, 0.0)
        u_east, u_north = _against(v_east, around.air_east), _against(v_north, around.air_north)
        u_down = _against(v_down, around.air_down)
        speed = np.sqrt(u_east * u_east + u_north * u_north + u_down * u_down)
        rate = self.drag_rate(self.body, around, speed)
        a_east, a_north, a_down = a_east - rate * u_east, a_north - rate * u_north, a_down - rate * u_down
        if self.spins:
            lift = pi * (0.5 * self.body.diameter) ** 3 / self.body.mass * around.density
            s_east, s_north, s_down = self.spin
            a_east = a_east + lift * (s_down * u_north - s_north * u_down)
            a_north = a_north + lift * (s_east * u_down - s_down * u_east)
            a_down = a_down + lift * (s_north * u_east - s_east * u_north)
        return Acceleration(a_east, a_north, a_down, rate)

    def drag_rate(self, body: Body, around: Surroundings, speed: Array) -> Array:
        """ρ Cd A |u|/(2m) [1/s] at speeds |u| against the air [m/s]."""
        area = 0.25 * pi * body.diameter**2
        factor = (0.5 * area / body.mass) * self.variation.drag_factor
        if body.drag_coefficient == "sphere":
            reynolds = speed * (around.density * body.diameter / around.viscosity)
            scaled: Array = scaled_morrison_rows(reynolds) * (factor * around.viscosity / body.diameter)
            return scaled
        rate: Array = speed * (factor * body.drag_coefficient * around.density)
        return rate


def _against(velocity: Array, air: Array | None) -> Array:
    """Velocity against the air, which is still where it is None."""
    return velocity if air is None else velocity - air
