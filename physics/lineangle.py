"""What the angle of a line at its collar shows in a plumb shaft: length times angle, which is not where its bob hangs.

A line is straight only if it has no weight and nothing blows on it between collar and bob. Where the bob itself hangs
is `hung`; which readings are angles is the engine's business.
"""

from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from eastfall.physics.budget import Budget, combined, joint
from eastfall.physics.contributions import shifts
from eastfall.physics.expected import ExpectedCurve
from eastfall.physics.hung import hang
from eastfall.physics.models import Models, Pair

Array = NDArray[np.float64]


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class LineAngle:
    """The prediction for a line whose angle at the collar is read, on the depths of an expected curve.

    Parameters
    ----------
    plumb : ndarray, shape (2, n)
        Length times angle of a line at rest, east and north, against the run's reference line [m].
    moving : ndarray, shape (n,)
        How far east that moves for each metre a second of the line, down positive [s].
    u : ndarray, shape (2, n)
        Standard uncertainty of `plumb` [m].
    covariance : ndarray, shape (n,)
        Of its east and north [m²].
    budget : Budget
        What it is made of.
    """

    plumb: Pair
    moving: Array
    u: Pair
    covariance: Array
    budget: Budget


def line_angle(curve: ExpectedCurve) -> LineAngle:
    """Work out what line angles show.

    Parameters
    ----------
    curve : ExpectedCurve
        Of a hung run.

    Returns
    -------
    LineAngle

    Notes
    -----
    At the collar T x' = H, the side loads of all that hangs below: L x'(0) = L H/T. A force F at depth a on a light
    line with bob weight W moves the bob by F a/W and L x'(0) by F L/W; a bare wire in a vertical that bends by κz shows
    ½κL² where its end is at ¾κL².
    """
    models, depth = curve.models, curve.depth
    plumb = _shown(models, depth, 0.0)
    budget = _budget(curve)
    parts = budget.at(depth)
    return LineAngle(
        plumb=plumb,
        moving=_shown(models, depth, 1.0)[0] - plumb[0],
        u=combined(parts),
        covariance=joint(parts, np.ones((len(parts), depth.size))),
        budget=budget,
    )


def _shown(models: Models, depth: Array, speed: float) -> Pair:
    line = replace(models.assumptions.line, line_speed=speed)
    found = hang(models.field, line, depth, models.air)
    return np.stack([found.slope_east, found.slope_north]) * depth - models.reference(depth)


def _budget(curve: ExpectedCurve) -> Budget:
    """Move every input by its uncertainty, as `expected.expected_budget` does for the bob."""
    models, depth = curve.models, curve.budget.depth
    speed = models.assumptions.line.line_speed
    moved = list(shifts(models))
    parts = np.array([_shown(Models.of(one.assumptions), depth, speed) for one in moved])
    parts -= _shown(models, depth, speed)
    matter = np.flatnonzero(np.any(parts, axis=(1, 2)))
    return Budget(depth=depth, names=tuple(moved[one].name for one in matter), parts=parts[matter])
