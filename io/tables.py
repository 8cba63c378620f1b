"""The shapes that other programs rely on: plain dicts with units in their keys, millimetres, and null for absent."""

from math import degrees, isfinite
from typing import Any

from eastfall.io.reduce import Reduction
from eastfall.physics.findings import AlarmChange, Best, Closure, FaceSums, RestPoint, Station

STATION_KEYS = (
    "depth_m",
    "pass",
    "measured_east_mm",
    "measured_north_mm",
    "expected_east_mm",
    "expected_north_mm",
    "residual_east_mm",
    "residual_north_mm",
    "u_east_mm",
    "u_north_mm",
    "verdict",
)
_DIGITS = 6


def number(value: float | None, scale: float = 1.0) -> float | None:
    """Return a number at the edge, to a millionth of its unit; None for what is absent or not finite."""
    if value is None or not isfinite(value):
        return None
    return round(value * scale, _DIGITS) + 0.0  # plus zero: no -0.0


def millimetres(value: float | None) -> float | None:
    """Return a length in millimetres."""
    return number(value, 1000.0)


def station_row(station: Station) -> dict[str, Any]:
    """Return one station."""
    names = ("measured", "expected", "residual", "u")
    lengths = {
        f"{name}_{side}_mm": millimetres(getattr(station, f"{name}_{side}"))
        for name in names
        for side in ("east", "north")
    }
    return {
        "depth_m": number(station.depth),
        "pass": station.direction,
        **lengths,
        "verdict": station.verdict,
        "readings": station.readings,
        "at_rest": station.still,
        "lean_mmpm": millimetres(station.lean),
        "lean_verdict": station.lean_verdict,
        "clearance_mm": millimetres(station.clearance),
        "clearance_verdict": station.clearance_verdict,
        "spread_east_mm": millimetres(station.spread_east),
        "spread_north_mm": millimetres(station.spread_north),
        "covariance_mm2": number(station.covariance, 1e6),
    }


def alarm_row(change: AlarmChange, *, on_host: bool = True) -> dict[str, Any]:
    """Return one transition of an alarm.

    `time_s` is by the instrument's clock where its lines carry a time; `host_time_s` by that of the machine that
    recorded, from the start of the run, null for a capture, of which nobody knows when its lines arrived.
    """
    return {
        "time_s": number(change.time),
        "host_time_s": number(change.host_time) if on_host else None,
        "depth_m": number(change.depth),
        "name": change.name,
        "from": change.old,
        "to": change.new,
    }


def closure_row(closure: Closure | None) -> dict[str, Any] | None:
    """Return the misclosure between passes."""
    if closure is None:
        return None
    return {
        "depth_m": number(closure.depth),
        "east_mm": millimetres(closure.east),
        "north_mm": millimetres(closure.north),
        "expected_east_mm": millimetres(closure.expected_east),
        "expected_north_mm": millimetres(closure.expected_north),
    }


def rest_point_row(rest: RestPoint | None) -> dict[str, Any] | None:
    """Return the rest point of a swing."""
    if rest is None:
        return None
    return {
        "east_mm": millimetres(rest.east),
        "north_mm": millimetres(rest.north),
        "u_east_mm": millimetres(rest.u_east),
        "u_north_mm": millimetres(rest.u_north),
        "period_s": number(rest.period),
        "decay_s": number(rest.decay),
        "swings": number(rest.swings),
    }


def best_row(one: Best) -> dict[str, Any]:
    """Return the best estimate at a depth, from all passes and a known end."""
    return {
        "depth_m": number(one.depth),
        "residual_east_mm": millimetres(one.east),
        "residual_north_mm": millimetres(one.north),
        "u_east_mm": millimetres(one.u_east),
        "u_north_mm": millimetres(one.u_north),
        "passes": one.passes,
        "apart_east_mm": millimetres(one.apart_east),
        "apart_north_mm": millimetres(one.apart_north),
        "verdict": one.verdict,
        "covariance_mm2": number(one.covariance, 1e6),
    }


def faces_row(one: FaceSums | None) -> dict[str, Any] | None:
    """Return what two faces say of the instrument."""
    if one is None:
        return None
    return {
        "depths": len(one.depth),
        "unpaired": one.unpaired,
        "suspect_depths_m": [number(depth) for depth in one.suspect_depths],
        **{
            f"{name}_deg": number(degrees(getattr(one, name)))
            for side in "ab"
            for name in (f"mean_{side}", f"spread_{side}", f"zero_{side}", f"u_zero_{side}")
        },
    }


def reduce_table(reduction: Reduction) -> dict[str, Any]:
    """Return what `reduce` prints as JSON."""
    result = reduction.result
    return {
        "kind": reduction.kind,
        "site": reduction.site.assumptions.site.name,
        "frames": reduction.frames,
        "rejected": reduction.rejected,
        "stations": [station_row(one) for one in result.stations],
        "alarms": [alarm_row(one, on_host=reduction.is_log) for one in result.alarms],
        "closure": closure_row(result.closure),
        "rest_point": rest_point_row(result.rest_point),
        "best": [best_row(one) for one in result.best],
        "faces": faces_row(result.faces),
        "reference": reduction.site.assumptions.run.reference,
        "notes": list(
            dict.fromkeys([*(reduction.standing.notes if reduction.standing else ()), *result.notes])
        ),
        "unreadable_records": reduction.unreadable,
    }
