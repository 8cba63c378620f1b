"""From the standing answer to which way to move, how far, and how fast the bell beats; knows no screen."""

from dataclasses import dataclass
from math import atan2, degrees, isfinite, pi
from typing import TYPE_CHECKING

from eastfall.tui import words
from eastfall.tui.units import METRIC, Units

if TYPE_CHECKING:
    from eastfall.physics.findings import Standing
    from eastfall.physics.settings import Kind

WINDS = ("N", "NE", "E", "SE", "S", "SW", "W", "NW")
IN_WORDS = ("north", "north-east", "east", "south-east", "south", "south-west", "west", "north-west")
BEATS = (("over", 0.4), ("warned", 0.8), ("off", 1.6))
"""Seconds between two bells by how far it is off: beyond the action limit or not surely inside of it, past the warning
limit, off by more than its uncertainty. Silence says: do not move it."""


@dataclass(frozen=True, slots=True, kw_only=True)
class Steer:
    """What a person at the collar is told from afar."""

    angle: float | None = None
    """Where to move, clockwise from north [rad]; None: nowhere."""
    wind: str = ""
    bearing: str = ""
    distance: str = ""
    unit: str = ""
    verdict: str = ""
    line: str = ""
    """The same as a sentence."""
    beat: float | None = None
    """Seconds between two bells; None is silence."""


def steer(one: "Standing | None", kind: "Kind", units: Units = METRIC) -> Steer:
    """Return what to do with the standing answer."""
    line = words.steering(one, kind, units)
    if one is None or kind == "drop" or one.hold_still is not None:
        return Steer(line=line)
    length = words.residual_length(one)
    unresolved = kind == "hung" and one.rest_point is not None and not one.rest_point.fits
    if not isfinite(length) or not isfinite(words.expanded(one)) or unresolved:
        return Steer(line=line)
    told = Steer(
        distance=units.offset(length),
        unit=f"± {units.offset(words.expanded(one))} {units.short}",
        verdict=words.decision(one),
        line=line,
        beat=_beat(one, length),
    )
    if length <= max(words.expanded(one), words.UNSEEN):
        return told
    bearing = words.bearing(-one.residual_east, -one.residual_north)
    angle = atan2(-one.residual_east, -one.residual_north) % (2.0 * pi)
    place = round(degrees(angle) / 45.0) % 8
    return Steer(
        angle=angle,
        wind=WINDS[place],
        bearing=bearing,
        distance=told.distance,
        unit=told.unit,
        verdict=told.verdict,
        line=line.replace(bearing, f"{bearing} ({IN_WORDS[place]})", 1),
        beat=told.beat,
    )


def _beat(one: "Standing", length: float) -> float | None:
    beats = dict(BEATS)
    if length <= max(words.expanded(one), words.UNSEEN):
        return None
    if one.verdict != "within":
        return beats["over"]
    return beats["warned"] if length > one.warning else beats["off"]
