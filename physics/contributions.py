"""What each uncertain input of a site puts into the prediction: one at a time moved by its standard uncertainty.

The moved models are those of `models`; how parts are added is `budget`.
"""

from collections.abc import Iterator
from dataclasses import dataclass, fields, replace
from math import tau

import numpy as np
from numpy.typing import NDArray

from eastfall.physics.budget import Budget
from eastfall.physics.fall import Variation, fall_ensemble
from eastfall.physics.field import LocalField
from eastfall.physics.models import Models, reach, tabulated
from eastfall.physics.settings import Assumptions, Body

_COARSE = 65
"""Depths at which uncertainty is worked out; it bends far less than the curve."""


def expected_budget(models: Models) -> Budget:
    """Propagate the standard uncertainty of every input, one at a time, through the models.

    References
    ----------
    JCGM 100:2008 (GUM), 5.1.3, note 2: numerical partial derivatives.
    """
    depth = tabulated(models.assumptions, _COARSE)
    moved = list(shifts(models))
    others = [Models.of(one.assumptions) for one in moved]
    if models.assumptions.run.kind == "drop":
        lines = np.array([one.reference(depth) for one in others]) - models.reference(depth)
        parts = _fall_parts(models, others, moved, depth) - lines
    else:
        parts = np.array([one.stated(depth) for one in others]) - models.stated(depth)
    matter = np.flatnonzero(np.any(parts, axis=(1, 2)))
    return Budget(depth=depth, names=tuple(moved[one].name for one in matter), parts=parts[matter])


@dataclass(frozen=True, slots=True, kw_only=True)
class Shift:
    """One input moved by its standard uncertainty.

    Parameters
    ----------
    name : str
        The input.
    assumptions : Assumptions
        With that input moved.
    of_fall : dict
        The same for a falling body, as fields of `fall.Variation`; what the site itself does to it is added.
    """

    name: str
    assumptions: Assumptions
    of_fall: dict[str, float]


def shifts(models: Models) -> Iterator[Shift]:
    """Yield every input that has an uncertainty and matters for the kind of run, moved by it."""
    given = models.assumptions
    yield from _site_shifts(given, models.field)
    if given.run.kind != "guided" or given.run.reference == "hung-line":
        yield from _line_and_air_shifts(given)
    if given.run.kind == "drop" and given.body is not None:
        yield from _body_shifts(given, given.body)


def _site_shifts(given: Assumptions, field: LocalField) -> Iterator[Shift]:
    site = given.site
    rock = tuple(
        (top, density + site.u_rock_density if density else 0.0) for top, density in site.rock_density
    )
    moved = {
        "latitude": replace(site, latitude=_shifted(site.latitude, site.u_latitude)),
        "elevation": replace(site, elevation=site.elevation + site.u_elevation),
        "gravity": replace(site, gravity=field.gravity + site.u_gravity),
        "rock density": replace(site, rock_density=rock),
        "vertical bent north": replace(site, deflections=_bent(given, field, 1)),
        "vertical bent east": replace(site, deflections=_bent(given, field, 2)),
    }
    for name, one in moved.items():
        yield Shift(name=name, assumptions=replace(given, site=one), of_fall={})


def _line_and_air_shifts(given: Assumptions) -> Iterator[Shift]:
    air, line = given.air, given.line
    if not air.is_vacuum:
        denser = replace(air, density=air.density + air.u_density)
        factor = {"air_density_factor": 1.0 + air.u_density / air.density}
        yield Shift(name="air density", assumptions=replace(given, air=denser), of_fall=factor)
        # Air that moves along a hanging line pushes it nowhere; only a falling body feels it.
        along = {"air_vertical": air.u_vertical}
        yield Shift(name="air moving in the shaft", assumptions=given, of_fall=along)
    stronger = 1.0 + air.u_cross_flow_fraction
    flow = tuple((top, end, speed * stronger, toward) for top, end, speed, toward in air.cross_flow)
    blown = replace(given, air=replace(air, cross_flow=flow))
    yield Shift(name="cross-flow", assumptions=blown, of_fall={"cross_flow_factor": stronger})
    heavier = replace(given, line=replace(line, bob_mass=line.bob_mass + line.u_bob_mass))
    yield Shift(name="bob mass", assumptions=heavier, of_fall={})


def _body_shifts(given: Assumptions, body: Body) -> Iterator[Shift]:
    """Yield what only a falling body feels; nothing of it moves a line."""
    moved = {
        "drag": {"drag_factor": 1.0 + body.u_drag_fraction},
        "release point east": {"east": body.u_release},
        "release point north": {"north": body.u_release},
        "release speed east": {"speed_east": body.u_release_speed},
        "release speed north": {"speed_north": body.u_release_speed},
    }
    for name, of_fall in moved.items():
        yield Shift(name=name, assumptions=given, of_fall=of_fall)


def _shifted(latitude: float, by: float) -> float:
    return latitude + by if latitude + by <= tau / 4 else latitude - by


def _bent(assumptions: Assumptions, field: LocalField, row: int) -> tuple[tuple[float, float, float], ...]:
    """Return the deflections with the unknown bending added on one axis, growing in proportion to depth."""
    deepest = reach(assumptions)
    depths = np.array(sorted({0.0, deepest, *(one[0] for one in assumptions.site.deflections)}))
    north, east = field.slope(depths)
    bending = assumptions.site.u_deflection * depths / assumptions.shaft.depth
    columns = [depths, north, east]
    columns[row] = columns[row] + bending
    return tuple((float(z), float(n), float(e)) for z, n, e in zip(*columns, strict=True))


def _fall_parts(
    models: Models, others: list[Models], moved: list[Shift], depth: NDArray[np.float64]
) -> NDArray[np.float64]:
    """Return how far each shift moves the falling body, shape (shifts, 2, n) [m]; all fall in one ensemble."""
    neutral = {one.name: one.default for one in fields(Variation)}
    members = [neutral]
    members += [
        {**neutral, **_of_field(models, other), **one.of_fall}
        for one, other in zip(moved, others, strict=True)
    ]
    variation = Variation(**{name: np.array([one[name] for one in members]) for name in neutral})
    body, air = models.assumptions.body, models.air if models.assumptions.body else None
    found = fall_ensemble(models.field, depths=depth, variation=variation, body=body, air=air)
    there = np.stack([found.east, found.north], axis=1)
    return there[1:] - there[0]


def _of_field(models: Models, other: Models) -> dict[str, float]:
    """Put the difference of two fields as what a fall feels of it: linear in depth, which is what the inputs change."""
    deepest = np.array([0.0, reach(models.assumptions)])
    gravity = other.field.gravity_at(deepest) - models.field.gravity_at(deepest)
    north, east = (
        new - old for new, old in zip(other.field.slope(deepest), models.field.slope(deepest), strict=True)
    )
    return {
        "latitude": other.field.latitude - models.field.latitude,
        "gravity_factor": other.field.gravity / models.field.gravity,
        "gravity_gradient": float(gravity[1] - gravity[0]) / float(deepest[1]),
        "curvature_north": float(north[1]) / float(deepest[1]),
        "curvature_east": float(east[1]) / float(deepest[1]),
    }
