"""What the drop planner works out: path, wall contact, spread at a level, best release; words for it; draws nothing."""

from dataclasses import dataclass

import numpy as np

from eastfall.physics.errors import ParameterError
from eastfall.physics.fall import Trajectory
from eastfall.physics.models import Models, graded
from eastfall.physics.settings import Assumptions, Body
from eastfall.physics.spread import landing_spread, monte_carlo
from eastfall.physics.wall import BestRelease, best_release, gap, wall_contact
from eastfall.tui import words
from eastfall.tui.raster import Floats
from eastfall.tui.units import METRIC, Units

DROPS = 400
"""Simulated drops of the cloud."""
_SEED = 20
"""The same draws for every plan: the cloud moves with the inputs and does not flicker."""
_DEPTHS = 33
"""Depths at which simulated bodies are compared with the wall, closer toward the collar."""


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class Plan:
    """A drop before it is made; offsets from the straight vertical [m].

    Parameters
    ----------
    assumptions : Assumptions
        What it rests on.
    level : float
        Depth of the landing [m].
    release, landing : tuple of float
        East and north where the body leaves, and where an undisturbed one arrives.
    time, speed : float
        Of its arrival [s], [m/s].
    path : tuple of ndarray
        East and north on the way down, to draw.
    covariance : ndarray, shape (2, 2)
        Of the landing about its mean [m²], from the errors of the release.
    cloud : tuple of ndarray, shape (DROPS,)
        East and north of simulated landings.
    touching : int or None
        How many of them meet the wall on the way; None without a shaft diameter.
    contact : float or None
        Depth at which the undisturbed body meets the wall [m].
    best : BestRelease or None
        Where a release keeps farthest from the wall.
    clearance : float or None
        Least gap to the wall of the undisturbed body, down to the level [m].
    warnings : tuple of str
        Where the answer is outside the model.
    """

    assumptions: Assumptions
    level: float
    release: tuple[float, float]
    landing: tuple[float, float]
    time: float
    speed: float
    path: tuple[Floats, Floats]
    covariance: Floats
    cloud: tuple[Floats, Floats]
    touching: int | None
    contact: float | None
    best: BestRelease | None
    clearance: float | None
    warnings: tuple[str, ...]


def plan(assumptions: Assumptions, level: float) -> Plan:
    """Work out a drop.

    Parameters
    ----------
    assumptions : Assumptions
        With a body; the kind of run does not matter.
    level : float
        Depth of the landing [m], no deeper than the shaft.

    Raises
    ------
    ParameterError
        Without a body, or from the models.
    """
    body, shaft = assumptions.body, assumptions.shaft
    if body is None:
        raise ParameterError("body", None, "", "its mass and diameter, to know how a release error grows")
    models = Models.of(assumptions)
    path = models.body(shaft.depth)
    arrival = path.at(level)
    depths = graded(level, _DEPTHS)[1:]
    landings = monte_carlo(
        models.field,
        depths=depths,
        body=body,
        air=models.air,
        generator=np.random.default_rng(_SEED),
        drops=DROPS,
    )
    spread = landing_spread(models.field, depths=[level], body=body, air=models.air)
    way = path.at(graded(level, 4 * _DEPTHS))
    gaps = _gaps(assumptions, body, way.east, way.north)
    among = _gaps(assumptions, body, landings.east, landings.north)
    return Plan(
        assumptions=assumptions,
        level=level,
        release=(body.release_east, body.release_north),
        landing=(float(arrival.east), float(arrival.north)),
        time=float(arrival.time),
        speed=float(arrival.speed),
        path=(way.east, way.north),
        covariance=spread.covariance[-1],
        cloud=(landings.east[:, -1], landings.north[:, -1]),
        touching=None if among is None else int(np.count_nonzero((among <= 0.0).any(axis=1))),
        contact=_contact(path, assumptions, body),
        best=None if shaft.diameter is None else best_release(path, shaft, body.diameter),
        clearance=None if gaps is None else float(gaps.min()),
        warnings=path.warnings,
    )


def _gaps(assumptions: Assumptions, body: Body, east: Floats, north: Floats) -> Floats | None:
    """Return the gaps between body and wall where its centre is at offsets [m]; None without a diameter."""
    if assumptions.shaft.diameter is None:
        return None
    return gap(assumptions.shaft, east, north, body.diameter)


def _contact(path: Trajectory, assumptions: Assumptions, body: Body) -> float | None:
    return wall_contact(path, assumptions.shaft, body.diameter)


def landing(one: Plan, units: Units = METRIC) -> str:
    """Return where the body lands, from the release, and with what spread, as one line."""
    east, north = (there - here for there, here in zip(one.landing, one.release, strict=True))
    u_east, u_north = np.sqrt(np.diag(one.covariance))
    return (
        f"LANDS at {units.depth(one.level)} {units.long}: {words.pair(east, north, units=units)} from release, "
        f"spread E {units.offset(float(u_east))} N {units.offset(float(u_north))} {units.short}"
    )


def wall(one: Plan, units: Units = METRIC) -> tuple[str, bool]:
    """Return what the wall does to the drop as one line, and whether it is in the way."""
    fall = f"Falls {one.time:.1f} s."
    if one.touching is None:
        return f"No shaft diameter given: nothing is known of the wall. {fall}", False
    share = f"{one.touching} of {DROPS} simulated drops touch it"
    if one.contact == 0.0:
        return "THE RELEASE POINT itself touches the wall or lies beyond it.", True
    if one.contact is not None and one.contact <= one.level:
        return f"MEETS THE WALL at {units.depth(one.contact)} {units.long}; {share}.", True
    gap = "–" if one.clearance is None else units.depth(one.clearance, 2)
    return f"Clear of the wall by {gap} {units.long}; {share}. {fall}", one.touching > 0


def best(one: Plan, units: Units = METRIC) -> str:
    """Return the best release point as one line."""
    if one.best is None:
        return "Best release: give the shaft's diameter."
    found = one.best
    room = (
        f"{units.depth(found.clearance, 2)} {units.long} clear all the way"
        if found.clearance > 0.0
        else "but no release keeps clear of the wall"
    )
    return f"Best release point: {words.pair(found.east, found.north, units=units)}, {room}."
