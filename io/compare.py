"""Two surveys of one shaft held against each other by depth: has anything moved? Stations in, differences out."""

from collections.abc import Callable, Sequence
from dataclasses import dataclass
from math import hypot, isfinite
from typing import Any, Literal

import numpy as np
from numpy.typing import NDArray

from eastfall.io.errors import InputError
from eastfall.io.reduce import Reduction
from eastfall.io.tables import millimetres, number
from eastfall.physics.apart import in_opposite_faces, u_apart
from eastfall.physics.budget import COVERAGE_FACTOR
from eastfall.physics.findings import Station
from eastfall.physics.verdict import horizontal

DIFFERENCE_KEYS = (
    "depth_m",
    "first_east_mm",
    "first_north_mm",
    "second_east_mm",
    "second_north_mm",
    "difference_east_mm",
    "difference_north_mm",
    "u_east_mm",
    "u_north_mm",
    "moved",
)

_ONE_PLACE = 1.7e-5
"""Latitudes that differ by more than this are of different shafts [rad]: a tenth of a kilometre."""

Column = NDArray[np.float64]
Moved = Literal["yes", "no", "unknown"]


@dataclass(frozen=True, slots=True, kw_only=True)
class DepthDifference:
    """Second survey less first at one depth; lengths in metres."""

    depth: float
    first_east: float
    first_north: float
    second_east: float
    second_north: float
    u_east: float
    u_north: float
    covariance: float = 0.0
    """Of the difference east and north [m²]."""

    @property
    def east(self) -> float:
        """Second less first [m]."""
        return self.second_east - self.first_east

    @property
    def north(self) -> float:
        """Second less first [m]."""
        return self.second_north - self.first_north

    @property
    def moved(self) -> Moved:
        """Whether the horizontal difference exceeds its expanded uncertainty 2u; unknown where that is."""
        length, u = horizontal(self.east, self.north, self.u_east, self.u_north, self.covariance)
        if not (isfinite(length) and isfinite(u)):
            return "unknown"
        return "yes" if float(length) > COVERAGE_FACTOR * float(u) else "no"


@dataclass(frozen=True, slots=True, kw_only=True)
class Comparison:
    """Differences by depth between two surveys."""

    first: str
    """What is compared, in words."""
    second: str
    rows: tuple[DepthDifference, ...]
    left_out: int
    """Stations of the first that the second does not reach."""
    notes: tuple[str, ...] = ()

    @property
    def moved(self) -> tuple[DepthDifference, ...]:
        """Where the difference is more than its uncertainty explains."""
        return tuple(one for one in self.rows if one.moved == "yes")


def compare_runs(first: Reduction, second: Reduction) -> Comparison:
    """Compare two runs of one shaft by their residuals.

    Parameters
    ----------
    first, second : Reduction
        Earlier and later run; each one's stations of all passes are put together by depth.

    Returns
    -------
    Comparison
        Second less first at the first's depths, with both uncertainties combined as uncorrelated.

    Raises
    ------
    InputError
        The runs have no depth in common.
    """
    notes = _unlike(first, second)
    rows, left_out = _between(first.result.stations, second.result.stations)
    if not rows:
        raise InputError(
            f"{first.path} and {second.path} have no depth in common; expected runs of one shaft"
        )
    return Comparison(
        first=_named(first),
        second=_named(second),
        rows=rows,
        left_out=left_out,
        notes=(*notes, *_unknown(rows)),
    )


def _unlike(first: Reduction, second: Reduction) -> list[str]:
    """Return why the two may be no two surveys of one thing, or no survey to go by."""
    here, there = first.site.assumptions, second.site.assumptions
    notes = []
    if here.site.name != there.site.name:
        named = (one.site.name or "unnamed" for one in (here, there))
        notes.append("the runs name different shafts: {} and {}".format(*named))
    if abs(here.site.latitude - there.site.latitude) > _ONE_PLACE:
        degrees = (f"{np.degrees(one.site.latitude):.4f}°" for one in (here, there))
        notes.append("the runs are at different latitudes: {} and {}".format(*degrees))
    if here.run.reference != there.run.reference:
        notes.append("the runs are measured from different reference lines")
    if first.kind != second.kind:
        notes.append(f"the runs are of different kinds: {first.kind} and {second.kind}")
    notes += [
        f"the record {one.path.name} is changed: {one.verification.reason}"
        for one in (first, second)
        if one.verification is not None and one.verification.state == "changed"
    ]
    return notes


def _unknown(rows: Sequence[DepthDifference]) -> list[str]:
    count = sum(one.moved == "unknown" for one in rows)
    return [f"no uncertainty is known at {count} of {len(rows)} depths"] if count else []


def compare_passes(run: Reduction, first: int = 0, second: int = 1) -> Comparison:
    """Compare two passes of one run; parameters count passes from 0, returns and raises as `compare_runs`."""
    stations = run.result.stations
    found = between_passes(stations, first, second, _named(run))
    if found is None:
        passes = sorted({one.passing + 1 for one in stations})
        raise InputError(
            f"{run.path}: passes {first + 1} and {second + 1} have no depth in common; it has {passes}"
        )
    return found


def between_passes(
    stations: Sequence[Station], first: int, second: int, name: str = "this run"
) -> Comparison | None:
    """Compare two passes of the stations of one run; passes count from 0, None without a depth in common.

    What both passes share cancels in their difference and is no part of its uncertainty.
    """
    one, other = ([each for each in stations if each.passing == number] for number in (first, second))
    opposite = in_opposite_faces(one, other)
    rows, left_out = _between(one, other, lambda here, there: _of_one_run(here, there, opposite=opposite))
    if not rows:
        return None
    notes = ("both passes share the instrument's zero and scale: what is common to both does not show here",)
    return Comparison(
        first=f"{name}, pass {first + 1}",
        second=f"{name}, pass {second + 1}",
        rows=rows,
        left_out=left_out,
        notes=(*notes, *_unknown(rows)),
    )


def _named(run: Reduction) -> str:
    started = f", {run.started_at:%Y-%m-%d %H:%M} UTC" if run.started_at else ""
    return f"{run.path.name}{started}"


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class _Side:
    """One survey by rising depth: residual and u of shape (2, n), parts of u by input of the same shape.

    Of residual and of each part the correlation of east and north, shape (n,): read between depths it stays one.
    """

    depth: Column
    residual: Column
    u: Column
    correlation: Column
    parts: dict[str, Column]
    correlations: dict[str, Column]

    def at(self, depth: Column) -> "_Side":
        """Return what it says at other depths within its reach, linearly between its own."""

        def one(row: Column) -> Column:
            return np.interp(depth, self.depth, row)

        def read(rows: Column) -> Column:
            return np.array([one(row) for row in rows])

        return _Side(
            depth=depth,
            residual=read(self.residual),
            u=read(self.u),
            correlation=one(self.correlation),
            parts={name: read(part) for name, part in self.parts.items()},
            correlations={name: one(part) for name, part in self.correlations.items()},
        )


def _by_depth(stations: Sequence[Station]) -> _Side:
    """Put all visits to each depth together.

    Visits to one depth share most of what makes them uncertain, so their mean is not taken to be any surer.
    """
    depths = sorted({one.depth for one in stations})
    groups = [[one for one in stations if one.depth == depth] for depth in depths]

    def mean(of: Callable[[Station], tuple[float, float] | float]) -> Column:
        return np.array([np.mean([of(one) for one in group], axis=0) for group in groups]).T

    def part_of(name: str) -> Callable[[Station], tuple[float, float]]:
        return lambda one: dict(zip(one.inputs, one.parts, strict=True)).get(name, (0.0, 0.0))

    def correlation_of(name: str) -> Callable[[Station], float]:
        return lambda one: dict(zip(one.inputs, one.correlations, strict=False)).get(name, 0.0)

    names = dict.fromkeys(name for one in stations for name in one.inputs)
    return _Side(
        depth=np.array(depths),
        residual=mean(lambda one: (one.residual_east, one.residual_north)),
        u=mean(lambda one: (one.u_east, one.u_north)),
        correlation=mean(_correlation),
        parts={name: mean(part_of(name)) for name in names},
        correlations={name: mean(correlation_of(name)) for name in names},
    )


def _correlation(one: Station) -> float:
    sizes = one.u_east * one.u_north
    return one.covariance / sizes if sizes else 0.0


def _of_one_run(first: _Side, second: _Side, *, opposite: bool) -> tuple[Column, Column]:
    if not first.parts and not second.parts:
        return _uncorrelated(first, second)
    together = {**second.correlations, **first.correlations}
    return u_apart(first.parts, second.parts, together, opposite=opposite)


def _uncorrelated(first: _Side, second: _Side) -> tuple[Column, Column]:
    """Return u and the covariance of the difference of two surveys that have nothing in common."""
    return np.hypot(first.u, second.u), sum(one.correlation * one.u[0] * one.u[1] for one in (first, second))


def _between(
    first: Sequence[Station],
    second: Sequence[Station],
    u_of: Callable[[_Side, _Side], tuple[Column, Column]] = _uncorrelated,
) -> tuple[tuple[DepthDifference, ...], int]:
    if not first or not second:
        return (), len(first)
    whole, other = _by_depth(first), _by_depth(second)
    inside = (whole.depth >= other.depth[0]) & (whole.depth <= other.depth[-1])
    if not inside.any():
        return (), len(whole.depth)
    own = whole.at(whole.depth[inside])
    there = other.at(own.depth)
    u, shared = u_of(own, there)
    table = np.vstack([own.depth, own.residual, there.residual, u, shared])
    rows = tuple(
        DepthDifference(
            depth=z,
            first_east=first_east,
            first_north=first_north,
            second_east=second_east,
            second_north=second_north,
            u_east=u_east,
            u_north=u_north,
            covariance=covariance,
        )
        for z, first_east, first_north, second_east, second_north, u_east, u_north, covariance in table.T.tolist()
    )
    return rows, int(np.count_nonzero(~inside))


def difference_rows(comparison: Comparison) -> list[dict[str, Any]]:
    """Return the table of a comparison: plain dicts in millimetres by `DIFFERENCE_KEYS`."""
    return [
        {
            "depth_m": number(one.depth),
            "first_east_mm": millimetres(one.first_east),
            "first_north_mm": millimetres(one.first_north),
            "second_east_mm": millimetres(one.second_east),
            "second_north_mm": millimetres(one.second_north),
            "difference_east_mm": millimetres(one.east),
            "difference_north_mm": millimetres(one.north),
            "u_east_mm": millimetres(one.u_east),
            "u_north_mm": millimetres(one.u_north),
            "moved": one.moved,
        }
        for one in comparison.rows
    ]


def in_words(comparison: Comparison) -> str:
    """Return the outcome in one line."""
    moved, all_rows = comparison.moved, comparison.rows
    if not moved:
        return f"No difference beyond its uncertainty at any of {len(all_rows)} depths."
    most = max(moved, key=lambda one: hypot(one.east, one.north))
    return (
        f"Different beyond the uncertainty at {len(moved)} of {len(all_rows)} depths; most at {most.depth:.1f} m: "
        f"{1000 * most.east:+.1f} mm east, {1000 * most.north:+.1f} mm north."
    )
