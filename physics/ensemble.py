"""Many falls at once, each integrated as its departure from one nominal fall.

The nominal fall comes from `descent`. The forces on every member are the full ones; only what is left after subtracting
the nominal fall is small, so that few nodes and rounds carry it as far as the nominal fall itself is known.
"""

from dataclasses import dataclass, replace

import numpy as np
from numpy.polynomial import chebyshev

from eastfall.physics.collocation import Rule, gauss_rule
from eastfall.physics.descent import State, Stretch, acting, energy_slope, state_rates
from eastfall.physics.earth import Array
from eastfall.physics.errors import ParameterError
from eastfall.physics.motion import Forces, Surroundings

RULE = gauss_rule(12)
COARSE = gauss_rule(8)
"""Enough for departures of centimetres to be within 0.1 µm, where they are as smooth as those of release errors."""
FOLLOWED = 1e-9
_RESPONDED = 4
"""Rounds for the linear response; each shrinks its error by a thousand or more."""
ROUNDS = 40


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class Lead:
    """A stretch of the nominal fall, prepared for its followers.

    Parameters
    ----------
    stretch : Stretch
    rule : Rule
        Its nodes and matrices.
    depth, step : array, shape (nodes, 1)
        Depth of the nodes [m]; metres of depth per unit of the stretch's own variable there.
    around : Surroundings
        Of the nominal fall at the nodes.
    nodes, rates : State
        The nominal fall at the nodes, and its rates by the stretch's own variable.
    vertical, sideways : array, shape (nodes, nodes)
        Inverse Newton matrix times integration matrix, of the energy and of either horizontal speed.
    vertical_slope, sideways_slope : array, shape (nodes, 1)
        The linear part of the rates that those matrices already hold.
    vertical_start, sideways_start : array, shape (nodes, 1)
        What a unit of the first value leaves at the nodes.
    response : tuple of array, each shape (nodes, 5)
        Departure at the nodes per unit of the first east, north, their speeds and the energy, in the order of State
        without its time; a first guess for members that differ in nothing but where they start.
    """

    stretch: Stretch
    rule: Rule
    depth: Array
    around: Surroundings
    step: Array
    nodes: State
    rates: State
    vertical: Array
    sideways: Array
    vertical_slope: Array
    sideways_slope: Array
    vertical_start: Array
    sideways_start: Array
    response: tuple[Array, ...]


def lead(forces: Forces, apex: float, stretch: Stretch, rule: Rule = RULE) -> Lead:
    """Prepare a stretch of the nominal fall for its followers.

    Parameters
    ----------
    forces : Forces
        Of the nominal fall.
    apex : float
        z* [m].
    stretch : Stretch
    rule : Rule
        How finely the departures are followed.

    Returns
    -------
    Lead
    """
    half = 0.5 * (stretch.end - stretch.start)
    sigma = (0.5 * (stretch.start + stretch.end) + half * rule.nodes)[:, None]
    step = 2.0 * half * sigma
    depth = apex + sigma**2
    series = stretch.series[:, :, 0]
    nodes = State(*(chebyshev.chebvander(rule.nodes, len(series) - 1) @ series).T[:, :, None])
    around = forces.surroundings(depth)
    now = acting(forces, around, nodes)
    rates = state_rates(now, nodes, step)
    vertical_slope: Array = step * energy_slope(forces, around, nodes, now)
    sideways_slope: Array = -rates.time * now.drag_rate
    vertical = _inverse(rule, vertical_slope)
    sideways = _inverse(rule, sideways_slope)
    ahead = Lead(
        stretch=stretch,
        rule=rule,
        depth=depth,
        around=around,
        step=step,
        nodes=nodes,
        rates=rates,
        vertical=vertical @ rule.to_nodes,
        sideways=sideways @ rule.to_nodes,
        vertical_slope=vertical_slope,
        sideways_slope=sideways_slope,
        vertical_start=vertical.sum(axis=1, keepdims=True),
        sideways_start=sideways.sum(axis=1, keepdims=True),
        response=(np.zeros((len(step), 5)),) * 5,
    )
    return replace(ahead, response=_responses(forces, around, ahead))


def _responses(forces: Forces, around: Surroundings, ahead: Lead) -> tuple[Array, ...]:
    """Departures per unit of each first value, by a small step in each."""
    sizes = np.array([1e-3, 1e-3, 1e-3, 1e-3, 1e-6 * float(ahead.nodes.energy[-1, 0])])
    begin = State(np.zeros(5), *np.diag(sizes))
    apart = State(*(np.zeros((len(ahead.step), 5)) + one for one in begin))
    for _ in range(_RESPONDED):
        apart, _, _ = _refine(forces, around, ahead, begin, apart)
    return tuple(one / sizes for one in apart[1:])


def _inverse(rule: Rule, slope: Array) -> Array:
    matrix: Array = np.eye(len(slope)) - rule.to_nodes * slope[:, 0]
    return np.linalg.inv(matrix).astype(np.float64, copy=False)


def follow(forces: Forces, ahead: Lead, begin: State, tolerance: float = FOLLOWED) -> State:
    """Solve a stretch for members near the nominal fall.

    Parameters
    ----------
    forces : Forces
        Of the members.
    ahead : Lead
    begin : State
        Departure of the members from the nominal fall at its start, arrays of shape (members,).
    tolerance : float
        Rounds end when what further ones would add is below this, in metres and as a share of the energy.

    Returns
    -------
    State
        Rates of the departure at the nodes by the stretch's own variable, shape (nodes, members).

    Raises
    ------
    ParameterError
        If the members are so far from the nominal fall that the rounds do not settle.

    Notes
    -----
    With δ the departure and D the slope of its rate f at the nominal fall, collocation δ = δ₀ + S f becomes
    δ = J⁻¹δ₀ + J⁻¹S (f - D δ), J = 1 - S D, which is iterated: Newton's method with the nominal matrix for all.
    """
    linear = forces.variation.only_release
    around = ahead.around if linear else forces.surroundings(ahead.depth)
    starts = np.stack(np.broadcast_arrays(*begin[1:]))
    apart = State(np.zeros(()), *(one @ starts for one in ahead.response))
    # The linear response leaves only what is of second order, so the first round shows how the next would shrink.
    before = max(_size(apart.east), _size(apart.north)) if linear else 0.0
    for _ in range(ROUNDS):
        apart, rates, moved = _refine(forces, around, ahead, begin, apart)
        # The moves shrink by about the same factor every round, so the next one is foreseen.
        if moved < tolerance or (moved < 0.5 * before and moved * moved < tolerance * before):
            return rates
        before = moved
    raise ParameterError(
        "variation", "an ensemble", "", "members close enough to the nominal fall to be followed"
    )


def at_end(ahead: Lead, begin: State, rates: State) -> State:
    """Departure at the end of a stretch, which is that at the start of the next; arrays of shape (members,)."""
    return State(*(old + ahead.rule.weights @ rate for old, rate in zip(begin, rates, strict=True)))


def _members_at_nodes(ahead: Lead, apart: State) -> State:
    """Members at the nodes; their time is not needed and stays the nominal one."""
    nominal = ahead.nodes
    return State(
        nominal.time,
        nominal.east + apart.east,
        nominal.north + apart.north,
        nominal.v_east + apart.v_east,
        nominal.v_north + apart.v_north,
        _kept_falling(ahead, apart.energy),
    )


def _kept_falling(ahead: Lead, apart: Array) -> Array:
    """Energy of the members; a round that overshoots does not bring them to a stop."""
    return np.maximum(ahead.nodes.energy + apart, 0.01 * ahead.nodes.energy)


def _refine(
    forces: Forces, around: Surroundings, ahead: Lead, begin: State, apart: State
) -> tuple[State, State, float]:
    """One round: the departure, its rates, and how far it moved (metres, share of the energy)."""
    nodes = _members_at_nodes(ahead, apart)
    now = acting(forces, around, nodes)
    pace = ahead.step / np.sqrt(2.0 * nodes.energy)
    nominal = ahead.rates
    # What the Newton matrices hold already is taken out of the rates, and put back at the new departure below.
    rest = (
        pace * now.east - nominal.v_east - ahead.sideways_slope * apart.v_east,
        pace * now.north - nominal.v_north - ahead.sideways_slope * apart.v_north,
        ahead.step * now.down - nominal.energy - ahead.vertical_slope * apart.energy,
    )
    v_east = ahead.sideways_start * begin.v_east + ahead.sideways @ rest[0]
    v_north = ahead.sideways_start * begin.v_north + ahead.sideways @ rest[1]
    energy = ahead.vertical_start * begin.energy + ahead.vertical @ rest[2]
    pace = ahead.step / np.sqrt(2.0 * _kept_falling(ahead, energy))
    rates = State(
        pace - nominal.time,
        pace * (ahead.nodes.v_east + v_east) - nominal.east,
        pace * (ahead.nodes.v_north + v_north) - nominal.north,
        rest[0] + ahead.sideways_slope * v_east,
        rest[1] + ahead.sideways_slope * v_north,
        rest[2] + ahead.vertical_slope * energy,
    )
    east = begin.east + ahead.rule.to_nodes @ rates.east
    north = begin.north + ahead.rule.to_nodes @ rates.north
    # Departures are smooth along the nodes: every third of them shows how far a round moved.
    some = slice(None, None, -3)
    moves = (
        (energy[some] - apart.energy[some]) / ahead.nodes.energy[some],
        east[some] - apart.east[some],
        north[some] - apart.north[some],
    )
    moved = max(_size(one) for one in moves)
    return State(apart.time, east, north, v_east, v_north, energy), rates, moved


def _size(values: Array) -> float:
    """Largest absolute value; NaN if any is."""
    return float(np.maximum(values.max(), -values.min()))
