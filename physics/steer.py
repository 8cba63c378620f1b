"""Which way and how far to bring a residual to nothing; how a crew is told is the screen's business."""

from dataclasses import dataclass
from math import atan2, inf, nan, pi, sqrt

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


def steer(east: float, north: float, u_east: float, u_north: float, covariance: float = 0.0) -> Steer:
    """Give the move that brings a residual to nothing.

    Parameters
    ----------
    east, north : float
        Residual [m].
    u_east, u_north : float
        Standard uncertainties [m].
    covariance : float
        Of the two [m²].

    Returns
    -------
    Steer
        Opposite to the residual. u of the direction by the law of propagation (GUM, eq. 13):
        √(n² u_e² + e² u_n² - 2 e n u_en)/r²; infinite where r is not larger than the uncertainty.
    """
    length, u = (float(one) for one in horizontal(east, north, u_east, u_north, covariance))
    across = (north * u_east) ** 2 + (east * u_north) ** 2 - 2.0 * east * north * covariance
    worst = float(horizontal(0.0, 0.0, u_east, u_north, covariance)[1])
    u_azimuth = sqrt(max(across, 0.0)) / length**2 if length > worst else inf
    return Steer(
        distance=length,
        u_distance=u,
        azimuth=atan2(-east, -north) % (2.0 * pi) if length else nan,
        u_azimuth=u_azimuth,
        worth=length > COVERAGE_FACTOR * u,
    )
