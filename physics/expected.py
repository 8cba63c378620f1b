"""What a perfectly plumb shaft would have shown: one curve over depth for a set of assumptions, with its uncertainty.

The models are put together in `models`; here, per kind of run and reference line, they are tabulated once and
interpolated after that. How fast a line moves depends on the journey: the engine multiplies what a curve says of one
metre a second, or sums its own.
"""

from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike, NDArray

from eastfall.physics.budget import Budget, combined, joint
from eastfall.physics.contributions import expected_budget
from eastfall.physics.fall import Trajectory
from eastfall.physics.hung import hang
from eastfall.physics.models import Models, Pair, tabulated
from eastfall.physics.settings import Assumptions
from eastfall.physics.wall import wall_contact

_POINTS = 2049
"""Of the table; spaced closer toward the collar, where a falling body's curve bends most. Linear interpolation is then
within 0.4 µm for 4 km (checked in the tests against the models themselves)."""
_ABOVE = -1.0
"""Readings up to a metre above the collar are taken as at the collar, where every curve is zero [m]."""


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
    covariance : ndarray, shape (n,)
        Of its east and north [m²].
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
    covariance: NDArray[np.float64]
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
    parts = budget.at(depth)
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
        u=combined(parts),
        covariance=joint(parts, np.ones((len(parts), depth.size))),
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
