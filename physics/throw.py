"""A fall followed in time, for bodies that start upwards or with different vertical speeds.

Once they share a depth and fall, `descent` takes over.
"""

from dataclasses import dataclass

import numpy as np
import numpy.typing as npt

from eastfall.physics.collocation import gauss_rule
from eastfall.physics.descent import State
from eastfall.physics.earth import Array
from eastfall.physics.errors import ParameterError
from eastfall.physics.motion import Forces

RULE = gauss_rule(28)
SETTLED = 1e-11
"""The iteration ends when no duration moves by more [s]."""
ROUNDS = 200


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class Thrown:
    """Bodies at an instant of their own: what they carry, their depth and downward speed; arrays (members,)."""

    state: State
    depth: Array
    v_down: Array


def rise(forces: Forces, first: Thrown) -> Thrown:
    """Follow bodies to where they come to rest and turn; those that do not start upwards stay as they are.

    Parameters
    ----------
    forces : Forces
    first : Thrown
        In the hand.

    Returns
    -------
    Thrown
        At the top of the throw, at rest in the vertical.

    Raises
    ------
    ParameterError
        If the iteration does not settle: too fast a throw through air to be taken in one stretch.
    """
    up = np.minimum(first.v_down, 0.0)
    flight = _Flight(forces, first, up, -up / forces.field.gravity)
    with np.errstate(all="ignore"):  # numbers of an iteration that runs away; it is refused below
        for _ in range(ROUNDS):
            last = flight.refine()
            step = np.where(up < 0.0, last.v_down / flight.now_down[-1], 0.0)
            flight.duration = flight.duration - step
            if float(np.abs(step).max()) < SETTLED:
                return last if np.all(up < 0.0) else _keep(last, first, up < 0.0)
    raise ParameterError("speed_down", float(up.min()), "m/s", "a slower throw through this air")


def reach(forces: Forces, first: Thrown, depth: float) -> State:
    """State of bodies that fall or are at rest when they pass a depth.

    Parameters
    ----------
    forces : Forces
    first : Thrown
        Not above `depth` with an upward speed: let them `rise` first.
    depth : float
        To be reached [m].

    Returns
    -------
    State
        Arrays of shape (members,).

    Raises
    ------
    ParameterError
        If the iteration does not settle.
    """
    gravity = forces.field.gravity
    speed = first.v_down
    duration = (np.sqrt(speed**2 + 2.0 * gravity * np.maximum(depth - first.depth, 0.0)) - speed) / gravity
    flight = _Flight(forces, first, speed, duration)
    for _ in range(ROUNDS):
        last = flight.refine()
        step = (last.depth - depth) / np.where(last.v_down > 0.0, last.v_down, np.inf)
        flight.duration = flight.duration - step
        if float(np.abs(step).max()) < SETTLED:
            return last.state._replace(energy=0.5 * last.v_down**2)
    raise ParameterError("depth", depth, "m", "a depth that every body reaches")


def _keep(last: Thrown, first: Thrown, moved: npt.NDArray[np.bool_]) -> Thrown:
    """Take `last` where a body moved and `first` where it did not."""
    state = State(*(np.where(moved, new, old) for new, old in zip(last.state, first.state, strict=True)))
    return Thrown(
        state=state,
        depth=np.where(moved, last.depth, first.depth),
        v_down=np.where(moved, last.v_down, first.v_down),
    )


class _Flight:
    """Collocation in time scaled to each member's own duration, refined by fixed-point rounds.

    The durations are set from outside between rounds, by Newton's step toward what ends the flight.
    """

    def __init__(self, forces: Forces, first: Thrown, speed: Array, duration: Array) -> None:
        self.forces, self.first, self.speed, self.duration = forces, first, speed, duration
        elapsed = 0.5 * (1.0 + RULE.nodes[:, None]) * duration
        still = np.zeros_like(elapsed)
        self.v_down = speed + forces.field.gravity * elapsed
        self.down = first.depth + (speed + 0.5 * forces.field.gravity * elapsed) * elapsed
        self.east, self.north = still + first.state.east, still + first.state.north
        self.v_east, self.v_north = still + first.state.v_east, still + first.state.v_north
        self.now_down = still

    def refine(self) -> Thrown:
        """One round; where the bodies are at the end of their durations."""
        start, half = self.first.state, 0.5 * self.duration
        around = self.forces.surroundings(self.down)
        now = self.forces.acceleration(
            around, self.east, self.north, v_east=self.v_east, v_north=self.v_north, v_down=self.v_down
        )
        self.now_down = now.down
        speeds = (self.speed, start.v_east, start.v_north)
        ends = [
            v + half * (RULE.weights @ a)
            for v, a in zip(speeds, (now.down, now.east, now.north), strict=True)
        ]
        self.v_down, self.v_east, self.v_north = (
            v + half * (RULE.to_nodes @ a)
            for v, a in zip(speeds, (now.down, now.east, now.north), strict=True)
        )
        places = (self.first.depth, start.east, start.north)
        rates = (self.v_down, self.v_east, self.v_north)
        depth, east, north = (p + half * (RULE.weights @ v) for p, v in zip(places, rates, strict=True))
        self.down, self.east, self.north = (
            p + half * (RULE.to_nodes @ v) for p, v in zip(places, rates, strict=True)
        )
        state = State(start.time + self.duration, east, north, ends[1], ends[2], 0.5 * ends[0] ** 2)
        return Thrown(state=state, depth=depth, v_down=ends[0])
