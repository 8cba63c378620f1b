"""Findings as plain sentences: every number with its unit, its sign or direction, and the line it is reckoned from."""

import re
from math import atan2, degrees, hypot, isfinite, log
from typing import TYPE_CHECKING, Protocol

from eastfall.physics.budget import COVERAGE_FACTOR
from eastfall.physics.findings import AlarmChange, AlarmView, RestPoint, Standing, Station
from eastfall.physics.verdict import horizontal
from eastfall.tui.units import METRIC, NONE, Units, lengths_in

if TYPE_CHECKING:
    from eastfall.physics.settings import Kind, Reference

REFERENCE: "dict[Reference, str]" = {
    "straight": "straight vertical",
    "field-line": "curved vertical",
    "hung-line": "hung line",
}
KIND: "dict[Kind, str]" = {"guided": "guided run", "hung": "hung line", "drop": "drop"}
_NO_MOVE: "dict[Kind, str]" = {
    "guided": "Do not move it yet: how far the reading can be trusted is not known.",
    "hung": "Let it swing: too little is seen of it to tell where it comes to rest.",
    "drop": "Stand clear: nothing to move while bodies fall.",
}
UNSEEN = 0.00005
"""A residual that is shown as 0.0 mm is nothing to move by [m]."""
VERDICT = {"within": "WITHIN", "over": "OVER", "undecided": "UNDECIDED"}


class Judged(Protocol):
    """What a standing answer and a closed station have in common."""

    @property
    def depth(self) -> float: ...  # noqa: D102
    @property
    def residual_east(self) -> float: ...  # noqa: D102
    @property
    def residual_north(self) -> float: ...  # noqa: D102
    @property
    def u_east(self) -> float: ...  # noqa: D102
    @property
    def u_north(self) -> float: ...  # noqa: D102
    @property
    def covariance(self) -> float: ...  # noqa: D102
    @property
    def warning(self) -> float: ...  # noqa: D102
    @property
    def action(self) -> float: ...  # noqa: D102
    @property
    def verdict(self) -> str: ...  # noqa: D102


def bearing(east: float, north: float) -> str:
    """Return the direction of an offset, clockwise from north, as three digits and a degree sign."""
    if not (isfinite(east) and isfinite(north)) or (east == 0.0 and north == 0.0):
        return NONE
    return f"{round(degrees(atan2(east, north))) % 360:03d}°"


def residual_length(one: Judged) -> float:
    """Return the length of the horizontal residual [m]."""
    return hypot(one.residual_east, one.residual_north)


def expanded(one: Judged) -> float:
    """Return the expanded uncertainty (k = 2) of the length of the residual [m]."""
    _, u = horizontal(one.residual_east, one.residual_north, one.u_east, one.u_north, one.covariance)
    return COVERAGE_FACTOR * float(u)


def decision(one: Judged) -> str:
    """Return the verdict against the action limit in capitals; past the warning limit it says so besides."""
    warned = one.verdict == "within" and residual_length(one) > one.warning
    return VERDICT[one.verdict] + (", PAST WARNING" if warned else "")


def answer(one: Judged | None, units: Units = METRIC) -> str:
    """Return the answer as one line."""
    if one is None:
        return "NO ANSWER YET: waiting for the first reading"
    length = residual_length(one)
    if not isfinite(length):
        return f"NO ANSWER {units.depth(one.depth)} {units.long}: no offset in the readings"
    way = bearing(one.residual_east, one.residual_north)
    return (
        f"{decision(one)} {units.depth(one.depth)} {units.long}: residual {_size(one, length, units)}"
        f"{f' toward {way}' if way != NONE else ''}, limit {units.offset(one.action)} {units.short}"
    )


def _size(one: Judged, length: float, units: Units) -> str:
    """Return a residual with its uncertainty and the unit."""
    u = expanded(one)
    if not isfinite(u):
        return f"{units.offset(length)} {units.short} (± not known)"
    return f"{units.offset(length)} ± {units.offset(u)} {units.short}"


def steering(one: Standing | None, kind: "Kind", units: Units = METRIC) -> str:
    """Return what to do, as one line."""
    if one is None:
        return "Wait for the first reading."
    if one.hold_still is not None:
        seconds = round(one.hold_still)
        more = f"{seconds} s more closes" if seconds else "the next reading closes"
        return f"Hold still: {more} this station."
    if kind == "hung" and one.rest_point is not None and not one.rest_point.fits:
        why = reworded(one.rest_point.message, units) or "the swing does not fit a free pendulum yet"
        return f"Let it swing: {why}."
    length = residual_length(one)
    if not isfinite(length):
        return "Nothing to steer by: the readings give no offset."
    if kind == "drop" or not isfinite(expanded(one)):
        return _NO_MOVE[kind]
    return _move(one, length, units, of_line=kind == "hung")


def _move(one: Judged, length: float, units: Units, *, of_line: bool) -> str:
    """Return which way and how far to bring a residual to nothing.

    A guide that stands out is moved back. A bob reads the same whether its line hangs off to one side or the mark under
    it stands off to the other, so it is said which of the two goes which way.
    """
    if length <= expanded(one) and one.verdict != "within":
        return (
            f"Do not move it yet: {units.offset(length)} {units.short} is less than its uncertainty, "
            f"± {units.offset(expanded(one))} {units.short}."
        )
    if length <= expanded(one):
        return (
            f"Leave it: {units.offset(length)} {units.short} is less than its uncertainty, "
            f"± {units.offset(expanded(one))} {units.short}."
        )
    if length < UNSEEN:
        return "Leave it: it is off by less than this screen shows."
    back = bearing(-one.residual_east, -one.residual_north)
    places = 0 if length >= 0.002 else 1
    far = f"{units.offset(length, places)} {units.short}"
    if of_line:
        way = bearing(one.residual_east, one.residual_north)
        return f"Move the top of the line {far} toward {back}, or the mark here toward {way}."
    return f"Move {far} toward {back} to meet the expected line."


def pair(east: float, north: float, places: int = 1, units: Units = METRIC) -> str:
    """Return an offset as signed east and north with their letters and the unit."""
    if not (isfinite(east) and isfinite(north)):
        return f"E – N – {units.short}"
    return f"E {units.signed(east, places)} N {units.signed(north, places)} {units.short}"


def taken(one: Station, kind: "Kind") -> str:
    """Return how a station came about: on which pass and whether at rest, or from how many bodies that fell."""
    if kind == "drop":
        return "1 body" if one.readings == 1 else f"{one.readings} bodies"
    return f"{one.direction}, {'at rest' if one.still else 'in passing'}"


def swing(rest: RestPoint | None, units: Units = METRIC) -> str:
    """Return what the swing says of the rest point."""
    if rest is None:
        return "rest point: not enough swing seen yet"
    worst = COVERAGE_FACTOR * max(rest.u_east, rest.u_north)
    parts = [
        f"rest point {pair(rest.east, rest.north, units=units)} ± {units.offset(worst)} {units.short}",
        f"{rest.swings:.1f} full swings seen{_more_swings(rest, units)}",
        period(rest),
        amplitude(rest, units),
    ]
    return ", ".join(filter(None, parts))


def _more_swings(rest: RestPoint, units: Units) -> str:
    """Return how many swings more a rest point needs to be known to half a millimetre."""
    if not isfinite(rest.swings_needed):
        return ""
    more = rest.swings_needed - rest.swings
    wanted = f"± {units.offset(_WANTED)} {units.short}"
    return f", {more:.1f} more for {wanted}" if more > 0.05 else f", enough for {wanted}"


def period(rest: RestPoint) -> str:
    """Return the period against that of a free line, which goes with the root of the length; touching shortens it."""
    if not isfinite(rest.period):
        return ""
    told = f"period {rest.period:.2f} s"
    if isfinite(rest.free_period):
        told += f", a free line {rest.free_period:.2f} s"
    return told + (": MAY BE TOUCHING" if TOUCHING in rest.message else "")


def amplitude(rest: RestPoint, units: Units = METRIC) -> str:
    """Return how far it swings, and how long until it swings by no more than `SMALL`."""
    if not isfinite(rest.amplitude):
        return ""
    told = f"swings {units.offset(rest.amplitude)} {units.short} to each side"
    small = f"{units.offset(SMALL)} {units.short}"
    if rest.amplitude <= SMALL:
        return told
    if not isfinite(rest.decay):
        return f"{told}, not dying down"
    return f"{told}, under {small} in {clock(rest.decay * log(rest.amplitude / SMALL))}"


TOUCHING = "may be touching"
"""What the engine says of a line that swings faster than a free one can."""
SMALL = 0.002
"""A swing of no more than this to each side disturbs nobody's work [m]: common practice, no source."""
_WANTED = 0.0005


def clock(seconds: float) -> str:
    """Return a time since the start as h:mm:ss, or m:ss below an hour."""
    if not isfinite(seconds):
        return NONE
    whole = int(seconds)
    hours, minutes = divmod(whole // 60, 60)
    return f"{hours}:{minutes:02d}:{whole % 60:02d}" if hours else f"{minutes}:{whole % 60:02d}"


def alarm(one: AlarmView, units: Units = METRIC) -> str:
    """Return one alarm as a line: its state first, in words, then since when and what it is about."""
    return f"{_state(one.state)} {clock(one.since)} {_about(one.name, one.message, units)}"


def alarm_change(one: AlarmChange, units: Units = METRIC) -> str:
    """Return what an alarm became and what it is about, in the words of `alarm`, without the time."""
    return f"{_state(one.new)} {_about(one.name, one.message, units)}"


def _state(state: str) -> str:
    return ALARM_STATE.get(state, state.upper())


def _about(name: str, message: str, units: Units) -> str:
    what = message if message.startswith(name) else f"{name}: {message}".removesuffix(": ")
    return reworded(what, units)


def reworded(message: str, units: Units) -> str:
    """Return what the engine says in a reader's units; what a person said of it behind that stays as it is."""
    said = _BY_HAND.search(message)
    end = said.start() if said else len(message)
    return lengths_in(message[:end], units) + message[end:]


_BY_HAND = re.compile(r"; (?:acknowledged|shelved)\b")
ALARM_STATE = {
    "normal": "GONE",
    "active": "NEW",
    "acknowledged": "SEEN",
    "returned": "WENT BACK, NOT SEEN",
    "latched": "LATCHED",
    "shelved": "SHELVED",
}
WANTS_ANSWER = frozenset({"active", "returned", "latched"})
"""States that stay on the screen until somebody acknowledges them."""


def size(count: int) -> str:
    """Return a number of bytes in decimal units."""
    if count < 1000:
        return f"{count} B"
    return f"{count / 1e3:.0f} kB" if count < 1_000_000 else f"{count / 1e6:.1f} MB"
