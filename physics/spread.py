"""How release errors spread the landing, where a falling body meets the wall, and from where it would keep clear.

One fall and ensembles of falls come from `fall`; the uncertainty of the expected curve is reckoned elsewhere.
"""

from dataclasses import dataclass
from itertools import combinations

import numpy as np
import numpy.typing as npt

from eastfall.physics.air import AirColumn
from eastfall.physics.budget import covariance
from eastfall.physics.earth import Array
from eastfall.physics.ensemble import COARSE
from eastfall.physics.errors import ParameterError
from eastfall.physics.fall import Release, Trajectory, Variation, fall_ensemble
from eastfall.physics.field import LocalField
from eastfall.physics.settings import Body, Shaft

SAMPLING = 1e-7
"""To which Monte Carlo members are iterated [m]; far below the sampling error of any number of them."""

_GRID = 1025
_ROUNDING = 1e-12


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class LandingSpread:
    """Spread of repeated drops about the undisturbed fall, by depth.

    Parameters
    ----------
    depth : array, shape (depths,)
        [m]
    covariance : array, shape (depths, 2, 2)
        Of (east, north) [m²].
    """

    depth: Array
    covariance: Array

    @property
    def u_east(self) -> Array:
        """Standard deviation toward east [m], shape (depths,)."""
        return np.sqrt(self.covariance[:, 0, 0])

    @property
    def u_north(self) -> Array:
        """Standard deviation toward north [m], shape (depths,)."""
        return np.sqrt(self.covariance[:, 1, 1])


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class Landings:
    """Monte Carlo drops.

    Parameters
    ----------
    depth : array, shape (depths,)
        [m]
    east, north : array, shape (drops, depths)
        Offset from the straight vertical [m].
    """

    depth: Array
    east: Array
    north: Array

    def spread(self) -> LandingSpread:
        """Covariance of the drops about their mean."""
        apart = np.stack([self.east, self.north]) - np.stack([self.east, self.north]).mean(
            axis=1, keepdims=True
        )
        covariance = np.einsum("imd,jmd->dij", apart, apart) / (len(self.east) - 1)
        return LandingSpread(depth=self.depth, covariance=covariance)


@dataclass(frozen=True, slots=True, kw_only=True)
class BestRelease:
    """The release that keeps a falling body farthest from the wall.

    Parameters
    ----------
    east, north : float
        Of the release, from the reference point [m].
    clearance : float
        Least gap between body and wall on the way [m]; negative if no release keeps clear.
    depth : float
        Where the gap is least [m]; the shallowest such place.
    """

    east: float
    north: float
    clearance: float
    depth: float


def landing_spread(
    field: LocalField,
    *,
    depths: npt.ArrayLike,
    body: Body,
    air: AirColumn | None = None,
    release: Release | None = None,
    u_spin: float = 0.0,
) -> LandingSpread:
    """Linear propagation of release errors along the path.

    Parameters
    ----------
    field : LocalField
    depths : array_like, shape (depths,)
        Rising [m].
    body : settings.Body
        Its `u_release` and `u_release_speed` hold for each horizontal component, independently.
    air : AirColumn, optional
    release : Release, optional
    u_spin : float
        Standard uncertainty of each component of the spin [rad/s].

    Returns
    -------
    LandingSpread

    Notes
    -----
    Σ c cᵀ over the errors, c half the difference between falls with the error at plus and minus one standard
    uncertainty.

    References
    ----------
    JCGM 100:2008 (GUM), section 5.1, eq. 10; JCGM 102:2011 (more than one output).
    """
    errors = (
        ("east", body.u_release),
        ("north", body.u_release),
        ("speed_east", body.u_release_speed),
        ("speed_north", body.u_release_speed),
        ("spin_east", u_spin),
        ("spin_north", u_spin),
        ("spin_down", u_spin),
    )
    active = [one for one in errors if one[1] > 0.0]
    changes = {
        name: np.array([u if name == other else 0.0 for other, _ in active] * 2)
        * np.repeat([1.0, -1.0], len(active))
        for name, u in active
    }
    falls = fall_ensemble(
        field, depths=depths, variation=Variation(**changes), body=body, air=air, release=release
    )
    if not active:
        return LandingSpread(depth=falls.depth, covariance=np.zeros((len(falls.depth), 2, 2)))
    plus, minus = np.split(np.stack([falls.east, falls.north], axis=1), 2)
    parts = 0.5 * (plus - minus)
    return LandingSpread(depth=falls.depth, covariance=covariance(parts))


def monte_carlo(
    field: LocalField,
    *,
    depths: npt.ArrayLike,
    body: Body,
    generator: np.random.Generator,
    air: AirColumn | None = None,
    release: Release | None = None,
    drops: int = 100_000,
    u_spin: float = 0.0,
) -> Landings:
    """Simulate drops with normal release errors through the full equation of motion.

    Parameters
    ----------
    field : LocalField
    depths : array_like, shape (depths,)
        Rising [m].
    body : settings.Body
        Its `u_release` and `u_release_speed` hold for each horizontal component, independently.
    generator : numpy.random.Generator
        The source of all randomness.
    air : AirColumn, optional
    release : Release, optional
    drops : int
        At least 2.
    u_spin : float
        Standard uncertainty of each component of the spin [rad/s].

    Returns
    -------
    Landings

    Raises
    ------
    ParameterError
        If fewer than two drops are asked for.

    References
    ----------
    JCGM 101:2008 (GUM Supplement 1), section 7.
    """
    if drops < 2:
        raise ParameterError("drops", drops, "", "2 or more")
    draws = generator.standard_normal((7, drops))
    spin = u_spin * draws[4:] if u_spin > 0.0 else np.zeros(3)
    variation = Variation(
        east=body.u_release * draws[0],
        north=body.u_release * draws[1],
        speed_east=body.u_release_speed * draws[2],
        speed_north=body.u_release_speed * draws[3],
        spin_east=spin[0],
        spin_north=spin[1],
        spin_down=spin[2],
    )
    falls = fall_ensemble(
        field,
        depths=depths,
        variation=variation,
        body=body,
        air=air,
        release=release,
        tolerance=SAMPLING,
        rule=COARSE,
    )
    return Landings(depth=falls.depth, east=falls.east, north=falls.north)


def _check_round(shaft: Shaft, body_diameter: float) -> float:
    """Radius in which the centre of the body may be [m]."""
    if not body_diameter >= 0.0:
        raise ParameterError("body_diameter", body_diameter, "m", "0 m or more")
    if shaft.diameter is None:
        raise ParameterError("diameter", None, "m", "the diameter of the shaft")
    return 0.5 * (shaft.diameter - body_diameter)


def wall_contact(trajectory: Trajectory, shaft: Shaft, body_diameter: float = 0.0) -> float | None:
    """Depth where a falling body first touches the wall of a round, straight, plumb shaft.

    Parameters
    ----------
    trajectory : Trajectory
    shaft : settings.Shaft
        Its diameter, and its centre from the reference point.
    body_diameter : float
        [m]; 0 is a point.

    Returns
    -------
    float or None
        Depth [m] at which the body's surface meets the wall; the release depth if it does so from the start; None
        if it stays clear to the shaft's depth or the trajectory's, or the shaft's diameter is not known.

    Raises
    ------
    ParameterError
        If the body's diameter is negative.
    """
    if shaft.diameter is None:
        return None
    room = _check_round(shaft, body_diameter)

    def gap(depth: Array) -> Array:
        there = trajectory.at(depth)
        return room - np.hypot(there.east - shaft.centre_east, there.north - shaft.centre_north)

    top, bottom = float(trajectory.depth[0]), min(trajectory.max_depth, shaft.depth)
    depth = top + (bottom - top) * np.linspace(0.0, 1.0, _GRID) ** 2
    while True:
        touching = np.flatnonzero(gap(depth) <= 0.0)
        if touching.size == 0:
            return None
        first = int(touching[0])
        if first == 0 or depth[first] - depth[first - 1] < 1e-9 * max(bottom, 1.0):
            return float(depth[first])
        depth = np.linspace(depth[first - 1], depth[first], 65)


def best_release(trajectory: Trajectory, shaft: Shaft, body_diameter: float = 0.0) -> BestRelease:
    """Release point from which a body keeps farthest from the wall of a round, straight, plumb shaft.

    Parameters
    ----------
    trajectory : Trajectory
        From any release; its path is shifted as a whole. Verticals converge, so that a path shifted by one metre is
        off by the convergence, less than 0.2 mm after 1 km.
    shaft : settings.Shaft
        Its diameter must be known.
    body_diameter : float
        [m]; 0 is a point.

    Returns
    -------
    BestRelease

    Raises
    ------
    ParameterError
        If the shaft's diameter is not known, or the body's is negative.

    Notes
    -----
    The centre of the smallest circle that holds the whole path, seen from above, is laid on the shaft's centre.
    """
    room = _check_round(shaft, body_diameter)
    top, bottom = float(trajectory.depth[0]), min(trajectory.max_depth, shaft.depth)
    depth = top + (bottom - top) * np.linspace(0.0, 1.0, _GRID) ** 2
    there = trajectory.at(depth)
    path = np.stack([there.east - there.east[0], there.north - there.north[0]], axis=1)
    centre, radius = smallest_circle(path)
    distance = np.hypot(*(path - centre).T)
    return BestRelease(
        east=shaft.centre_east - float(centre[0]),
        north=shaft.centre_north - float(centre[1]),
        clearance=room - radius,
        depth=float(depth[int(np.argmax(distance >= radius - 1e-9))]),
    )


def smallest_circle(points: Array) -> tuple[Array, float]:
    """Smallest circle that holds all points of a plane.

    Parameters
    ----------
    points : array, shape (n, 2)
        At least one.

    Returns
    -------
    tuple
        Centre, shape (2,), and radius, in the unit of the points.

    Notes
    -----
    The circle rests on two or three of the points. Starting from two, the farthest point outside joins and the
    smallest circle around the four or fewer is sought among all pairs and triples; the radius grows every time.
    """
    far = int(np.argmax(np.hypot(*(points - points[0]).T)))
    held = points[[0, far]]
    centre, radius = _around(held)
    while True:
        distance = np.hypot(*(points - centre).T)
        out = int(np.argmax(distance))
        if distance[out] <= radius * (1.0 + _ROUNDING) + _ROUNDING:
            return centre, float(distance[out])
        held = np.vstack([held, points[out]])
        few = (held[list(chosen)] for size in (2, 3) for chosen in combinations(range(len(held)), size))
        circles = [(*_around(some), some) for some in few]
        holding = [
            one for one in circles if np.all(np.hypot(*(held - one[0]).T) <= one[1] * (1.0 + 1e-10) + 1e-15)
        ]
        centre, radius, held = min(holding, key=lambda one: one[1])


def _around(points: Array) -> tuple[Array, float]:
    """Circle with two points as diameter, or through three; three in a line give one that holds nothing."""
    first, *others = points
    if len(others) == 1:
        centre = 0.5 * (first + others[0])
        return centre, float(np.hypot(*(first - centre)))
    b, c = others[0] - first, others[1] - first
    twice_area = 2.0 * (b[0] * c[1] - b[1] * c[0])
    if twice_area == 0.0:
        return first, 0.0
    b2, c2 = float(b @ b), float(c @ c)
    offset = np.array([c[1] * b2 - b[1] * c2, b[0] * c2 - c[0] * b2]) / twice_area
    return first + offset, float(np.hypot(*offset))
