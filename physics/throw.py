"""A fall followed in time until it reaches a depth, for bodies that start upwards or with different vertical speeds.

Once they share a depth and fall, `descent` takes over.
"""

import numpy as np

from eastfall.physics.collocation import gauss_rule
from eastfall.physics.descent import State
from eastfall.physics.earth import Array
from eastfall.physics.errors import ParameterError
from eastfall.physics.motion import Forces

RULE = gauss_rule(28)
SETTLED = 1e-11
ROUNDS = 200


def reach(forces: Forces, first: State, speed_down: Array, start: float, depth: float) -> State:
    """State of thrown or dropped bodies when they pass a depth on the way down.

    Parameters
    ----------
    forces : Forces
    first : State
        In the hand, arrays of shape (members,); its energy is not used.
    speed_down : array, shape (members,)
        At the release [m/s], negative upwards.
    start, depth : float
        Of the release and to be reached [m]; depth >= start.

    Returns
    -------
    State
        Arrays of shape (members,).

    Raises
    ------
    ParameterError
        If the iteration does not settle: too long a throw through air to be taken in one stretch.

    Notes
    -----
    Fixed-point iteration on the collocation equations in time scaled to the passage, the duration of each member
    found along with its path by Newton's step (z(T) - depth)/ż(T).
    """
    drop, gravity = depth - start, forces.field.gravity
    duration = (np.sqrt(speed_down**2 + 2.0 * gravity * drop) - speed_down) / gravity
    still = np.zeros((len(RULE.nodes), len(speed_down)))
    east, north, v_east, v_north = (
        still + one for one in (first.east, first.north, first.v_east, first.v_north)
    )
    share = 0.5 * (1.0 + RULE.nodes[:, None])
    v_down = speed_down + gravity * share * duration
    down = start + (speed_down + 0.5 * gravity * share * duration) * share * duration
    for _ in range(ROUNDS):
        now = forces.acceleration(
            forces.surroundings(down), east, north, v_east=v_east, v_north=v_north, v_down=v_down
        )
        half = 0.5 * duration
        v_down = speed_down + half * (RULE.to_nodes @ now.down)
        v_east = first.v_east + half * (RULE.to_nodes @ now.east)
        v_north = first.v_north + half * (RULE.to_nodes @ now.north)
        down = start + half * (RULE.to_nodes @ v_down)
        east, north = (
            first.east + half * (RULE.to_nodes @ v_east),
            first.north + half * (RULE.to_nodes @ v_north),
        )
        last_speed = speed_down + half * (RULE.weights @ now.down)
        missed = start + half * (RULE.weights @ v_down) - depth
        step = missed / np.where(last_speed > 0.0, last_speed, np.inf)
        duration = duration - step
        if float(np.abs(step).max()) < SETTLED:
            return State(
                time=first.time + duration,
                east=first.east + half * (RULE.weights @ v_east),
                north=first.north + half * (RULE.weights @ v_north),
                v_east=first.v_east + half * (RULE.weights @ now.east),
                v_north=first.v_north + half * (RULE.weights @ now.north),
                energy=0.5 * last_speed**2,
            )
    raise ParameterError("speed_down", float(speed_down.min()), "m/s", "a slower throw through this air")
