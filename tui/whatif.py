"""What a record would have said under other settings: which can be changed, and both outcomes side by side."""

from collections.abc import Callable, Sequence
from dataclasses import dataclass
from math import isfinite

from eastfall.io.reduce import Reduction
from eastfall.io.safetext import safe
from eastfall.io.whatif import Difference
from eastfall.physics.findings import Station
from eastfall.tui import words
from eastfall.tui.dials import Dial
from eastfall.tui.units import METRIC, Units

SETTINGS = (
    Dial(path="run.reference", says="offsets from"),
    Dial(path="site.latitude_deg", says="latitude", step=0.1),
    Dial(path="limits.warning_mm", says="warning limit", step=1.0),
    Dial(path="limits.action_mm", says="action limit", step=1.0),
    Dial(path="instrument.a_azimuth_deg", says="azimuth of A", step=0.5),
    Dial(path="instrument.zero_a_deg", says="zero of A", step=0.001),
    Dial(path="instrument.zero_b_deg", says="zero of B", step=0.001),
    Dial(path="instrument.scale_a", says="scale of A", step=0.001),
    Dial(path="instrument.scale_b", says="scale of B", step=0.001),
    Dial(path="instrument.cross_ab", says="B shows on A", step=0.001),
    Dial(path="instrument.cross_ba", says="A shows on B", step=0.001),
    Dial(path="instrument.u_tilt_deg", says="u of a tilt", step=0.001),
    Dial(path="instrument.u_zero_deg", says="u of the zeros", step=0.001),
    Dial(path="instrument.u_offset_mm", says="u of an offset", step=0.1),
    Dial(path="guide.start_east_mm", says="start east", step=1.0),
    Dial(path="guide.start_north_mm", says="start north", step=1.0),
)
"""Those that are asked about most; every other by a site file."""
_NAME, _BEFORE, _AFTER = 19, 12, 9


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class Outcomes:
    """A record reduced as it was recorded, and under other settings."""

    recorded: Reduction
    used: Reduction


def told(differences: Sequence[Difference]) -> tuple[str, ...]:
    """Return each difference as a line: the key, what is used, what was recorded."""
    return tuple(
        safe(f"{one.key} {_shown(one.used)} (recorded {_shown(one.recorded)})", 160) for one in differences
    )


def _shown(value: object) -> str:
    if value is None:
        return "not given"
    return f"{value:g}" if isinstance(value, float) else str(value)


def table(found: Outcomes, units: Units = METRIC) -> tuple[str, ...]:
    """Return both outcomes side by side, a head first."""
    recorded, used = _facts(found.recorded, units), _facts(found.used, units)
    lines = [f"{'':<{_NAME}}{'as recorded':>{_BEFORE}}{'what if':>{_AFTER}}"]
    for (name, before), (_, after) in zip(recorded, used, strict=True):
        mark = "" if before == after else " *"
        lines.append(f"{name:<{_NAME}}{before:>{_BEFORE}}{after:>{_AFTER}}{mark}")
    return tuple(lines)


def _facts(one: Reduction, units: Units) -> list[tuple[str, str]]:
    stations = one.result.stations
    facts = [("readings used", str(one.frames)), ("stations", str(len(stations)))]
    facts += [(f"  {name}", str(sum(s.verdict == name for s in stations))) for name in words.VERDICT]
    worst = max(
        (s for s in stations if isfinite(words.residual_length(s))),
        key=words.residual_length,
        default=None,
    )
    facts += [
        (f"largest residual {units.short}", _of(worst, lambda s: units.offset(words.residual_length(s)))),
        ("  toward", _of(worst, lambda s: words.bearing(s.residual_east, s.residual_north))),
        (f"  its ± {units.short}", _of(worst, lambda s: units.offset(words.expanded(s)))),
        (f"  at {units.depth_head}", _of(worst, lambda s: units.depth(s.depth))),
    ]
    deepest = max(stations, key=lambda s: s.depth, default=None)
    facts += [
        (f"expected E {units.short}", _of(deepest, lambda s: units.signed(s.expected_east))),
        (f"expected N {units.short}", _of(deepest, lambda s: units.signed(s.expected_north))),
        (f"  at {units.depth_head}", _of(deepest, lambda s: units.depth(s.depth))),
        ("alarms raised", str(sum(a.new == "active" for a in one.result.alarms))),
    ]
    return facts


def _of(one: Station | None, say: Callable[[Station], str]) -> str:
    return "–" if one is None else say(one)
