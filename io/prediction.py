"""The prediction as a table: the shape that `expect` prints, in millimetres."""

from dataclasses import dataclass
from math import isfinite
from typing import Any

import numpy as np

from eastfall.io.errors import SiteFileError
from eastfall.io.safetext import safe
from eastfall.physics.budget import combined
from eastfall.physics.expected import ExpectedCurve, expected_curve
from eastfall.physics.settings import ARCSECOND, Assumptions

_MM = 1000.0
_MOST = 1_000_000

REFERENCE_LINES = {
    "straight": "the straight vertical at the collar",
    "field-line": "the curved vertical (field line) through the collar",
    "hung-line": "the hung plumb line",
}
"""The reference line in words."""


@dataclass(frozen=True, slots=True, kw_only=True)
class Prediction:
    """A prediction ready to print."""

    shape: dict[str, Any]
    """As JSON; absent values are None."""
    rows: tuple[list[str], list[list[Any]]]
    heading: str
    notes: list[str]


def depths(assumptions: Assumptions, *, every: float | None, at: tuple[float, ...] | None) -> list[float]:
    """Return the depths to predict at [m].

    Parameters
    ----------
    assumptions : Assumptions
        Of the site.
    every : float, optional
        Spacing [m]; the station spacing by default.
    at : tuple of float, optional
        These instead [m].

    Raises
    ------
    SiteFileError
        For a depth below the shaft, or more rows than anyone can mean.
    """
    deepest = assumptions.shaft.depth
    if at is not None:
        beyond = [one for one in at if one > deepest]
        if beyond:
            raise SiteFileError(
                f"--at {beyond[0]:g} m is below the shaft; expected at most shaft.depth_m, {deepest:g} m"
            )
        return list(at)
    step = every or assumptions.run.station_every
    count = int(deepest / step + 1e-9)
    if count > _MOST:
        raise SiteFileError(f"--every {step:g} m makes {count} rows; expected at most {_MOST}")
    rows = [number * step for number in range(count + 1)]
    return rows if deepest - rows[-1] < 1e-9 * deepest else [*rows, deepest]


def predict(assumptions: Assumptions, at: list[float]) -> Prediction:
    """Work out the prediction at depths [m]."""
    curve = expected_curve(assumptions)
    speed = assumptions.line_speed
    stations = _stations(curve, at, speed)
    contact = curve.wall_contact_depth
    shape = {
        "kind": assumptions.run.kind,
        "site": assumptions.site.name,
        "reference": assumptions.run.reference,
        "stations": stations,
        "wall_contact_depth_m": contact,
        "warnings": list(curve.warnings),
    }
    names = list(stations[0]) if stations else []
    running = f", line at {speed:g} m/s" if speed else ""
    notes = [f"note: {one}" for one in curve.warnings]
    if not assumptions.site.deflections:
        arcsec = assumptions.site.u_deflection / ARCSECOND
        notes.append(
            f"note: masses nearby are not modelled; they are taken to bend the vertical by {arcsec:g}″ (u) from collar "
            "to bottom, and a dense ore body can do more: give site.deflections_arcsec where it was measured"
        )
    if contact is not None:
        notes.insert(0, f"a body dropped at the collar meets the wall at {contact:.1f} m")
    return Prediction(
        shape=shape,
        rows=(names, [list(one.values()) for one in stations]),
        heading=(
            f"{safe(assumptions.site.name) or 'unnamed site'}: {assumptions.run.kind} run{running}; offsets in mm from "
            f"{REFERENCE_LINES[assumptions.run.reference]}; u is the standard uncertainty"
        ),
        notes=notes,
    )


def _stations(curve: ExpectedCurve, at: list[float], speed: float) -> list[dict[str, float | None]]:
    depth = np.asarray(at, dtype=float)
    expected = curve.expected(depth, speed) * _MM
    u = curve.look_up(curve.u, depth) * _MM
    bob, body = curve.look_up(curve.bob, depth) * _MM, curve.look_up(curve.body, depth) * _MM
    columns = {
        "depth_m": depth,
        "east_mm": expected[0],
        "north_mm": expected[1],
        "u_east_mm": u[0],
        "u_north_mm": u[1],
        "bob_east_mm": bob[0],
        "bob_north_mm": bob[1],
        "fall_east_mm": body[0],
        "fall_north_mm": body[1],
        "time_s": curve.look_up(curve.fall_time, depth),
        "speed_mps": curve.look_up(curve.fall_speed, depth),
    }
    rows = zip(*(one.tolist() for one in columns.values()), strict=True)
    return [{name: _or_none(one) for name, one in zip(columns, row, strict=True)} for row in rows]


def _or_none(value: float) -> float | None:
    return value + 0.0 if isfinite(value) else None


def budget(assumptions: Assumptions, at: list[float]) -> dict[str, Any]:
    """Return what each input contributes to the uncertainty of the expected offset at depths [m]."""
    curve = expected_curve(assumptions)
    parts = np.abs(curve.budget.at(at)) * _MM
    total = combined(parts)
    return {
        "kind": assumptions.run.kind,
        "site": assumptions.site.name,
        "stations": [
            {
                "depth_m": depth,
                "u_east_mm": float(total[0, row]),
                "u_north_mm": float(total[1, row]),
                "parts": [
                    {"input": name, "east_mm": float(part[0, row]), "north_mm": float(part[1, row])}
                    for name, part in zip(curve.budget.names, parts, strict=True)
                ],
            }
            for row, depth in enumerate(at)
        ],
    }


def budget_rows(shape: dict[str, Any]) -> tuple[list[str], list[list[Any]]]:
    """Return the budget as rows: one a depth and input, largest first, then the combined one."""
    rows: list[list[Any]] = []
    for one in shape["stations"]:
        parts = sorted(one["parts"], key=lambda part: -(part["east_mm"] ** 2 + part["north_mm"] ** 2))
        rows += [[one["depth_m"], part["input"], part["east_mm"], part["north_mm"]] for part in parts]
        rows.append([one["depth_m"], "combined", one["u_east_mm"], one["u_north_mm"]])
    return ["depth_m", "input", "u_east_mm", "u_north_mm"], rows
