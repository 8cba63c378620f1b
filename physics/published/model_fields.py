"""Fields that textbooks and published models assume, for the checks and tests: constant, turning point mass, PREM."""

from math import pi

import numpy as np

from eastfall.physics.earth import EARTH_ROTATION, GRAVITATIONAL_CONSTANT, Shell
from eastfall.physics.field import LocalField, assemble_field

EARTH_RADIUS = 6371e3
"""Of PREM and of the point-mass checks [m]."""

# Dziewonski, A. M. & Anderson, D. L. (1981), Preliminary reference Earth model, Phys. Earth Planet. Inter. 25, table I:
# inner and outer radius [km], density in powers of r/6371 km [g/cm³]; from memory, unconfirmed.
_PREM = (
    (0.0, 1221.5, (13.0885, 0.0, -8.8381)),
    (1221.5, 3480.0, (12.5815, -1.2638, -3.6426, -5.5281)),
    (3480.0, 5701.0, (7.9565, -6.4761, 5.5283, -3.0807)),
    (5701.0, 5771.0, (5.3197, -1.4836)),
    (5771.0, 5971.0, (11.2494, -8.0298)),
    (5971.0, 6151.0, (7.1089, -3.8045)),
    (6151.0, 6346.6, (2.6910, 0.6924)),
    (6346.6, 6356.0, (2.900,)),
    (6356.0, 6368.0, (2.600,)),
    (6368.0, 6371.0, (1.020,)),
)
# With today's G the surface value comes out 0.06 % high; with this one the printed gravity follows to 1e-4 m/s². From
# memory, unconfirmed.
PREM_CONSTANT = 6.670e-11
"""G that goes with PREM's printed gravity [m³/(kg s²)]."""


def prem_shells() -> tuple[Shell, ...]:
    """Shells of the Preliminary Reference Earth Model.

    Returns
    -------
    tuple of Shell

    References
    ----------
    Dziewonski, A. M. & Anderson, D. L. (1981), Phys. Earth Planet. Inter. 25, 297-356, table I.
    """
    return tuple(
        Shell(
            inner=1e3 * inner,
            outer=1e3 * outer,
            coefficients=tuple(1e3 * one for one in coefficients),
            scale=EARTH_RADIUS,
        )
        for inner, outer, coefficients in _PREM
    )


def constant_field(latitude: float, gravity: float) -> LocalField:
    """Field of constant gravity without any gradient, as textbooks take it.

    Parameters
    ----------
    latitude : float
        [rad]
    gravity : float
        [m/s²]

    Returns
    -------
    LocalField
        On a level surface too large to curve; a thin medium cancels the 2ω² of Bruns's gradient.
    """
    level = 1e15
    medium = 2.0 * EARTH_ROTATION**2 / (4.0 * pi * GRAVITATIONAL_CONSTANT)
    return assemble_field(
        latitude=latitude,
        gravity=gravity,
        curvature=0.0,
        meridian_radius=level,
        prime_vertical_radius=level,
        rock_density=((-1e4, medium),),
    )


def turning_sphere(latitude: float, radius: float, gm: float) -> LocalField:
    """Field outside a turning point mass, by its own second derivatives.

    Parameters
    ----------
    latitude : float
        Of the plumb line against the equator's plane [rad].
    radius : float
        Distance from the centre [m].
    gm : float
        GM [m³/s²].

    Returns
    -------
    LocalField
        Attraction GM/r² and centrifugal, to first order in ω²r³/GM.
    """
    s, c = np.sin(latitude), np.cos(latitude)
    pull, turn = gm / radius**2, EARTH_ROTATION**2
    gravity = pull - turn * radius * c * c
    # Across the plumb line: attraction -GM/r³ both ways, centrifugal ω² sin²φ toward north and ω² toward east.
    return assemble_field(
        latitude=latitude,
        gravity=float(gravity),
        curvature=float(4.0 * turn * s * c / gravity),
        meridian_radius=float(gravity / (pull / radius - turn * s * s)),
        prime_vertical_radius=float(gravity / (pull / radius - turn)),
        rock_density=((0.0, 0.0),),
    )
