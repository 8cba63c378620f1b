"""What a perfectly plumb shaft would have shown: one curve over depth for a set of assumptions, with its uncertainty.

The models are in `field`, `hung` and `fall`; here they are put together per kind of run and reference line, tabulated
once and interpolated after that. How fast a line moves depends on the journey: the engine multiplies what a curve says
of one metre a second, or sums its own.
"""

from collections.abc import Iterator
from dataclasses import dataclass, fields, replace
from math import tau

import numpy as np
from numpy.typing import ArrayLike, NDArray

from eastfall.physics.air import AirColumn, air_column
from eastfall.physics.budget import Budget, combined
from eastfall.physics.errors import ParameterError
from eastfall.physics.fall import Trajectory, Variation, fall, fall_ensemble
from eastfall.physics.field import LocalField, local_field
from eastfall.physics.hung import hang
from eastfall.physics.moving import lean
from eastfall.physics.settings import Assumptions, Body
from eastfall.physics.wall import wall_contact

Pair = NDArray[np.float64]
"""East in row 0, north in row 1, shape (2, n) [m]."""

_POINTS = 2049
"""Of the table; spaced closer toward the collar, where a falling body's curve bends most. Linear interpolation is then
within 0.4 µm for 4 km (checked in the tests against the models themselves)."""
_COARSE = 65
"""Depths at which uncertainty is worked out; it bends far less than the curve."""
_COLDEST, _HOTTEST = 173.15, 473.15
"""Of air in a shaft [K]; far inside the domain of its viscosity, 100 to 1900 K."""
_ABOVE = -1.0
"""Readings up to a metre above the collar are taken as at the collar, where every curve is zero [m]."""


def reach(assumptions: Assumptions) -> float:
    """Return the depth to which a curve is tabulated [m]: a little past the stated depth, for a stretched line."""
    return 1.02 * assumptions.shaft.depth + 2.0


def graded(to_depth: float, points: int) -> NDArray[np.float64]:
    """Return depths from 0 to `to_depth` [m], shape (points,), spaced in proportion to the square root of depth."""
    return to_depth * np.linspace(0.0, 1.0, points) ** 2


def tabulated(assumptions: Assumptions, points: int) -> NDArray[np.float64]:
    """Return the depths of a table: graded to `reach`, and both sides of every edge of a cross-flow.

    A bob that comes out of a flow is pushed no longer: its rest jumps there, and a line drawn across the jump would
    give readings near it an offset that neither side has.
    """
    deepest = reach(assumptions)
    flow = () if assumptions.air.is_vacuum else assumptions.air.cross_flow
    edges = [edge for row in flow for edge in row[:2] if 0.0 < edge < deepest]
    sides = [*edges, *np.nextafter(edges, 0.0)]
    return np.array(sorted({*graded(deepest, points).tolist(), *map(float, sides)}))


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class Models:
    """The local field and air of a site, and what falls and hangs in them, against the straight vertical."""

    assumptions: Assumptions
    field: LocalField
    air: AirColumn | None

    @classmethod
    def of(cls, assumptions: Assumptions) -> "Models":
        """Build the models."""
        field = local_field(assumptions.site)
        air = None if assumptions.air.is_vacuum else air_column(assumptions.air, field)
        if air is not None and not _COLDEST <= float(air.temperature(reach(assumptions))) <= _HOTTEST:
            raise ParameterError(
                "temperature_gradient",
                assumptions.air.temperature_gradient,
                "K/m",
                "air of -100 to 200 °C at the bottom of the shaft",
            )
        return cls(assumptions=assumptions, field=field, air=air)

    def field_line(self, depth: NDArray[np.float64]) -> Pair:
        """Return the curved vertical through the collar at depths, shape (2, n) [m]."""
        north, east = self.field.field_line(depth)
        return np.stack([east, north])

    def bob(self, depth: NDArray[np.float64]) -> Pair:
        """Return where the bob hangs, at rest, when the line is as long as each depth, shape (2, n) [m]."""
        return self._hung(depth, 0.0)

    def _hung(self, depth: NDArray[np.float64], speed: float) -> Pair:
        line = replace(self.assumptions.line, line_speed=speed)
        found = hang(self.field, line, np.maximum(depth, 0.0), self.air)
        return np.stack([found.bob_east, found.bob_north])

    def body(self, to_depth: float) -> Trajectory:
        """Return the path of the body; in vacuum where the site gives none."""
        air = self.air if self.assumptions.body else None
        return fall(self.field, to_depth=to_depth, body=self.assumptions.body, air=air)

    def riding(self, depth: NDArray[np.float64], bob: Pair) -> NDArray[np.float64]:
        """Return how far east of its rest `bob` rides for each metre a second of its line, shape (n,) [s]."""
        return self._hung(depth, 1.0)[0] - bob[0]

    def seeming(self, depth: NDArray[np.float64]) -> NDArray[np.float64]:
        """Return how far west a plumb guide seems to go for each metre a second of the line, shape (n,) [s].

        That is ∫ ε dz at 1 m/s, by the trapezoidal rule over `depth`, which rises from the collar.
        """
        angle = lean(1.0, self.assumptions.site.latitude, self.field.gravity_at(depth))
        steps = np.diff(depth) * (0.5 * (angle[1:] + angle[:-1]))
        return np.concatenate([[0.0], np.cumsum(steps)])

    def moving(self, depth: NDArray[np.float64], bob: Pair) -> NDArray[np.float64]:
        """Return how far east `plumb` moves for each metre a second of the line, shape (n,) [s].

        At depths that rise from the collar, where a bob at rest is known; a falling body hangs on no line.
        """
        match self.assumptions.run.kind:
            case "guided":
                return -self.seeming(depth)
            case "hung":
                return self.riding(depth, bob)
            case _:
                return np.zeros_like(depth)

    def reference(self, depth: NDArray[np.float64]) -> Pair:
        """Return the run's reference line against the straight vertical, shape (2, n) [m]."""
        match self.assumptions.run.reference:
            case "field-line":
                return self.field_line(depth)
            case "hung-line":
                return self.bob(depth)
            case _:
                return np.zeros((2, depth.size))

    def stated(self, depth: NDArray[np.float64]) -> Pair:
        """Return what a plumb shaft shows with the line at the speed that the site states, shape (2, n) [m].

        Guided or hung, at depths that rise from the collar; at rest it is the `plumb` of `expected_curve`.
        """
        speed = self.assumptions.line_speed
        if self.assumptions.run.kind == "hung":
            return self._hung(depth, speed) - self.reference(depth)
        shown = self.reference(depth) - self.field_line(depth)
        shown[0] -= speed * self.seeming(depth)
        return shown


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


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class ExpectedCurve:
    """The prediction by depth, against the run's reference line; build it with `expected_curve`.

    Parameters
    ----------
    depth : ndarray, shape (n,)
        Table [m], rising from 0.
    plumb, bob, body, field_line, reference : ndarray, shape (2, n)
        East and north [m]. `plumb` is what the run's own measurement shows in a plumb shaft with the line at rest;
        `bob` and `body` the two classical answers and `field_line` the curved vertical, all three against the
        run's reference line; `reference` is that line against the straight vertical.
    moving : ndarray, shape (n,)
        How far east `plumb` moves for each metre a second of the line, down positive [s].
    gravity : ndarray, shape (n,)
        [m/s²].
    u : ndarray, shape (2, n)
        Standard uncertainty of `plumb` [m].
    budget : Budget
        What it is made of.
    fall_time, fall_speed : ndarray, shape (n,)
        [s], [m/s].
    wall_contact_depth : float or None
        Where the body meets the wall [m].
    warnings : tuple of str
        Where the answer is outside the model.
    """

    assumptions: Assumptions
    models: Models
    depth: NDArray[np.float64]
    plumb: Pair
    bob: Pair
    body: Pair
    field_line: Pair
    reference: Pair
    moving: NDArray[np.float64]
    gravity: NDArray[np.float64]
    u: Pair
    budget: Budget
    fall_time: NDArray[np.float64]
    fall_speed: NDArray[np.float64]
    wall_contact_depth: float | None
    warnings: tuple[str, ...]

    def look_up(self, table: NDArray[np.float64], depth: ArrayLike) -> NDArray[np.float64]:
        """Interpolate one of the curve's tables.

        Parameters
        ----------
        table : ndarray, shape (n,) or (2, n)
            A table of this curve.
        depth : array_like, shape (m,)
            [m].

        Returns
        -------
        ndarray, shape (m,) or (2, m)
            NaN below the table and more than a metre above the collar; nothing is extrapolated.
        """
        z = np.asarray(depth, dtype=float)
        if table.ndim == 1:
            found: NDArray[np.float64] = np.interp(z, self.depth, table, right=np.nan)
        else:
            found = np.array([np.interp(z, self.depth, row, right=np.nan) for row in table])
        above = z < _ABOVE
        if above.any():
            found[..., above] = np.nan
        return found

    def expected(self, depth: ArrayLike, speed: float = 0.0) -> Pair:
        """Return what is expected at depths with the line at one constant speed all the way [m], shape (2, m)."""
        found = self.look_up(self.plumb, depth)
        found[0] += speed * self.look_up(self.moving, depth)
        return found


def expected_curve(assumptions: Assumptions) -> ExpectedCurve:
    """Work out the prediction for a set of assumptions.

    Parameters
    ----------
    assumptions : Assumptions
        Site, shaft, run and whatever else matters for its kind.

    Returns
    -------
    ExpectedCurve
        From the collar to a little below the stated depth.

    Raises
    ------
    ParameterError
        From the models, for assumptions outside their domain.
    """
    models = Models.of(assumptions)
    depth = tabulated(assumptions, _POINTS)
    path = models.body(float(depth[-1]))
    there = path.at(depth)
    reference = models.reference(depth)
    bob = models.bob(depth)
    field_line = models.field_line(depth)
    body = np.stack([there.east, there.north])
    # Tilt is summed from the felt vertical, that is from the field line: a guide along the reference line shows the
    # reference less the field line. A bob and a body are seen against the reference itself.
    plumb = {"guided": reference - field_line, "hung": bob - reference, "drop": body - reference}
    budget = expected_budget(models)
    return ExpectedCurve(
        assumptions=assumptions,
        models=models,
        depth=depth,
        plumb=plumb[assumptions.run.kind],
        bob=bob - reference,
        body=body - reference,
        field_line=field_line - reference,
        reference=reference,
        moving=models.moving(depth, bob),
        gravity=models.field.gravity_at(depth),
        u=combined(budget.at(depth)),
        budget=budget,
        fall_time=there.time,
        fall_speed=there.speed,
        wall_contact_depth=_contact(assumptions, path),
        warnings=_warnings(models, path, depth),
    )


def _warnings(models: Models, path: Trajectory, depth: NDArray[np.float64]) -> tuple[str, ...]:
    """Say where the run's own answer is outside its model."""
    assumptions = models.assumptions
    if assumptions.run.kind == "drop":
        return tuple(path.warnings)
    if assumptions.run.kind != "hung" and assumptions.run.reference != "hung-line":
        return ()
    found = hang(models.field, assumptions.line, depth[depth <= assumptions.shaft.depth], models.air)
    warnings = []
    if bool(found.is_swamped.any()):
        warnings.append(
            "the air moves the bob farther than all else together, and its speed is hardly known: "
            "the classical practice is to stop the fan"
        )
    if not bool(found.is_linear.all()):
        warnings.append("the line leans by more than 0.05 rad: beyond the theory of small slopes")
    return tuple(warnings)


def _contact(assumptions: Assumptions, path: Trajectory) -> float | None:
    if assumptions.shaft.diameter is None:
        return None
    size = assumptions.body.diameter if assumptions.body else 0.0
    depth = wall_contact(path, assumptions.shaft, size)
    return depth if depth is not None and depth <= assumptions.shaft.depth else None


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
