"""What a report says of the stations taken together: best estimate, faces, lean and clearance, what would decide."""

from math import degrees, isfinite
from typing import Any

from eastfall.io.reduce import Reduction
from eastfall.io.reportview import Table, mm, plain_mm
from eastfall.physics.budget import COVERAGE_FACTOR
from eastfall.physics.findings import Station
from eastfall.physics.settle import Settling, settle

_MOST_REMEDIES = 3


def best(reduction: Reduction) -> Table:
    """Return the best estimate of the residual by depth, millimetres; no rows where one pass is all there is."""
    heads = ("depth m", "passes", "residual E", "N", "U E", "U N", "up less down E", "N", "limit", "verdict")
    rows = tuple(
        (
            f"{one.depth:.2f}",
            f"{one.passes}",
            mm(one.east),
            mm(one.north),
            plain_mm(COVERAGE_FACTOR * one.u_east),
            plain_mm(COVERAGE_FACTOR * one.u_north),
            mm(one.apart_east),
            mm(one.apart_north),
            plain_mm(one.action),
            one.verdict,
        )
        for one in reduction.result.best
        if one.passes > 1 or one.tied
    )
    return Table(heads=heads, rows=rows)


def faces(reduction: Reduction) -> str:
    """Return what the two faces say of the instrument, in sentences; empty without two faces."""
    found = reduction.result.faces
    if found is None or not isfinite(found.zero_a):
        return ""
    doubtful = ", ".join(f"{one:.1f}" for one in found.suspect_depths)
    apart = f" Sums stand apart from the others at {doubtful} m." if doubtful else " No sum stands apart."
    return (
        f"{len(found.depth)} depths were read in two faces. Beyond the stated zeros A is off by "
        f"{_zero(found.zero_a, found.u_zero_a)} and B by {_zero(found.zero_b, found.u_zero_b)}.{apart}"
    )


def _zero(value: float, u: float) -> str:
    return f"{degrees(value):+.4f}° (U {COVERAGE_FACTOR * degrees(u):.4f}°)"


def checks(reduction: Reduction) -> Table:
    """Return what else is tolerated, station by station: lean between neighbours and clearance to the wall."""
    judged = [one for one in reduction.result.stations if one.lean_verdict or one.clearance_verdict]
    heads = ("depth m", "pass", "lean mm/m", "U", "verdict", "clearance mm", "U", "verdict")
    return Table(heads=heads, rows=tuple(_check_row(one) for one in judged))


def _check_row(one: Station) -> tuple[str, ...]:
    return (
        f"{one.depth:.2f}",
        f"{one.passing + 1} {one.direction}",
        *_judged(one.lean, one.u_lean, one.lean_verdict, 3),
        *_judged(one.clearance, one.u_clearance, one.clearance_verdict, 1),
    )


def _judged(value: float | None, u: float | None, word: str | None, digits: int) -> tuple[str, str, str]:
    if value is None or u is None or word is None:
        return "–", "–", "–"
    return f"{1000.0 * value:.{digits}f}", f"{1000.0 * COVERAGE_FACTOR * u:.{digits}f}", word


def undecided(reduction: Reduction) -> Table:
    """Return, for every undecided station, what would decide it."""
    found = [(one, settle(one)) for one in reduction.result.stations if one.verdict == "undecided"]
    rows = tuple(
        (
            f"{one.depth:.2f}",
            f"{one.passing + 1} {one.direction}",
            plain_mm(COVERAGE_FACTOR * what.u),
            plain_mm(COVERAGE_FACTOR * what.u_needed),
            _remedy(what),
            what.leans_to,
        )
        for one, what in found
        if what is not None
    )
    return Table(
        heads=("depth m", "pass", "U now", "U needed", "any one of these would do", "leans to"), rows=rows
    )


def _remedy(what: Settling) -> str:
    ways = [] if what.more_readings is None else [f"{what.more_readings} more readings"]
    ways += [
        f"{one.name}: u from {plain_mm(one.present)} to {plain_mm(one.needed)} mm"
        for one in what.remedies[:_MOST_REMEDIES]
    ]
    return "; ".join(ways) or "nothing alone"


def view(reduction: Reduction) -> dict[str, Any]:
    """Return the sections of this module."""
    return {
        "best": best(reduction),
        "faces": faces(reduction),
        "checks": checks(reduction),
        "undecided": undecided(reduction),
    }
