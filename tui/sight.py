"""Where the eye is: following the newest or looking back at a station, how much depth is in view; knows no screen."""

from dataclasses import dataclass, replace
from math import isnan
from typing import TYPE_CHECKING, Literal

from eastfall.physics.findings import Standing, Station

if TYPE_CHECKING:
    from eastfall.tui.store import Snapshot

Layout = Literal["all", "depth", "plan", "time"]
LEAST_SPAN = 2.0
"""Closest zoom: metres of depth in view."""


@dataclass(frozen=True, slots=True, kw_only=True)
class Sight:
    """How the run is looked at."""

    station: int | None = None
    """Index of the station looked back at; None follows the newest reading."""
    span: float | None = None
    """Metres of depth in view; None is the whole shaft."""
    top: float | None = None
    """Depth at the upper edge of the view [m], where the pointer fixed it; None keeps what is looked at in view."""
    residual: bool = False
    """Draw the residual about zero instead of measured and expected."""
    layout: Layout = "all"
    wall: bool = False
    """Draw the plan at the scale of the shaft wall."""
    extras: bool = True
    """Draw where a bob would hang and a dropped body would be."""

    @property
    def follows(self) -> bool:
        """Whether the newest reading is shown."""
        return self.station is None


def subject(sight: Sight, snapshot: "Snapshot") -> Standing | Station | None:
    """Return what the answer line, the figures and the plan speak of."""
    if sight.station is None or not snapshot.stations:
        return snapshot.standing
    return snapshot.stations[min(sight.station, len(snapshot.stations) - 1)]


def stepped(sight: Sight, snapshot: "Snapshot", by: int) -> Sight:
    """Look `by` stations up (negative) or down the shaft; without stations nothing changes."""
    order = by_depth(snapshot.stations)
    if not order:
        return sight
    if sight.station is None:
        depth = snapshot.standing.depth if snapshot.standing else float("inf")
        place = _nearest(snapshot.stations, order, depth, up=by < 0)
    else:
        place = order.index(min(sight.station, len(order) - 1)) + by
    return replace(sight, station=order[min(max(place, 0), len(order) - 1)])


def by_depth(stations: tuple[Station, ...]) -> list[int]:
    """Return station indices from the collar down; stations of one depth in the order of time."""
    return sorted(range(len(stations)), key=lambda index: (stations[index].depth, index))


def _nearest(stations: tuple[Station, ...], order: list[int], depth: float, *, up: bool) -> int:
    """Return the place in `order` of the newest station of the depth that lies next to `depth`."""
    if up:
        below = [place for place, index in enumerate(order) if stations[index].depth <= depth]
        return below[-1] if below else 0
    above = [place for place, index in enumerate(order) if stations[index].depth >= depth]
    return above[0] if above else len(order) - 1


def at_depth(sight: Sight, snapshot: "Snapshot", depth: float) -> Sight:
    """Look at the newest station nearest to a depth; without stations nothing changes."""
    if not snapshot.stations:
        return sight
    nearest = min(
        range(len(snapshot.stations)), key=lambda index: (abs(snapshot.stations[index].depth - depth), -index)
    )
    return replace(sight, station=nearest)


def zoomed(sight: Sight, whole: float, factor: float) -> Sight:
    """Show `factor` times as much depth; as much as the whole shaft or more is the whole shaft."""
    span = (sight.span if sight.span is not None else whole) * factor
    whole_seen = span >= whole
    return replace(sight, span=None if whole_seen else max(span, min(LEAST_SPAN, whole)), top=None)


def zoomed_about(sight: Sight, whole: float, factor: float, view: tuple[float, float], depth: float) -> Sight:
    """Zoom so that a depth stays where it is on the screen.

    Parameters
    ----------
    sight : Sight
        Before.
    whole : float
        Depth of the shaft [m].
    factor : float
        How many times as much depth to show.
    view : tuple of float
        Top and bottom now in view [m].
    depth : float
        Under the pointer [m].
    """
    closer = zoomed(sight, whole, factor)
    if closer.span is None:
        return closer
    part = (depth - view[0]) / (view[1] - view[0])
    top = min(max(depth - part * closer.span, 0.0), whole - closer.span)
    return replace(closer, top=top)


def window(sight: Sight, whole: float, focus: float) -> tuple[float, float]:
    """Return the top and bottom depth [m] in view, `focus` well inside and no view past the collar or bottom."""
    if sight.span is not None and sight.top is not None:
        return sight.top, sight.top + sight.span
    if sight.span is None or isnan(focus):
        return 0.0, whole
    top = min(max(0.0, focus - 0.6 * sight.span), max(0.0, whole - sight.span))
    return top, top + sight.span
