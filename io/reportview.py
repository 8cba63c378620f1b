"""What a report says, in words and cells, for any page to lay out; reckoning is done, drawing is `figures`."""

from dataclasses import dataclass
from math import atan2, degrees, hypot, isfinite
from typing import Any

from eastfall.io.cautions import CAUTIONS
from eastfall.io.prediction import REFERENCE_LINES
from eastfall.io.reduce import Reduction
from eastfall.io.safetext import safe
from eastfall.io.whatif import settings_of
from eastfall.physics.budget import COVERAGE_FACTOR
from eastfall.physics.findings import Station

_MM = 1000.0
KINDS = {
    "guided": "probe or cage running in guides",
    "hung": "plumb line or probe hanging free",
    "drop": "body released from rest, falling free",
}


@dataclass(frozen=True, slots=True, kw_only=True)
class Table:
    """Cells as text, with their heads."""

    heads: tuple[str, ...]
    rows: tuple[tuple[str, ...], ...]


def shown(value: object) -> str:
    """Return any value as short, harmless text."""
    if value is None or value in ("", [], ()):
        return "none"
    if isinstance(value, bool):
        return "yes" if value else "no"
    if isinstance(value, float):
        return f"{value:.10g}"
    if isinstance(value, (list, tuple)):
        return "[" + ", ".join(shown(one) for one in value) + "]"
    return safe(str(value), 300)


def mm(value: float | None, digits: int = 2) -> str:
    """Return a length [m] in millimetres with its sign."""
    return "–" if value is None or not isfinite(value) else f"{_MM * value:+.{digits}f}"


def plain_mm(value: float) -> str:
    """Return a length [m] in millimetres without a sign."""
    return "–" if not isfinite(value) else f"{_MM * value:.2f}"


def toward(east: float, north: float) -> str:
    """Return the azimuth of a horizontal offset, clockwise from north."""
    return f"{degrees(atan2(east, north)) % 360.0:.0f}°"


def residual(station: Station) -> float:
    """Return the length of a station's horizontal residual [m]."""
    return hypot(station.residual_east, station.residual_north)


def worst(stations: tuple[Station, ...]) -> Station:
    """Return the station whose residual is largest against its action limit."""
    return max(stations, key=lambda one: residual(one) / one.action if isfinite(residual(one)) else -1.0)


def _stations(count: int) -> str:
    return "1 station" if count == 1 else f"{count} stations"


def answer(reduction: Reduction) -> str:
    """Return the run's answer in one line."""
    stations = reduction.result.stations
    if not stations:
        return "No station was closed: there is nothing to judge."
    one = worst(stations)
    size = (
        f"{_MM * residual(one):.1f} mm toward {toward(one.residual_east, one.residual_north)} at {one.depth:.1f} m "
        f"({one.direction}; action limit {_MM * one.action:.1f} mm there)"
    )
    every = f"all {_stations(len(stations))}" if len(stations) > 1 else "the one station"
    count = {name: sum(s.verdict == name for s in stations) for name in ("over", "undecided", "within")}
    if count["over"]:
        return f"OVER the action limit at {count['over']} of {_stations(len(stations))}; farthest out {size}."
    if count["undecided"]:
        return f"UNDECIDED at {count['undecided']} of {_stations(len(stations))}, none over; farthest out {size}."
    beyond = sum(residual(s) > s.warning for s in stations)
    warned = f"; {beyond} beyond the warning limit" if beyond else ""
    return f"WITHIN the action limit at {every}{warned}; farthest out {size}."


def key_facts(reduction: Reduction) -> list[tuple[str, str]]:
    """Return what the run was."""
    site, shaft, run = (getattr(reduction.site.assumptions, one) for one in ("site", "shaft", "run"))
    started = (
        reduction.started_at.strftime("%Y-%m-%d %H:%M:%S UTC") if reduction.started_at else "not recorded"
    )
    wall = f", diameter {shaft.diameter:g} m" if shaft.diameter else ""
    gravity = f"{site.gravity:.6f} m/s², measured" if site.gravity else "normal gravity"
    return [
        ("Shaft", safe(site.name, 200) or "no name given"),
        (
            "Place",
            f"latitude {degrees(site.latitude):.5f}°, collar {site.elevation:g} m above the ellipsoid, {gravity}",
        ),
        ("Depth", f"{shaft.depth:g} m{wall}"),
        ("Run", f"{run.kind}: {KINDS[run.kind]}"),
        ("Offsets against", REFERENCE_LINES[run.reference]),
        ("Started", started),
        ("Lasted", f"{reduction.duration:.1f} s" if reduction.duration else "not recorded"),
        ("Readings", f"{reduction.frames} used or looked at, {reduction.rejected} lines refused"),
    ]


def instrument(reduction: Reduction) -> list[tuple[str, str]]:
    """Return the instrument and its calibration."""
    one = reduction.site.assumptions.instrument
    deg = degrees(1.0)
    return [
        ("Calibrated on", safe(one.calibrated_on, 20) or "no date given"),
        (
            "A axis toward",
            f"{degrees(one.a_azimuth):.3f}° from {one.azimuth_from} north, u {deg * one.u_azimuth:.3g}°",
        ),
        (
            "Zero of A and B",
            f"{deg * one.zero_a:.5g}° and {deg * one.zero_b:.5g}°, u {deg * one.u_zero:.3g}°",
        ),
        ("Scale of A and B", f"{one.scale_a:.7g} and {one.scale_b:.7g}, u {one.u_scale:.3g}"),
        ("One tilt reading", f"u {deg * one.u_tilt:.3g}°"),
        ("One offset reading", f"u {_MM * one.u_offset:.3g} mm on each axis"),
    ]


def environment(reduction: Reduction) -> list[tuple[str, str]]:
    """Return the air and the rock that the prediction assumes."""
    air, site = reduction.site.assumptions.air, reduction.site.assumptions.site
    layers = ", ".join(f"{density:g} kg/m³ from {top:g} m" for top, density in site.rock_density)
    rows = [("Rock", layers)]
    if air.is_vacuum:
        return [*rows, ("Air", "none (vacuum)")]
    flows = ", ".join(
        f"{speed:g} m/s toward {degrees(az):.0f}° from {top:g} to {end:g} m"
        for top, end, speed, az in air.cross_flow
    )
    return [
        *rows,
        ("Air at the collar", f"{air.density:g} kg/m³, {air.temperature - 273.15:.1f} °C"),
        ("Warmer with depth", f"{1000.0 * air.temperature_gradient:g} °C/km"),
        ("Air across the shaft", flows or "none stated"),
        ("Air along the shaft", f"{air.vertical:g} m/s, down positive"),
    ]


def stations(reduction: Reduction) -> Table:
    """Return the station table, millimetres."""
    heads = (
        "depth m",
        "pass",
        "measured E",
        "N",
        "expected E",
        "N",
        "residual E",
        "N",
        "U E",
        "U N",
        "limit",
        "verdict",
    )
    rows = tuple(
        (
            f"{one.depth:.2f}",
            f"{one.passing + 1} {one.direction}",
            mm(one.measured_east),
            mm(one.measured_north),
            mm(one.expected_east),
            mm(one.expected_north),
            mm(one.residual_east),
            mm(one.residual_north),
            plain_mm(COVERAGE_FACTOR * one.u_east),
            plain_mm(COVERAGE_FACTOR * one.u_north),
            plain_mm(one.action),
            one.verdict,
        )
        for one in reduction.result.stations
    )
    return Table(heads=heads, rows=rows)


def closure(reduction: Reduction) -> str:
    """Return what the passes say of one another, in a sentence."""
    one = reduction.result.closure
    if one is None:
        return "One pass only: there is no misclosure to state."
    east, north = one.misclosure_east, one.misclosure_north
    return (
        f"At {one.depth:.2f} m the up pass ends {mm(one.east)} mm east and {mm(one.north)} mm north of the down pass. "
        f"The moving line alone leaves {mm(one.expected_east)} and {mm(one.expected_north)} mm; "
        f"the rest, {mm(east)} and {mm(north)} mm, is misclosure."
    )


def _fading(decay: float) -> str:
    return f"falling to 1/e in {decay:.0f} s" if isfinite(decay) else "without visible decay"


def rest_point(reduction: Reduction) -> str | None:
    """Return where the swing comes to rest, in a sentence; None without one."""
    one = reduction.result.rest_point
    if one is None:
        return None
    fit = "" if one.fits else " The swing does not follow the model: " + safe(one.message, 200)
    return (
        f"The bob comes to rest {mm(one.east)} mm east and {mm(one.north)} mm north of the reference line, "
        f"U {plain_mm(COVERAGE_FACTOR * one.u_east)} and {plain_mm(COVERAGE_FACTOR * one.u_north)} mm, from "
        f"{float(one.swings):.1f} full swings of period {float(one.period):.2f} s, {_fading(float(one.decay))}.{fit}"
    )


def alarms(reduction: Reduction) -> Table:
    """Return every change of every alarm, with its instant on each clock that it has."""
    clocks = {
        "time s": reduction.is_log or not reduction.own_clock,
        "instrument's time s": reduction.own_clock,
    }
    rows = tuple(
        (
            *((f"{one.host_time if reduction.is_log else one.time:.1f}",) if clocks["time s"] else ()),
            *((f"{one.time:.1f}",) if reduction.own_clock else ()),
            f"{one.depth:.1f}" if isfinite(one.depth) else "–",
            safe(one.name, 80),
            f"{one.old} → {one.new}",
            safe(one.message, 200),
        )
        for one in reduction.result.alarms
    )
    heads = [name for name, there in clocks.items() if there]
    return Table(heads=(*heads, "depth m", "alarm", "change", "about"), rows=rows)


_SAID = {
    "note": "note",
    "acknowledge": "acknowledged",
    "shelve": "shelved",
    "armed": "shaft declared clear",
    "mark": "offset typed in",
}
_WORDS = ("name", "text", "reason", "depth_m", "east_m", "north_m")


def people(reduction: Reduction) -> Table:
    """Return what people said and did: notes, acknowledgements, offsets typed in, and who."""
    rows = []
    for one in reduction.events:
        if one.name in _SAID:
            said = [(key, one.fields[key]) for key in _WORDS if one.fields.get(key) is not None]
            words = [f"{key[:-2]} {value} m" if key.endswith("_m") else str(value) for key, value in said]
            who = safe(str(one.fields.get("who") or "not named"), 80)
            rows.append((f"{one.time:.1f}", _SAID[one.name], safe(" · ".join(words), 300), who))
    return Table(heads=("time s", "what", "words", "who"), rows=tuple(rows))


def budget(reduction: Reduction) -> Table:
    """Return the uncertainty budget of the stations that matter: the farthest out, and the deepest of each pass."""
    found = reduction.result.stations
    if not found:
        return Table(heads=("input",), rows=())
    deepest = {
        one.passing: max((s for s in found if s.passing == one.passing), key=lambda s: s.depth)
        for one in found
    }
    chosen = list({one.number: one for one in (worst(found), *deepest.values())}.values())[:3]
    names: dict[str, None] = {share.name: None for one in chosen for share in one.shares}
    rows = []
    for name in names:
        cells = []
        for one in chosen:
            part = {share.name: share for share in one.shares}.get(name)
            cells += [plain_mm(part.east), plain_mm(part.north)] if part else ["–", "–"]
        if any(cell not in {"–", "0.00"} for cell in cells):
            rows.append((safe(name, 80), *cells))
    total = [cell for one in chosen for cell in (plain_mm(one.u_east), plain_mm(one.u_north))]
    heads = [f"{one.depth:.1f} m {one.direction}, {side}" for one in chosen for side in ("E", "N")]
    return Table(heads=("standard uncertainty, mm", *heads), rows=(*rows, ("combined", *total)))


def settings(reduction: Reduction) -> Table:
    """Return every setting in force, and whether it was given or is the default."""
    rows = tuple(
        (one.key, shown(one.value), one.unit, "given" if one.given else "default", one.help)
        for one in settings_of(reduction.site)
    )
    return Table(heads=("key", "value", "unit", "from", "meaning"), rows=rows)


def differences(reduction: Reduction) -> Table:
    """Return where the settings used are not the recorded ones."""
    rows = tuple((one.key, shown(one.recorded), shown(one.used)) for one in reduction.differences)
    return Table(heads=("key", "as recorded", "as used here"), rows=rows)


def record(reduction: Reduction) -> list[tuple[str, str]]:
    """Return what is known of the record itself."""
    found = reduction.verification
    rows = [("File", safe(reduction.path.name, 200))]
    if found is None:
        rows.append(("Seals", "none: a plain-text capture; nothing shows whether it was changed"))
    else:
        state = found.state if found.state == "intact" else f"{found.state.upper()}: {found.reason}"
        rows += [
            ("State", state),
            ("Good lines", f"{found.good_lines}, up to {found.good_until_time:.1f} s"),
            ("Records passed over, unreadable", str(reduction.unreadable)),
            ("Final seal" if found.sealed else "Last seal that holds", found.seal or "none"),
        ]
    faults = ", ".join(f"{safe(name, 60)} {count}" for name, count in sorted(reduction.faults.items()))
    unused = ", ".join(f"{safe(name, 60)} {count}" for name, count in sorted(reduction.unused.items()))
    return [*rows, ("Faults in the feed", faults or "none"), ("Readings left aside", unused or "none")]


def remarks(reduction: Reduction) -> list[str]:
    """Return what a reader must know of the answer."""
    told = reduction.standing.notes if reduction.standing else ()
    # What the closed run adds may repeat what stood at its end.
    notes = [safe(one, 400) for one in dict.fromkeys([*told, *reduction.result.notes])]
    if reduction.missing:
        notes.insert(0, f"The record lacks {reduction.missing} lines or events: they could not be written.")
    found = reduction.verification
    if found is not None and found.state != "intact":
        notes.insert(0, f"The record is {found.state}: {found.reason}.")
    if reduction.differences:
        notes.append("Reckoned under other settings than the run was recorded with; they are listed below.")
    return notes


def view(reduction: Reduction) -> dict[str, Any]:
    """Return everything a report shows, by section."""
    return {
        "title": safe(reduction.site.assumptions.site.name, 200) or "Shaft without a name",
        "answer": answer(reduction),
        "remarks": remarks(reduction),
        "cautions": CAUTIONS,
        "facts": key_facts(reduction),
        "instrument": instrument(reduction),
        "environment": environment(reduction),
        "stations": stations(reduction),
        "closure": closure(reduction),
        "rest_point": rest_point(reduction),
        "alarms": alarms(reduction),
        "people": people(reduction),
        "budget": budget(reduction),
        "settings": settings(reduction),
        "differences": differences(reduction),
        "record": record(reduction),
    }
