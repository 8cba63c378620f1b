"""A body falling down a shaft: its path by depth, and the same for an ensemble of changed circumstances.

The forces are in `motion`, their integration in `descent`; what a spread of releases means is in `spread`.
"""

from dataclasses import dataclass

import numpy as np
import numpy.typing as npt
from numpy.polynomial import chebyshev

from eastfall.physics.air import AirColumn
from eastfall.physics.descent import RULE, State, Stretch, descend, follow
from eastfall.physics.drag import CRISIS_REYNOLDS, HIGHEST_REYNOLDS
from eastfall.physics.earth import Array
from eastfall.physics.errors import ParameterError
from eastfall.physics.field import LocalField
from eastfall.physics.motion import UNCHANGED, Forces, Release, Variation
from eastfall.physics.settings import Body
from eastfall.physics.throw import reach

__all__ = ["Falling", "Release", "Trajectory", "Variation", "fall", "fall_ensemble"]

BLOCK = 512
"""Members of an ensemble that are integrated together; their arrays fit in the processor's cache."""


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
        rows[:, known] = self._evaluate(np.sqrt(np.maximum(flat[known] - self.apex, 0.0)))
        time, east, north, speed_east, speed_north, energy = rows.reshape(6, *z.shape)
        return Falling(
            depth=z,
            time=time,
            east=east,
            north=north,
            speed=np.sqrt(2.0 * np.maximum(energy, 0.0) + speed_east**2 + speed_north**2),
            speed_east=speed_east,
            speed_north=speed_north,
        )

    def _evaluate(self, sigma: Array) -> Array:
        """Evaluate the six quantities at σ inside the edges, shape (6, σ)."""
        count = len(self.series)
        index = np.clip(np.searchsorted(self.edges, sigma, side="right") - 1, 0, count - 1)
        start, end = self.edges[index], self.edges[index + 1]
        terms = chebyshev.chebvander((2.0 * sigma - start - end) / (end - start), self.series.shape[1] - 1)
        if count == 1:
            only: Array = (terms @ self.series[0]).T
            return only
        rows = np.empty((len(sigma), 6))
        for i in np.unique(index):
            chosen = index == i
            rows[chosen] = terms[chosen] @ self.series[i]
        return rows.T


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
    _refuse_impossible(forces, start, to_depth)
    apex, stretches = _nominal(forces, start, _edges(forces, start.depth, to_depth))
    edges = np.array([stretches[0].start, *(one.end for one in stretches)])
    series = np.stack([one.series[:, :, 0] for one in stretches])
    bare = Trajectory(
        path=_samples(start.depth, to_depth, apex, stretches),
        warnings=(),
        apex=apex,
        edges=edges,
        series=series,
    )
    for array in (edges, series, *(getattr(bare.path, name) for name in bare.path.__slots__)):
        array.setflags(write=False)
    return Trajectory(
        path=bare.path, warnings=_warnings(forces, bare.path), apex=apex, edges=edges, series=series
    )


def fall_ensemble(
    field: LocalField,
    *,
    depths: npt.ArrayLike,
    variation: Variation,
    body: Body | None = None,
    air: AirColumn | None = None,
    release: Release | None = None,
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
    _refuse_impossible(forces, start, bottom)
    thrown = bool(np.any(np.asarray(variation.speed_down) != 0.0)) or start.speed_down < 0.0
    edges = _edges(forces, start.depth, bottom, _first_metres(start, variation) if thrown else 0.0)
    apex, stretches = _nominal(forces, start, edges)
    rows = np.empty((6, variation.members, len(z)))
    for begin in range(0, variation.members, BLOCK):
        part = variation.part(slice(begin, begin + BLOCK))
        member = Forces(field, body, air, start, part)
        rows[:, begin : begin + BLOCK] = _members(
            member, start, apex, stretches, depths=z, timed_to=edges[1] if thrown else None
        )
    time, east, north, speed_east, speed_north, energy = rows
    speed = np.sqrt(2.0 * np.maximum(energy, 0.0) + speed_east**2 + speed_north**2)
    return Falling(
        depth=z,
        time=time,
        east=east,
        north=north,
        speed=speed,
        speed_east=speed_east,
        speed_north=speed_north,
    )


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


def _refuse_impossible(forces: Forces, start: Release, to_depth: float) -> None:
    """Raise unless gravity and buoyancy outweigh the upcast at both ends of the way."""
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


def _edges(forces: Forces, start: float, end: float, first_metres: float = 0.0) -> list[float]:
    """Depths where a stretch must end: kinks of rock and air, and the end of the first metres."""
    breaks = set(forces.field.breaks) | set(forces.air.breaks if forces.air is not None else ())
    top = start + first_metres
    inner = sorted(one for one in breaks if top < one < end)
    return [start, *((top,) if start < top < end else ()), *inner, end]


def _first_metres(start: Release, variation: Variation) -> float:
    """How deep members of different vertical release speeds are followed in time before they share depths [m]."""
    fastest = np.abs(start.speed_down + np.asarray(variation.speed_down)).max()
    return float(max(0.5, fastest**2))


def _at_release(start: Release, change: Variation, members: int) -> State:
    """State of the members in the hand; the energy is that of a release from rest or downwards."""
    zero = np.zeros(members)
    return State(
        time=zero,
        east=zero + start.east + change.east,
        north=zero + start.north + change.north,
        v_east=zero + start.speed_east + change.speed_east,
        v_north=zero + start.speed_north + change.speed_north,
        energy=zero + 0.5 * start.speed_down**2,
    )


def _nominal(forces: Forces, start: Release, edges: list[float]) -> tuple[float, list[Stretch]]:
    """Apex and stretches of the nominal fall; of a throw upwards, from its return on."""
    first = _at_release(start, UNCHANGED, 1)
    if start.speed_down < 0.0:
        first = reach(forces, first, np.array([start.speed_down]), start.depth, edges[0])
    gravity = forces.field.gravity
    apex = edges[0] - float(first.energy[0]) / gravity
    return apex, list(descend(forces, apex, edges, first))


def _members(
    forces: Forces,
    start: Release,
    apex: float,
    stretches: list[Stretch],
    *,
    depths: Array,
    timed_to: float | None,
) -> Array:
    """Six quantities of a block of members at the depths, shape (6, members, depths)."""
    change = forces.variation
    state = _at_release(start, change, change.members)
    rows = np.empty((6, change.members, len(depths)))
    sigma = np.sqrt(np.maximum(depths - apex, 0.0))
    waiting = stretches
    if timed_to is not None:
        down = start.speed_down + np.broadcast_to(
            np.asarray(change.speed_down, dtype=np.float64), state.time.shape
        )
        release = state
        for i in np.flatnonzero(depths < timed_to):
            rows[:, :, i] = np.stack(reach(forces, release, down, start.depth, float(depths[i])))
        state = reach(forces, release, down, start.depth, timed_to)
        waiting = [one for one in stretches if one.start >= np.sqrt(timed_to - apex) * (1.0 - 1e-12)]
    for stretch in waiting:
        rates, last = follow(forces, apex, stretch, state)
        inside = (sigma >= stretch.start) & (sigma <= stretch.end)
        if np.any(inside):
            x = (2.0 * sigma[inside] - stretch.start - stretch.end) / (stretch.end - stretch.start)
            onto = chebyshev.chebvander(x, len(RULE.nodes)) @ RULE.to_series
            for row, value, rate in zip(rows, state, rates, strict=True):
                row[:, inside] = (value + onto @ rate).T
        state = last
    return rows


def _samples(start: float, to_depth: float, apex: float, stretches: list[Stretch]) -> Falling:
    """Fall at the nodes of its stretches and at both ends."""
    states = [stretches[0].first, *(one.nodes for one in stretches), stretches[-1].last]
    columns = [np.concatenate([np.ravel(getattr(one, name)) for one in states]) for name in State._fields]
    time, east, north, speed_east, speed_north, energy = columns
    sigma = np.concatenate([one.sigma[:, 0] for one in stretches])
    return Falling(
        depth=np.concatenate([[start], apex + sigma**2, [to_depth]]),
        time=time,
        east=east,
        north=north,
        speed=np.sqrt(2.0 * energy + speed_east**2 + speed_north**2),
        speed_east=speed_east,
        speed_north=speed_north,
    )


def _warnings(forces: Forces, path: Falling) -> tuple[str, ...]:
    """Sentences for what the model does not reach on this path."""
    found = []
    measured = forces.field.measured_to
    if 0.0 < measured < path.depth[-1]:
        found.append(f"deflections were measured down to {measured:g} m; below, the normal curvature goes on")
    if forces.air is None or forces.body is None:
        return tuple(found)
    around = forces.surroundings(path.depth)
    speed = np.sqrt(path.speed**2 - 2.0 * path.speed * around.air_down + around.air_down**2)
    reynolds = float(np.max(around.density * speed * forces.body.diameter / around.viscosity))
    if forces.body.drag_coefficient == "sphere" and reynolds > HIGHEST_REYNOLDS:
        found.append(f"Reynolds number up to {reynolds:.2g}: beyond the drag curve's 1e6")
    elif forces.body.drag_coefficient == "sphere" and reynolds > CRISIS_REYNOLDS:
        found.append(
            f"Reynolds number up to {reynolds:.2g}: near the drag crisis a rough or spinning sphere falls otherwise "
            "than the smooth one assumed"
        )
    mach = float(np.max(speed / forces.air.sound_speed(path.depth)))
    if mach > 0.3:
        found.append(f"speed up to {mach:.2f} of sound: the drag of compressed air is not in the model")
    if forces.spins:
        found.append("the lift of a spinning body is an estimate of its size only")
    return (*found, *_swamped(forces, path))


def _swamped(forces: Forces, path: Falling) -> tuple[str, ...]:
    """Sentence, if the cross-flow pushes harder than the turning Earth does."""
    around = forces.surroundings(path.depth)
    if forces.body is None:
        return ()
    rate = forces.drag_rate(forces.body, around, path.speed)
    push = np.trapezoid(rate * np.hypot(around.air_east, around.air_north), path.time)
    turn = np.trapezoid(np.abs(forces.coriolis_cosine) * path.speed, path.time)
    if push <= turn:
        return ()
    return ("the cross-flow pushes harder than the turning Earth: the landing tells the air, not the Earth",)
