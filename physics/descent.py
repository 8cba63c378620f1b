"""Integration of one body's fall over depth, by collocation.

The forces are stated in `motion`; many bodies near this one are `ensemble`; what a caller wants to know is in `fall`.

Depth is taken as z = z* + σ², z* the point where the body was or would have been at rest. In σ a fall from rest is
smooth (speed ∝ σ, time ∝ σ, east ∝ σ³) although in z it is not, every change of rock or air lies at a known place, and
all members of an ensemble share their depths, so that field and air are worked out once.
"""

from collections.abc import Iterator
from dataclasses import dataclass
from itertools import pairwise
from typing import NamedTuple

import numpy as np

from eastfall.physics.collocation import gauss_rule
from eastfall.physics.earth import Array
from eastfall.physics.errors import ParameterError
from eastfall.physics.motion import Acceleration, Forces, Surroundings

RULE = gauss_rule(20)

SETTLED = 1e-8
"""Newton's iteration ends when its last step is below this, in metres and as a share of the energy.

Its error after that step is the square of it, or a thousandth where only Coriolis couples.
"""
TAIL = 2e-8
"""A stretch is halved while the last terms of its series are above this, in metres, seconds, share of energy."""
SHORTEST = 1.0 / 256.0
"""No stretch is halved below this share of the whole range of σ."""
ROUNDS = 30


class State(NamedTuple):
    """Bodies at one depth, or along the nodes of a stretch; each array has shape (..., members)."""

    time: Array
    east: Array
    north: Array
    v_east: Array
    v_north: Array
    energy: Array
    """Half the square of the downward speed [m²/s²]."""


class Inverses(NamedTuple):
    """Inverse Newton matrices of a stretch, shape (nodes, nodes)."""

    vertical: Array
    sideways: Array


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class Stretch:
    """A solved stretch of a fall, σ from `start` to `end`."""

    start: float
    end: float
    sigma: Array
    first: State
    nodes: State
    last: State
    series: Array
    """Chebyshev coefficients (terms, quantities, members) of the State over the stretch."""


def solve_stretch(forces: Forces, apex: float, start: float, end: float, first: State) -> Stretch | None:
    """Solve one stretch for a single body by Newton's iteration; None if it does not settle."""
    half = 0.5 * (end - start)
    sigma = (0.5 * (start + end) + half * RULE.nodes)[:, None]
    step = 2.0 * half * sigma
    around = forces.surroundings(apex + sigma**2)
    nodes = _first_guess(forces, around, sigma**2 - start**2, first)
    for _ in range(ROUNDS):
        now = acting(forces, around, nodes)
        inverses = _invert(energy_slope(forces, around, nodes, now), step, nodes, now)
        nodes, moved = _advance(nodes, first, step, now, inverses)
        if not moved < np.inf:
            return None
        if moved < SETTLED:
            rates = state_rates(acting(forces, around, nodes), nodes, step)
            series = np.stack([RULE.to_series @ rate for rate in rates], axis=1)
            series[0] += np.stack(first)
            return Stretch(
                start=start,
                end=end,
                sigma=sigma,
                first=first,
                nodes=nodes._replace(time=first.time + RULE.to_nodes @ rates.time),
                last=_at_end(first, rates),
                series=series,
            )
    return None


def _first_guess(forces: Forces, around: Surroundings, fallen: Array, first: State) -> State:
    """Straight down under the drag of a constant coefficient, taken at the speed where it balances weight."""
    pull = around.gravity_down
    energy = first.energy + pull * fallen
    if forces.air is not None and forces.body is not None and forces.body.drag_coefficient != 0.0:
        speed = np.sqrt(2.0 * energy)
        for _ in range(12):
            per_metre = forces.drag_rate(forces.body, around, speed) / speed
            speed = np.sqrt(speed * np.sqrt(pull / per_metre))
        # expm1: under next to no drag the difference of 1 and what is left of the speed has no digits.
        left = -2.0 * per_metre * fallen
        energy = np.maximum(first.energy * np.exp(left) - 0.5 * speed**2 * np.expm1(left), 1e-12)
    still = np.zeros_like(energy)
    return State(*(still + one for one in first))._replace(energy=energy)


def acting(forces: Forces, around: Surroundings, nodes: State, faster: float = 0.0) -> Acceleration:
    """Acceleration at the nodes, with the downward speed larger by the share `faster`."""
    v_down = np.sqrt(2.0 * nodes.energy)
    if faster:
        v_down = v_down * (1.0 + faster)
    return forces.acceleration(
        around,
        nodes.east,
        nodes.north,
        v_east=nodes.v_east,
        v_north=nodes.v_north,
        v_down=v_down,
    )


def energy_slope(forces: Forces, around: Surroundings, nodes: State, now: Acceleration) -> Array:
    """∂(downward acceleration)/∂(energy) [1/m], by a difference; zero without air."""
    if forces.air is None:
        return np.zeros_like(nodes.energy)
    faster = 1e-6
    other = acting(forces, around, nodes, faster)
    slope: Array = (other.down - now.down) / (faster * 2.0 * nodes.energy)
    return slope


def _invert(growth: Array, step: Array, nodes: State, now: Acceleration) -> Inverses:
    """Inverse Newton matrices: of the energy, and of either horizontal speed under drag."""
    pace = step / np.sqrt(2.0 * nodes.energy)
    one = np.eye(len(step))
    vertical: Array = one - RULE.to_nodes * (step * growth)[:, 0]
    sideways: Array = one + RULE.to_nodes * (pace * now.drag_rate)[:, 0]
    return Inverses(*np.linalg.inv(np.stack([vertical, sideways])).astype(np.float64, copy=False))


def _advance(
    nodes: State, first: State, step: Array, now: Acceleration, inverses: Inverses
) -> tuple[State, float]:
    """One round of Newton's iteration, and the largest change that it made (metres, share of the energy)."""
    pace = step / np.sqrt(2.0 * nodes.energy)
    d_energy = inverses.vertical @ (first.energy + RULE.to_nodes @ (step * now.down) - nodes.energy)
    d_east = inverses.sideways @ (first.v_east + RULE.to_nodes @ (pace * now.east) - nodes.v_east)
    d_north = inverses.sideways @ (first.v_north + RULE.to_nodes @ (pace * now.north) - nodes.v_north)
    energy = np.maximum(nodes.energy + d_energy, 0.1 * nodes.energy)
    v_east, v_north = nodes.v_east + d_east, nodes.v_north + d_north
    pace = step / np.sqrt(2.0 * energy)
    east = first.east + RULE.to_nodes @ (pace * v_east)
    north = first.north + RULE.to_nodes @ (pace * v_north)
    moves = (d_energy / energy, east - nodes.east, north - nodes.north)
    moved = max(float(np.abs(one).max()) for one in moves)
    return State(nodes.time, east, north, v_east, v_north, energy), moved


def state_rates(now: Acceleration, nodes: State, step: Array) -> State:
    """Rates of the State by the stretch's own variable, which runs from -1 to 1."""
    pace = step / np.sqrt(2.0 * nodes.energy)
    return State(
        pace, pace * nodes.v_east, pace * nodes.v_north, pace * now.east, pace * now.north, step * now.down
    )


def _at_end(first: State, rates: State) -> State:
    return State(*(value + RULE.weights @ rate for value, rate in zip(first, rates, strict=True)))


def _tail(stretch: Stretch) -> float:
    """Size of the last two terms of the series that matter: metres, seconds, share of the energy."""
    ends = np.abs(stretch.series[-2:, :, 0]).max(axis=0)
    return float(max(ends[0], ends[1], ends[2], ends[5] / stretch.last.energy[0]))


def descend(forces: Forces, apex: float, edges: list[float], first: State) -> Iterator[Stretch]:
    """Stretches of a single body's fall between the given depths.

    Parameters
    ----------
    forces : Forces
    apex : float
        z* [m].
    edges : list of float
        Rising depths [m]: release, kinks of rock and air, bottom.
    first : State
        At the first depth; arrays of shape (1,).

    Yields
    ------
    Stretch
        In order of depth, each halved until its series has died away.

    Raises
    ------
    ParameterError
        If the fall cannot be followed: the body comes to a stop in the air.
    """
    sigmas = [float(np.sqrt(max(edge - apex, 0.0))) for edge in edges]
    shortest = SHORTEST * (sigmas[-1] - sigmas[0])
    waiting = list(pairwise(sigmas))[::-1]
    while waiting:
        start, end = waiting.pop()
        stretch = solve_stretch(forces, apex, start, end, first)
        short = end - start <= shortest
        if stretch is None and short:
            raise ParameterError("fall", apex + start**2, "m", "a body that keeps falling through this depth")
        if stretch is None or (_tail(stretch) > TAIL and not short):
            middle = 0.5 * (start + end)
            waiting += [(middle, end), (start, middle)]
            continue
        yield stretch
        first = stretch.last
