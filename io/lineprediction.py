"""What a crew asks of a plumb line before it hangs: stretch, swing, what the winch leaves, two lines, in a table."""

from typing import Any

import numpy as np

from eastfall.physics.hung import converge, free_period, radius_toward, stretch, swing_wait
from eastfall.physics.models import Models
from eastfall.physics.settings import Assumptions

_MM = 1000.0


def line_table(
    assumptions: Assumptions,
    at: list[float],
    *,
    apart: float | None = None,
    toward: float = 0.0,
    small: float = 0.001,
    decay: float | None = None,
) -> dict[str, Any]:
    """Work out what concerns the line itself, for a bob at depths.

    Parameters
    ----------
    assumptions : Assumptions
        Of the site, with its `[line]`.
    at : list of float
        [m], with gravity as at the collar.
    apart : float, optional
        Distance of a second line [m]: how much nearer the two bobs hang than their suspensions.
    toward : float
        Its azimuth [rad].
    small : float
        Size of swing that is small enough [m].
    decay : float, optional
        Time in which a swing falls to 1/e [s]: how long to wait after the winch has stopped.

    Returns
    -------
    dict
        As JSON; what was not asked for is None.
    """
    models, line = Models.of(assumptions), assumptions.line
    field, depth = models.field, np.asarray(at, dtype=float)
    density = models.air.density(depth / 2.0) if models.air else np.zeros_like(depth)
    longer = stretch(line, depth, field.gravity, _warmer(assumptions, depth))
    left = np.abs(line.line_speed * models.riding(depth, models.bob(depth)))
    columns: dict[str, list[float | None]] = {
        "depth_m": depth.tolist(),
        "stretch_mm": (longer.total * _MM).tolist(),
        "single_swing_s": [
            float(0.5 * free_period(line, one, field.gravity, float(rho))) if one > 0.0 else 0.0
            for one, rho in zip(at, density, strict=True)
        ],
        "swing_left_mm": (left * _MM).tolist(),
        "wait_s": [None] * depth.size if decay is None else swing_wait(left, decay, small).tolist(),
        "nearer_mm": [None] * depth.size
        if apart is None
        else (converge(apart, depth, radius_toward(field, toward)) * _MM).tolist(),
    }
    rows = [dict(zip(columns, row, strict=True)) for row in zip(*columns.values(), strict=True)]
    return {"kind": assumptions.run.kind, "site": assumptions.site.name, "line": rows}


def _warmer(assumptions: Assumptions, depth: np.ndarray) -> np.ndarray:
    """Return the line's mean temperature above the collar's [K]: half the warming to its end."""
    return 0.5 * assumptions.air.temperature_gradient * depth
