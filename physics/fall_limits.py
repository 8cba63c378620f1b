"""Where a fall is outside the model: what is refused before it, and what is said after it."""

import numpy as np

from eastfall.physics.drag import CRISIS_REYNOLDS, HIGHEST_REYNOLDS
from eastfall.physics.earth import Array
from eastfall.physics.errors import ParameterError
from eastfall.physics.motion import Forces, Release, Surroundings

HIGHEST_MACH = 0.3
"""Share of the speed of sound up to which air counts as incompressible (common practice, no source)."""


def refuse_impossible(forces: Forces, start: Release, to_depth: float) -> None:
    """Raise unless a body can fall from its release to a depth.

    Parameters
    ----------
    forces : Forces
    start : Release
    to_depth : float
        [m].

    Raises
    ------
    ParameterError
        If the depth is not below the release, mass or diameter is not positive, or the air carries the body at
        either end of the way.
    """
    if not (np.isfinite(to_depth) and to_depth > start.depth):
        raise ParameterError("to_depth", to_depth, "m", f"a depth below the release at {start.depth} m")
    if forces.air is None or forces.body is None:
        return
    if not (forces.body.mass > 0.0 and forces.body.diameter > 0.0):
        raise ParameterError(
            "body", (forces.body.mass, forces.body.diameter), "kg, m", "a mass and diameter above 0"
        )
    depth = np.array([[start.depth], [to_depth]])
    around = forces.surroundings(depth)
    if np.any(around.weight <= 0.0):
        raise ParameterError("mass", forces.body.mass, "kg", "a body heavier than the air it displaces")
    still = np.zeros_like(depth)
    if np.any(
        forces.acceleration(around, still, still, v_east=still, v_north=still, v_down=still).down <= 0.0
    ):
        raise ParameterError("vertical", forces.air.vertical, "m/s", "an upcast too slow to carry the body")


def path_warnings(forces: Forces, *, depth: Array, time: Array, speed: Array) -> tuple[str, ...]:
    """Sentences for what the model does not reach along a path.

    Parameters
    ----------
    forces : Forces
    depth, time, speed : array, shape (samples,)
        [m], [s], [m/s] along the path.

    Returns
    -------
    tuple of str
        Empty where nothing is in doubt.
    """
    measured = forces.field.measured_to
    found = []
    if 0.0 < measured < depth[-1]:
        found.append(f"deflections were measured down to {measured:g} m; below, the normal curvature goes on")
    if forces.air is None or forces.body is None:
        return tuple(found)
    if forces.spins:
        found.append("the lift of a spinning body is an estimate of its size only")
    around = forces.surroundings(depth)
    against_air = speed if around.air_down is None else np.abs(speed - around.air_down)
    if forces.body.drag_coefficient == "sphere":
        found += _reynolds_doubt(
            float(np.max(around.density * against_air * forces.body.diameter / around.viscosity))
        )
    mach = float(np.max(against_air / forces.air.sound_speed(depth)))
    if mach > HIGHEST_MACH:
        found.append(f"speed up to {mach:.2f} of sound: the drag of compressed air is not in the model")
    if _swamped(forces, around, time, speed):
        found.append(
            "the cross-flow pushes harder than the turning Earth: the landing tells the air, not the Earth"
        )
    return tuple(found)


def _swamped(forces: Forces, around: Surroundings, time: Array, speed: Array) -> bool:
    """Whether the cross-flow gives the body more sideways speed than Coriolis does."""
    if forces.body is None or around.air_east is None or around.air_north is None:
        return False
    push = forces.drag_rate(forces.body, around, speed) * np.hypot(around.air_east, around.air_north)
    turn = np.abs(forces.coriolis_cosine) * speed
    return bool(np.trapezoid(push, time) > np.trapezoid(turn, time))


def _reynolds_doubt(reynolds: float) -> list[str]:
    """Sentence about the sphere's drag curve at the highest Reynolds number of a fall, if any."""
    if reynolds > HIGHEST_REYNOLDS:
        return [f"Reynolds number up to {reynolds:.2g}: beyond the end of the drag curve at 1e6"]
    if reynolds > CRISIS_REYNOLDS:
        near = f"Reynolds number up to {reynolds:.2g}: near the drag crisis"
        return [f"{near} a rough or spinning sphere falls otherwise than the smooth one assumed"]
    return []
