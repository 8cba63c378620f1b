"""Two surveys of one shaft held against each other by depth: has anything moved? Stations in, differences out."""

from collections.abc import Sequence
from dataclasses import dataclass
from math import hypot
from typing import Any, Literal

import numpy as np
from numpy.typing import NDArray

from eastfall.io.errors import InputError
from eastfall.io.reduce import Reduction
from eastfall.io.tables import millimetres, number
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
_FIELDS = ("residual_east", "residual_north", "u_east", "u_north")

Column = NDArray[np.float64]
Moved = Literal["yes", "no"]


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
        """Whether the horizontal difference exceeds its expanded uncertainty 2u."""
        length, u = horizontal(self.east, self.north, self.u_east, self.u_north)
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
    notes = []
    if first.site.assumptions.run.reference != second.site.assumptions.run.reference:
        notes.append("the runs are measured from different reference lines")
    if first.kind != second.kind:
        notes.append(f"the runs are of different kinds: {first.kind} and {second.kind}")
    rows, left_out = _between(first.result.stations, second.result.stations)
    if not rows:
        raise InputError(
            f"{first.path} and {second.path} have no depth in common; expected runs of one shaft"
        )
    return Comparison(
        first=_named(first), second=_named(second), rows=rows, left_out=left_out, notes=tuple(notes)
    )


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
    """Compare two passes of the stations of one run; passes count from 0, None without a depth in common."""
    sides = [[one for one in stations if one.passing == number] for number in (first, second)]
    rows, left_out = _between(*sides)
    if not rows:
        return None
    notes = ("both passes share the instrument's zero and scale: what is common to both does not show here",)
    return Comparison(
        first=f"{name}, pass {first + 1}",
        second=f"{name}, pass {second + 1}",
        rows=rows,
        left_out=left_out,
        notes=notes,
    )


def _named(run: Reduction) -> str:
    started = f", {run.started_at:%Y-%m-%d %H:%M} UTC" if run.started_at else ""
    return f"{run.path.name}{started}"


def _by_depth(stations: Sequence[Station]) -> tuple[Column, Column]:
    """Return rising depths, shape (n,), and mean residuals with uncertainties there, shape (4, n)."""
    depths = sorted({one.depth for one in stations})
    groups = [[one for one in stations if one.depth == depth] for depth in depths]
    # Visits to one depth share most of what makes them uncertain, so their mean is not taken to be any surer.
    table = [[float(np.mean([getattr(one, name) for one in group])) for group in groups] for name in _FIELDS]
    return np.array(depths), np.array(table).reshape(len(_FIELDS), len(depths))


def _between(first: Sequence[Station], second: Sequence[Station]) -> tuple[tuple[DepthDifference, ...], int]:
    if not first or not second:
        return (), len(first)
    depth, own = _by_depth(first)
    other_depth, other = _by_depth(second)
    inside = (depth >= other_depth[0]) & (depth <= other_depth[-1])
    there = np.array([np.interp(depth[inside], other_depth, row) for row in other])
    own = own[:, inside]
    rows = tuple(
        DepthDifference(
            depth=float(z),
            first_east=a[0],
            first_north=a[1],
            second_east=b[0],
            second_north=b[1],
            u_east=hypot(a[2], b[2]),
            u_north=hypot(a[3], b[3]),
        )
        for z, a, b in zip(depth[inside], own.T.tolist(), there.T.tolist(), strict=True)
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
