"""A body falling down a shaft: its path by depth, and the same for an ensemble of changed circumstances.

The forces are in `motion`, their integration in `descent`; what a spread of releases means is in `spread`.
"""

from dataclasses import dataclass

import numpy as np
import numpy.typing as npt
from numpy.polynomial import chebyshev

from eastfall.physics.air import AirColumn
from eastfall.physics.collocation import Rule
from eastfall.physics.descent import State, Stretch, descend
from eastfall.physics.earth import Array
from eastfall.physics.ensemble import FOLLOWED, RULE, Lead, at_end, follow, lead
from eastfall.physics.errors import ParameterError
from eastfall.physics.fall_limits import path_warnings, refuse_impossible
from eastfall.physics.field import LocalField
from eastfall.physics.motion import UNCHANGED, Forces, Release, Variation
from eastfall.physics.settings import Body
from eastfall.physics.throw import Thrown, reach, rise

__all__ = ["Falling", "Release", "Trajectory", "Variation", "fall", "fall_ensemble"]

BLOCK = 2048
"""Members of an ensemble that are integrated together; their arrays fit in the processor's cache."""
_AT_REST = 1e-9
"""A throw up by no more is a release from rest: it ends 5e-20 m higher [m/s]."""


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class Falling:
    """Where falling bodies are at given depths.

    Parameters
    ----------
    depth : array, shape (..., depths)
        [m]
    time : array
        Since the release [s].
    east, north : array
        Offset from the straight vertical through the collar [m].
    speed, speed_east, speed_north : array
        Size of the velocity against the shaft, and its horizontal components [m/s].

    Notes
    -----
    Of one trajectory all have the shape of the depths asked for; of an ensemble (members, depths).
    """

    depth: Array
    time: Array
    east: Array
    north: Array
    speed: Array
    speed_east: Array
    speed_north: Array


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class Trajectory:
    """One fall, known at every depth.

    Parameters
    ----------
    path : Falling
        Samples along the fall, close enough to draw; read-only.
    warnings : tuple of str
        Where the answer is outside the model.
    apex : float
        z* of z = z* + σ² [m].
    edges : array, shape (stretches + 1,)
        σ where the stretches meet [√m].
    series : array, shape (stretches, terms, 6)
        Chebyshev coefficients of time, east, north, their speeds and the energy along each stretch.
    """

    path: Falling
    warnings: tuple[str, ...]
    apex: float
    edges: Array
    series: Array

    @property
    def time(self) -> Array:
        """Since the release, at the samples [s]."""
        return self.path.time

    @property
    def depth(self) -> Array:
        """Of the samples [m], rising."""
        return self.path.depth

    @property
    def east(self) -> Array:
        """Offset of the samples from the straight vertical [m]."""
        return self.path.east

    @property
    def north(self) -> Array:
        """Offset of the samples from the straight vertical [m]."""
        return self.path.north

    @property
    def speed(self) -> Array:
        """Of the samples against the shaft [m/s]."""
        return self.path.speed

    @property
    def max_depth(self) -> float:
        """Deepest depth that the trajectory covers [m]."""
        return float(self.path.depth[-1])

    def at(self, depth: npt.ArrayLike) -> Falling:
        """Where the body is when it passes given depths.

        Parameters
        ----------
        depth : array_like
            z [m]; NaN, and depths above the release or below `max_depth`, give NaN.

        Returns
        -------
        Falling
            In the shape of `depth`; of a body thrown up, the passage on the way down.
        """
        z = np.asarray(depth, dtype=np.float64)
        flat = z.ravel()
        known = (flat >= self.path.depth[0]) & (flat <= self.path.depth[-1])
        rows = np.full((6, flat.size), np.nan)
        sigma = np.sqrt(np.maximum(flat[known] - self.apex, 0.0))
        rows[:, known] = _evaluate(self.edges, self.series, sigma)
        return _falling(z, rows.reshape(6, *z.shape))


def _evaluate(edges: Array, series: Array, sigma: Array) -> Array:
    """Evaluate the six quantities at σ inside the edges, shape (6, σ)."""
    index = np.clip(np.searchsorted(edges, sigma, side="right") - 1, 0, len(series) - 1)
    start, end = edges[index], edges[index + 1]
    terms = chebyshev.chebvander((2.0 * sigma - start - end) / (end - start), series.shape[1] - 1)
    rows = np.empty((len(sigma), 6))
    for i in set(index.tolist()):
        chosen = index == i
        rows[chosen] = terms[chosen] @ series[i]
    return rows.T


def _falling(depth: Array, rows: Array) -> Falling:
    """Six quantities, shape (6, ...), as a record with the speed in place of the energy."""
    time, east, north, speed_east, speed_north, energy = rows
    speed = np.sqrt(2.0 * np.maximum(energy, 0.0) + speed_east**2 + speed_north**2)
    return Falling(
        depth=depth,
        time=time,
        east=east,
        north=north,
        speed=speed,
        speed_east=speed_east,
        speed_north=speed_north,
    )


def fall(
    field: LocalField,
    *,
    to_depth: float,
    body: Body | None = None,
    air: AirColumn | None = None,
    release: Release | None = None,
) -> Trajectory:
    """Path of a body released in a shaft, against the straight vertical through the collar.

    Parameters
    ----------
    field : LocalField
    to_depth : float
        Where the path ends [m], below the release.
    body : settings.Body, optional
        None is a point mass in vacuum.
    air : AirColumn, optional
        None is vacuum.
    release : Release, optional
        By default the body's own release, or rest at the reference point.

    Returns
    -------
    Trajectory

    Raises
    ------
    ParameterError
        If `to_depth` is not below the release, the body is lighter than air, or an upcast carries it.
    """
    start = _release(body, release)
    forces = Forces(field, body, air, start, UNCHANGED)
    refuse_impossible(forces, start, to_depth)
    apex, stretches = _nominal(forces, start, _edges(forces, start.depth, to_depth))
    edges = np.array([stretches[0].start, *(one.end for one in stretches)])
    series = np.stack([one.series[:, :, 0] for one in stretches])
    nodes = apex + np.concatenate([one.sigma[:, 0] for one in stretches]) ** 2
    depth = np.concatenate([[start.depth], nodes[nodes > start.depth], [to_depth]])
    path = _falling(depth, _evaluate(edges, series, np.sqrt(np.maximum(depth - apex, 0.0))))
    for array in (edges, series, *(getattr(path, name) for name in path.__slots__)):
        array.setflags(write=False)
    warnings = path_warnings(forces, depth=path.depth, time=path.time, speed=path.speed)
    return Trajectory(path=path, warnings=warnings, apex=apex, edges=edges, series=series)


def fall_ensemble(
    field: LocalField,
    *,
    depths: npt.ArrayLike,
    variation: Variation,
    body: Body | None = None,
    air: AirColumn | None = None,
    release: Release | None = None,
    tolerance: float = FOLLOWED,
    rule: Rule = RULE,
) -> Falling:
    """Where many bodies are at given depths, each under its own change of circumstances.

    Parameters
    ----------
    field : LocalField
    depths : array_like, shape (depths,)
        Rising [m], below the release.
    variation : Variation
        The members' changes against the nominal fall; they may be small or large, as long as every member falls.
    body, air, release
        Of the nominal fall, as for `fall`.
    tolerance : float
        To which the departures from the nominal fall are iterated [m].
    rule : Rule
        How finely the departures are followed; the default is for any variation.

    Returns
    -------
    Falling
        Arrays of shape (members, depths); the depth itself has shape (depths,).

    Raises
    ------
    ParameterError
        As `fall`, and if the depths are not rising or a member is too far from the nominal fall to be followed.
    """
    z = np.atleast_1d(np.asarray(depths, dtype=np.float64))
    start = _release(body, release)
    if z.ndim != 1 or not np.all(np.diff(z) > 0.0) or not z[0] >= start.depth:
        raise ParameterError("depths", depths, "m", f"rising depths from the release at {start.depth} m down")
    forces = Forces(field, body, air, start, UNCHANGED)
    bottom = max(float(z[-1]), start.depth + 1e-3)
    refuse_impossible(forces, start, bottom)
    thrown = bool(np.any(np.asarray(variation.speed_down) != 0.0)) or start.speed_down < 0.0
    edges = _edges(forces, start.depth, bottom, _first_metres(start, variation) if thrown else 0.0)
    apex, stretches = _nominal(forces, start, edges)
    rows = np.empty((6, variation.members, len(z)))
    leads = [lead(forces, apex, one, rule) for one in stretches]
    for begin in range(0, variation.members, BLOCK):
        part = variation.part(slice(begin, begin + BLOCK))
        member = Forces(field, body, air, start, part)
        rows[:, begin : begin + BLOCK] = _members(
            member, start, apex, leads, depths=z, tolerance=tolerance, timed_to=edges[1] if thrown else None
        )
    return _falling(z, rows)


def _release(body: Body | None, release: Release | None) -> Release:
    if release is not None or body is None:
        return release or Release()
    return Release(
        east=body.release_east,
        north=body.release_north,
        speed_east=body.release_speed_east,
        speed_north=body.release_speed_north,
        speed_down=body.release_speed_down,
    )


def _edges(forces: Forces, start: float, end: float, first_metres: float = 0.0) -> list[float]:
    """Depths where a stretch must end: kinks of rock and air, and where members of different speeds set in.

    A member's own start is a branch point of its speed; it is felt less the farther below, so that the stretches may
    grow with the distance from it.
    """
    breaks = set(forces.field.breaks) | set(forces.air.breaks if forces.air is not None else ())
    reach_down, timed = first_metres, []
    while reach_down > 0.0 and start + reach_down < end:
        timed.append(start + reach_down)
        reach_down *= 8.0
    top = timed[0] if timed else start
    inner = {one for one in (*breaks, *timed[1:]) if top < one < end}
    return [start, *timed[:1], *sorted(inner), end]


def _first_metres(start: Release, variation: Variation) -> float:
    """How deep members of different vertical release speeds are followed in time before they share depths [m]."""
    fastest = np.abs(start.speed_down + np.asarray(variation.speed_down)).max()
    return float(max(0.5, fastest**2))


def _in_hand(start: Release, change: Variation) -> Thrown:
    """Members at their release."""
    zero = np.zeros(change.members)
    v_down = zero + start.speed_down + change.speed_down
    state = State(
        time=zero,
        east=zero + start.east + change.east,
        north=zero + start.north + change.north,
        v_east=zero + start.speed_east + change.speed_east,
        v_north=zero + start.speed_north + change.speed_north,
        energy=0.5 * v_down**2,
    )
    return Thrown(state=state, depth=zero + start.depth, v_down=v_down)


def _nominal(forces: Forces, start: Release, edges: list[float]) -> tuple[float, list[Stretch]]:
    """Apex and stretches of the nominal fall; of a throw upwards, from its top."""
    first = rise(forces, _in_hand(start, UNCHANGED))
    top = float(first.depth[0])
    if start.speed_down < -_AT_REST:
        state = first.state._replace(energy=np.zeros(1))
        return top, list(descend(forces, top, [top, *edges], state))
    apex = top - float(first.state.energy[0]) / forces.field.gravity
    return apex, list(descend(forces, apex, edges, first.state))


def _members(
    forces: Forces,
    start: Release,
    apex: float,
    leads: list[Lead],
    *,
    depths: Array,
    tolerance: float,
    timed_to: float | None,
) -> Array:
    """Six quantities of a block of members at the depths, shape (6, members, depths)."""
    hand = _in_hand(start, forces.variation)
    state = hand.state
    rows = np.full((6, len(state.time), len(depths)), np.nan)
    waiting = leads
    if timed_to is not None:
        top = rise(forces, hand)
        for i in np.flatnonzero(depths <= timed_to):
            rows[:, :, i] = np.stack(reach(forces, top, float(depths[i])))
        state = reach(forces, top, timed_to)
        waiting = [one for one in leads if one.stretch.start >= np.sqrt(timed_to - apex) * (1.0 - 1e-12)]
    sigma = np.sqrt(np.maximum(depths - apex, 0.0))
    for k, ahead in enumerate(waiting):
        if k == 0:
            begin = State(*(new - old for new, old in zip(state, ahead.stretch.first, strict=True)))
        rates = follow(forces, ahead, begin, tolerance)
        inside = (sigma >= ahead.stretch.start) & (sigma <= ahead.stretch.end)
        if np.any(inside):
            _set_beside(rows, inside, ahead, begin, rates, sigma[inside])
        begin = at_end(ahead, begin, rates)
    return rows


def _set_beside(
    rows: Array, inside: npt.NDArray[np.bool_], ahead: Lead, begin: State, rates: State, sigma: Array
) -> None:
    """Write the six quantities of members within a stretch at σ into their columns."""
    stretch = ahead.stretch
    x = (2.0 * sigma - stretch.start - stretch.end) / (stretch.end - stretch.start)
    nominal = chebyshev.chebvander(x, len(stretch.series) - 1) @ stretch.series[:, :, 0]
    onto = chebyshev.chebvander(x, len(ahead.rule.nodes)) @ ahead.rule.to_series
    for row, at, departure, rate in zip(rows, nominal.T, begin, rates, strict=True):
        row[:, inside] = (departure + onto @ rate).T + at
