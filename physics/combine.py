"""Passes and a known end put together: misclosure, best estimate and its uncertainty; a pure function of the stations.

Single stations are closed by `kinds`; sums of faces come from `faces`.
"""

from dataclasses import dataclass, replace
from math import hypot, isfinite, pi

import numpy as np
from numpy.typing import NDArray

from eastfall.physics.budget import COVERAGE_FACTOR, combined, joint
from eastfall.physics.findings import Best, Closure, FaceSums, Station
from eastfall.physics.kinds.base import RANDOM
from eastfall.physics.kinds.shares import (
    AZIMUTH,
    BENDS,
    COUNTER,
    DEPTH,
    JUMPED,
    MISSING,
    SCALE,
    ZERO,
    correlation_of_scales,
    of_axes,
)
from eastfall.physics.settings import DEGREE, Assumptions, Instrument
from eastfall.physics.tilt import spread_misclosure
from eastfall.physics.verdict import horizontal, verdicts

Array = NDArray[np.float64]

APART, END = "passes apart", "known end"
_TOO_FAR = 3.0
"""Passes, or a closure, that differ by more than so many standard uncertainties disagree: normal errors do so in three
cases of a thousand."""
_GRAIN = 1e-5
"""Passes that agree as well as this never disagree [m]: the corners of the winch's ramps."""
OWN = frozenset({RANDOM, MISSING, JUMPED})
"""What a pass gathers for itself."""
_OF_SLOPE = frozenset({DEPTH, BENDS, COUNTER})
"""What follows the slope of the guide at a station, which says little of the slope at another."""


def closure(stations: tuple[Station, ...]) -> Closure | None:
    """Compare the first pass down with the pass up after it, at the shallowest station of both.

    Parameters
    ----------
    stations : tuple of Station
        Of a run.

    Returns
    -------
    Closure or None
        Up less down [m]; what the moving line predicts stands beside it, and only the difference of the two is error.
    """
    pair = _pair(stations)
    if pair is None:
        return None
    down, up = pair
    first, last = down[min(down)], up[min(down)]
    return Closure(
        depth=first.depth,
        east=last.measured_east - first.measured_east,
        north=last.measured_north - first.measured_north,
        expected_east=last.expected_east - first.expected_east,
        expected_north=last.expected_north - first.expected_north,
    )


def _pair(stations: tuple[Station, ...]) -> tuple[dict[float, Station], dict[float, Station]] | None:
    """Return the stations that the first pass down and the pass up after it have in common, by depth."""
    down = {one.depth: one for one in stations if one.passing == 0 and one.direction == "down"}
    up = {one.depth: one for one in stations if one.passing == 1 and one.direction == "up"}
    if down and up and max(down) > max(up):
        # The pass up begins where the pass down ends: its deepest station is the sum's own turning point.
        up[max(down)] = down[max(down)]
    common = sorted(down.keys() & up.keys())
    if not common:
        return None
    return {z: down[z] for z in common}, {z: up[z] for z in common}


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class _Line:
    """A best estimate in the making, by depth: residual and apart of shape (2, n), by name parts of shape (2, n) [m].

    And by name the correlation of the two parts, shape (n,); 0 of what is not named there.
    """

    depth: Array
    residual: Array
    parts: dict[str, Array]
    correlations: dict[str, Array]
    passes: int
    apart: Array
    tied: bool = False


def best_estimate(
    stations: tuple[Station, ...], assumptions: Assumptions
) -> tuple[tuple[Best, ...], tuple[str, ...]]:
    """Put the first two passes and a known end together.

    Parameters
    ----------
    stations : tuple of Station
        Of a guided run; those of other kinds give nothing.
    assumptions : Assumptions
        Known end, limits.

    Returns
    -------
    best : tuple of Best
        By depth; none from one pass without a known end.
    notes : tuple of str
        What a reader must know of it.

    Notes
    -----
    The pass up is freed from its misclosure: it is tied to the pass down at the shallowest common station c,
    u'(z) = u(z) - [u(c) - d(c)], and the best estimate is (d + u')/2. What each pass gathers for itself (random errors,
    missing readings, jumps) is independent: half the root of the squares of both, that of u' being what came to it
    between z and c; where the passes are alike a fall by √2. A zero offset adds z0 (z - c) to either pass if both were
    made in the same face, and stays; in opposite faces it adds -z0 (z - c) to u' and cancels. Scale, azimuth, depth
    and what is expected are common to both, and stay. Where the passes differ by more than 3 standard uncertainties,
    half the difference is added: one of them is wrong.
    """
    if assumptions.run.kind != "guided":
        return (), ()
    pair = _pair(stations)
    if pair is not None and len(pair[0]) < 2:
        return (), ()
    notes: list[str] = []
    line = _one_pass(stations) if pair is None else _two_passes(pair, assumptions, notes)
    if line is None:
        return (), ()
    line = _tied(line, assumptions, notes)
    if line.passes == 1 and not line.tied:
        return (), ()
    return _told(line, stations), tuple(notes)


def _table(stations: list[Station]) -> tuple[Array, Array, dict[str, Array], dict[str, Array]]:
    """Return depth, residual, and by input parts and their correlation of stations."""
    names = dict.fromkeys(name for one in stations for name in one.inputs)
    parts = {name: np.zeros((2, len(stations))) for name in names}
    correlations = {name: np.zeros(len(stations)) for name in names}
    for at, one in enumerate(stations):
        for name, part in zip(one.inputs, one.parts, strict=True):
            parts[name][:, at] = part
        for name, together in zip(one.inputs, one.correlations, strict=False):
            correlations[name][at] = together
    residual = np.array([[one.residual_east, one.residual_north] for one in stations]).T
    return np.array([one.depth for one in stations]), residual, parts, correlations


def _one_pass(stations: tuple[Station, ...]) -> _Line | None:
    only = sorted((one for one in stations if one.passing == 0), key=lambda one: one.depth)
    if not only:
        return None
    depth, residual, parts, correlations = _table(only)
    return _Line(
        depth=depth,
        residual=residual,
        parts=parts,
        correlations=correlations,
        passes=1,
        apart=np.zeros(residual.shape),
    )


def _two_passes(
    pair: tuple[dict[float, Station], dict[float, Station]], assumptions: Assumptions, notes: list[str]
) -> _Line:
    down, up = (list(one.values()) for one in pair)
    depth, first, parts, correlations = _table(down)
    _, second, others, together = _table(up)
    correlations = {**together, **correlations}
    apart = second - second[:, :1] - (first - first[:, :1])
    opposite = _opposite(down, up)
    kept: dict[str, Array] = {}
    zeros = np.zeros(first.shape)
    for name in dict.fromkeys([*parts, *others]):
        alone = 0.5 * np.hypot(parts.get(name, zeros), _tied_part(others.get(name, zeros)))
        kept[name] = alone if name in OWN else parts.get(name, zeros)
    best = first + 0.5 * apart
    if opposite:
        kept[ZERO] = zeros
        axes, correlations[SCALE] = _of_axes(best, assumptions)
        kept |= axes
    own = [part for name, part in kept.items() if name in OWN]
    # The parts kept are those of the mean of both, half of what their difference has.
    u_apart = 2.0 * combined([*own, np.full(first.shape, _GRAIN)])
    odd = _freed(depth, apart, opposite=opposite)
    disagree = np.abs(odd) > _TOO_FAR * u_apart
    if disagree.any():
        # Either pass may be the wrong one: the truth lies to one side or to the other along what parts them.
        kept[APART] = np.where(disagree, -0.5 * odd, 0.0)
        correlations[APART] = np.ones(depth.size)
        far = depth[disagree.any(axis=0)]
        notes.append(
            f"down and up pass disagree at {far.size} of {depth.size} stations, first at {far[0]:g} m"
        )
    return _Line(depth=depth, residual=best, parts=kept, correlations=correlations, passes=2, apart=apart)


def _of_axes(best: Array, assumptions: Assumptions) -> tuple[dict[str, Array], Array]:
    """Return what the axes put into an offset that is free of a zero error, and the scales' correlation."""
    guide = assumptions.guide
    gone = best - np.array([[guide.start_east], [guide.start_north]])
    parts = dict(zip((SCALE, AZIMUTH), of_axes(assumptions.instrument, gone), strict=True))
    return parts, correlation_of_scales(assumptions.instrument, gone)


def _tied_part(up: Array) -> Array:
    """Return what the pass up gathers between each depth and the shallowest, which it is tied at."""
    tied: Array = np.sqrt(np.maximum(up[:, :1] ** 2 - up**2, 0.0))
    return tied


def _opposite(down: list[Station], up: list[Station]) -> bool:
    """Whether every pair of stations was made in opposite faces."""
    return all(
        one.face is not None and other.face is not None and abs(abs(one.face - other.face) - pi) < pi / 4.0
        for one, other in zip(down, up, strict=True)
        if one is not other
    )


def _freed(depth: Array, apart: Array, *, opposite: bool) -> Array:
    """Return what a zero offset does not explain of the difference of two passes."""
    if not opposite:
        return apart
    below = depth - depth[0]
    size = float(np.sum(below**2))
    slope = apart @ below / size if size else np.zeros(2)
    freed: Array = apart - slope[:, None] * below
    return freed


def _tied(line: _Line, assumptions: Assumptions, notes: list[str]) -> _Line:
    """Distribute the misclosure at a known end over depth.

    Notes
    -----
    What is taken away is the misclosure times t = (z - z0)/(Z - z0), whatever made it, also an error of what is
    expected. One in proportion to depth, such as a zero offset, goes whole; of any other part p(z) there stays
    p(z) - t p(Z), of a random walk with variance v the bridge v(z) (1 - 2t) + t² v(Z). Scale and azimuth err in
    proportion to an offset, and stay with what of it is no straight line to the end. Parts that follow the slope at a
    station are taken as correlated by t with that at the end; east and north keep the signs that they have at the
    station. The end's own uncertainty comes in by t.
    """
    guide = assumptions.guide
    if guide.end_east is None or guide.end_north is None or line.depth.size < 2:
        return line
    end = np.array([guide.end_east, guide.end_north])
    misclosure = line.residual[:, -1] - end
    u_end = combined([part[:, -1] for part in line.parts.values()])
    notes.append(
        f"tied to the known end at {line.depth[-1]:g} m: {misclosure[0] * 1e3:.1f} mm east and "
        f"{misclosure[1] * 1e3:.1f} mm north of misclosure spread over depth"
    )
    if np.any(np.abs(misclosure) > _TOO_FAR * np.hypot(u_end, guide.u_end)):
        notes.append("the misclosure at the known end is larger than three times its uncertainty")
    east, north = spread_misclosure(
        line.depth, line.residual[0], line.residual[1], float(end[0]), float(end[1])
    )
    t = (line.depth - line.depth[0]) / (line.depth[-1] - line.depth[0])
    parts = {name: _bridged(name, part, t) for name, part in line.parts.items()}
    start = line.residual[:, :1]
    axes, scales = _of_axes(line.residual - t * (line.residual[:, -1:] - start), assumptions)
    parts |= axes
    parts[END] = guide.u_end * np.stack([t, t])
    correlations = {**line.correlations, SCALE: scales, AZIMUTH: np.ones(t.size)}
    return replace(line, residual=np.stack([east, north]), parts=parts, correlations=correlations, tied=True)


def _bridged(name: str, part: Array, t: Array) -> Array:
    if name == RANDOM:
        left: Array = np.sqrt(np.maximum(part**2 * (1.0 - 2.0 * t) + t**2 * part[:, -1:] ** 2, 0.0))
        return left
    end = t * part[:, -1:]
    if name in _OF_SLOPE:
        open_: Array = np.sqrt(part**2 - 2.0 * t * np.abs(part * end) + end**2)
        return np.copysign(open_, part)
    return part - end


def _told(line: _Line, stations: tuple[Station, ...]) -> tuple[Best, ...]:
    limits = {one.depth: (one.warning, one.action) for one in stations}
    parts = np.stack(list(line.parts.values()))
    u = combined(parts)
    none = np.zeros(line.depth.size)
    shared = joint(parts, np.stack([line.correlations.get(name, none) for name in line.parts]))
    length, u_length = horizontal(line.residual[0], line.residual[1], u[0], u[1], shared)
    words = verdicts(length, u_length, [limits[z][1] for z in line.depth.tolist()])
    names = tuple(line.parts)
    by_station = parts.transpose(2, 0, 1).tolist()
    rows = np.stack([line.depth, *line.residual, *u, *line.apart, shared]).T.tolist()
    return tuple(
        Best(
            depth=row[0],
            east=row[1],
            north=row[2],
            u_east=row[3],
            u_north=row[4],
            warning=limits[row[0]][0],
            action=limits[row[0]][1],
            verdict=words[at],
            passes=line.passes,
            apart_east=row[5],
            apart_north=row[6],
            tied=line.tied,
            inputs=names,
            parts=tuple((east, north) for east, north in by_station[at]),
            covariance=row[7],
        )
        for at, row in enumerate(rows)
    )


def face_notes(faces: FaceSums | None, instrument: Instrument) -> tuple[str, ...]:
    """Say what the faces show: zeros that the stated uncertainty does not explain, and suspect depths."""
    if faces is None:
        return ()
    notes = []
    for axis, zero, u in (("A", faces.zero_a, faces.u_zero_a), ("B", faces.zero_b, faces.u_zero_b)):
        if isfinite(zero) and abs(zero) > _TOO_FAR * hypot(u, instrument.u_zero):
            notes.append(
                f"the faces show a zero on {axis} of {zero / DEGREE:.4f} ± {COVERAGE_FACTOR * u / DEGREE:.4f}°, "
                "beyond its stated uncertainty: what was summed in one face is off by it, both together are not"
            )
    if faces.suspect_depths:
        shown = ", ".join(f"{z:g}" for z in faces.suspect_depths[:8])
        more = f" and {len(faces.suspect_depths) - 8} more" if len(faces.suspect_depths) > 8 else ""
        notes.append(f"face sums stand apart at {shown}{more} m")
    return tuple(notes)
