"""Where in a round, straight, plumb shaft a probe, a bob or a body is, and how far it keeps from the wall."""

from dataclasses import dataclass
from itertools import combinations
from math import nan

import numpy as np
import numpy.typing as npt

from eastfall.physics.earth import Array
from eastfall.physics.errors import ParameterError
from eastfall.physics.fall import Trajectory
from eastfall.physics.settings import Kind, Shaft

_GRID = 1025
_ROUNDING = 1e-12


def place(kind: Kind, measured: Array, expected: Array) -> Array:
    """Where the thing is, from the run's reference line [m].

    Parameters
    ----------
    kind : {"guided", "hung", "drop"}
        Of the run.
    measured, expected : array
        Offsets [m].

    Returns
    -------
    array
        What a sum of tilts shows holds what a plumb guide would show: a guide is where its residual is. A bob and a
        body are where they were measured.
    """
    return measured - expected if kind == "guided" else measured


def gap(shaft: Shaft, east: npt.ArrayLike, north: npt.ArrayLike, body_diameter: float = 0.0) -> Array:
    """Gap between a body and the wall.

    Parameters
    ----------
    shaft : settings.Shaft
        Its diameter, and its centre from the reference point.
    east, north : array_like
        Of the body's middle, from the reference line [m].
    body_diameter : float
        [m]; 0 is a point, as a probe and a bob are taken.

    Returns
    -------
    array
        [m], broadcast; less than 0 beyond the wall, NaN where the shaft's diameter is not known.

    Raises
    ------
    ParameterError
        If the body's diameter is negative.
    """
    away: Array = np.hypot(np.subtract(east, shaft.centre_east), np.subtract(north, shaft.centre_north))
    return _room(shaft, body_diameter) - away


def _room(shaft: Shaft, body_diameter: float) -> float:
    """Return how far the body's middle may be from the shaft's centre [m]; NaN without a diameter."""
    if not body_diameter >= 0.0:
        raise ParameterError("body_diameter", body_diameter, "m", "0 m or more")
    return nan if shaft.diameter is None else 0.5 * (shaft.diameter - body_diameter)


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

    def left(depth: Array) -> Array:
        there = trajectory.at(depth)
        return gap(shaft, there.east, there.north, body_diameter)

    top, bottom = float(trajectory.depth[0]), min(trajectory.max_depth, shaft.depth)
    depth = top + (bottom - top) * np.linspace(0.0, 1.0, _GRID) ** 2
    while True:
        touching = np.flatnonzero(left(depth) <= 0.0)
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
    if shaft.diameter is None:
        raise ParameterError("diameter", None, "m", "the diameter of the shaft")
    top, bottom = float(trajectory.depth[0]), min(trajectory.max_depth, shaft.depth)
    depth = top + (bottom - top) * np.linspace(0.0, 1.0, _GRID) ** 2
    there = trajectory.at(depth)
    path = np.stack([there.east - there.east[0], there.north - there.north[0]], axis=1)
    centre, radius = smallest_circle(path)
    distance = np.hypot(*(path - centre).T)
    return BestRelease(
        east=shaft.centre_east - float(centre[0]),
        north=shaft.centre_north - float(centre[1]),
        clearance=_room(shaft, body_diameter) - radius,
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
