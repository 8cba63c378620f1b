"""Which way and how far to bring a residual to nothing; how a crew is told is the screen's business."""

from dataclasses import dataclass
from math import atan2, hypot, inf, nan, pi

from eastfall.physics.budget import COVERAGE_FACTOR
from eastfall.physics.verdict import horizontal


@dataclass(frozen=True, slots=True, kw_only=True)
class Steer:
    """A move.

    Parameters
    ----------
    distance, u_distance : float
        How far, and its standard uncertainty [m].
    azimuth, u_azimuth : float
        Which way, clockwise from true north, 0 to 2π, and its standard uncertainty [rad]; NaN where there is nowhere
        to go, infinite uncertainty where the residual is smaller than its own.
    worth : bool
        Whether the residual is larger than its expanded uncertainty; a smaller one is best left alone.
    """

    distance: float
    u_distance: float
    azimuth: float
    u_azimuth: float
    worth: bool


def steer(east: float, north: float, u_east: float, u_north: float) -> Steer:
    """Give the move that brings a residual to nothing.

    Parameters
    ----------
    east, north : float
        Residual [m].
    u_east, u_north : float
        Standard uncertainties [m], taken as uncorrelated.

    Returns
    -------
    Steer
        Opposite to the residual. u of the direction by the law of propagation (GUM, eq. 10):
        √((n u_e)² + (e u_n)²)/r².
    """
    length, u = (float(one) for one in horizontal(east, north, u_east, u_north))
    u_azimuth = hypot(north * u_east, east * u_north) / length**2 if length > max(u_east, u_north) else inf
    return Steer(
        distance=length,
        u_distance=u,
        azimuth=atan2(-east, -north) % (2.0 * pi) if length else nan,
        u_azimuth=u_azimuth,
        worth=length > COVERAGE_FACTOR * u,
    )
