"""What a comparison of two surveys says, in a reader's units: the outcome and the table; draws nothing."""

from collections.abc import Sequence
from itertools import combinations
from math import hypot

from eastfall.io.compare import Comparison, DepthDifference, between_passes
from eastfall.physics.budget import COVERAGE_FACTOR
from eastfall.physics.findings import Station
from eastfall.physics.verdict import horizontal
from eastfall.tui import words
from eastfall.tui.roles import Role
from eastfall.tui.units import METRIC, Units
from eastfall.tui.widgets.table import fitting, fixed

ORDERS = ("depth", "difference")
_WIDTHS = (7, 13, 13, 14, 6, 6, 5)
_RANKS = (0, 6, 5, 4, 2, 3, 1)
"""What stays the longest in a narrow window: depth, whether it moved, how far."""
_MOST_PAIRS = 45
_MOVED = {"yes": "MOVED", "no": "no", "unknown": "?"}


def passes(stations: Sequence[Station]) -> tuple[Comparison, ...]:
    """Return the comparisons of any two passes with depths in common, the newest pair first."""
    numbers = sorted({one.passing for one in stations})[-10:]
    pairs = sorted(combinations(numbers, 2), key=lambda pair: (-pair[1], -pair[0]))[:_MOST_PAIRS]
    found = (between_passes(stations, first, second) for first, second in pairs)
    return tuple(one for one in found if one is not None)


def outcome(one: Comparison, units: Units = METRIC) -> str:
    """Return what came out in one line."""
    known = sum(row.moved != "unknown" for row in one.rows)
    if not known:
        return f"NOT KNOWN whether anything moved: no uncertainty at any of {len(one.rows)} depths"
    if not one.moved:
        return f"NOTHING MOVED beyond its uncertainty at any of {known} depths"
    most = max(one.moved, key=length)
    return (
        f"MOVED at {len(one.moved)} of {len(one.rows)} depths, most at {units.depth(most.depth)} {units.long}: "
        f"{units.offset(length(most))} {units.short} toward {words.bearing(most.east, most.north)}"
    )


def length(one: DepthDifference) -> float:
    """Return the horizontal length of a difference [m]."""
    return hypot(one.east, one.north)


def expanded(one: DepthDifference) -> float:
    """Return the expanded uncertainty (k = 2) of that length [m]."""
    return COVERAGE_FACTOR * float(
        horizontal(one.east, one.north, one.u_east, one.u_north, one.covariance)[1]
    )


def head(units: Units = METRIC, room: int = 72) -> str:
    """Return the line over the table, as far as there is room."""
    names = (
        units.depth_head,
        f"first E N {units.short}",
        f"second E N {units.short}",
        f"change E N {units.short}",
        units.short,
        f"± {units.short}",
        "moved",
    )
    return fixed(names, _WIDTHS, fitting(_WIDTHS, _RANKS, room))


def row(one: DepthDifference, units: Units = METRIC, room: int = 72) -> tuple[str, Role]:
    """Return one depth as a line of the table."""
    cells = (
        units.depth(one.depth),
        f"{units.signed(one.first_east)} {units.signed(one.first_north)}",
        f"{units.signed(one.second_east)} {units.signed(one.second_north)}",
        f"{units.signed(one.east)} {units.signed(one.north)}",
        units.offset(length(one)),
        units.offset(expanded(one)),
        _MOVED[one.moved],
    )
    shown = fitting(_WIDTHS, _RANKS, room)
    return fixed(cells, _WIDTHS, shown), Role.ACTION if one.moved == "yes" else Role.TEXT


def chosen(one: Comparison, order: str, *, only_moved: bool) -> list[DepthDifference]:
    """Return the rows in an order, all or only where it moved."""
    rows = [row for row in one.rows if not only_moved or row.moved == "yes"]
    if order == "difference":
        rows.sort(key=length, reverse=True)
    return rows
