"""The assumptions of a run as frozen records in SI units and radians; reading them from a file is `io.sitefile`.

The field names are the keys of the site file without their unit suffix (`depth_m` there, `depth` here), so one
rule converts all of them and none is listed twice. `u_` fields are standard uncertainties.
"""

from dataclasses import dataclass, field, fields
from math import isfinite, pi
from typing import Literal

from eastfall.physics.errors import ParameterError

Kind = Literal["guided", "hung", "drop"]
Reference = Literal["straight", "field-line", "hung-line"]
Method = Literal["average", "minimum-curvature"]
North = Literal["true", "magnetic", "grid"]

ARCSECOND = pi / 648000.0
DEGREE = pi / 180.0


def _refuse_unless(ok: bool, name: str, value: object, unit: str, expected: str) -> None:
    if not ok:
        raise ParameterError(name, value, unit, expected)


@dataclass(frozen=True, slots=True, kw_only=True)
class _Checked:
    """A record whose numbers are finite and whose uncertainties are not negative."""

    def __post_init__(self) -> None:
        for one in fields(self):
            value = getattr(self, one.name)
            if isinstance(value, float):
                _refuse_unless(isfinite(value), one.name, value, "", "a finite number")
                if one.name.startswith("u_"):
                    _refuse_unless(value >= 0.0, one.name, value, "", "zero or more")


@dataclass(frozen=True, slots=True, kw_only=True)
class Site(_Checked):
    """Where the shaft is, and the rock around it."""

    name: str = ""
    latitude: float
    """Geodetic latitude [rad], north positive."""
    longitude: float | None = None
    """Longitude [rad], east positive; only for declination and convergence."""
    grid: str = ""
    """The projection of grid north, as an EPSG code ("EPSG:25832"); only for convergence."""
    elevation: float = 0.0
    """Collar above the ellipsoid [m]."""
    gravity: float | None = None
    """Measured at the collar [m/s²]; None takes normal gravity there."""
    rock_density: tuple[tuple[float, float], ...] = ((0.0, 2670.0),)
    """(from depth [m], density [kg/m³]) from the collar down; 0 is open air."""
    deflections: tuple[tuple[float, float, float], ...] = ()
    """Measured (depth [m], toward north [rad], toward east [rad]) of the lower vertical, against that at the collar.

    Given, they replace the normal curvature of the plumb line.
    """
    u_latitude: float = 0.001 * DEGREE
    u_elevation: float = 5.0
    u_gravity: float = 5e-4
    """[m/s²]; the default covers the usual anomaly where gravity was not measured (common practice, no source)."""
    u_rock_density: float = 150.0
    u_deflection: float = 1.0 * ARCSECOND
    """Unknown bending of the vertical by local masses between collar and bottom [rad], taken as linear in depth."""

    def __post_init__(self) -> None:
        _Checked.__post_init__(self)
        _refuse_unless(abs(self.latitude) <= pi / 2, "latitude", self.latitude, "rad", "-pi/2 to pi/2")
        _refuse_unless(
            self.gravity is None or 9.0 < self.gravity < 10.5,
            "gravity",
            self.gravity,
            "m/s²",
            "9 to 10.5 m/s²",
        )
        tops = [top for top, _ in self.rock_density]
        _refuse_unless(
            bool(tops) and tops == sorted(set(tops)), "rock_density", tops, "m", "rising depths, at least one"
        )
        depths = [row[0] for row in self.deflections]
        _refuse_unless(depths == sorted(set(depths)), "deflections", depths, "m", "rising depths")


@dataclass(frozen=True, slots=True, kw_only=True)
class Shaft(_Checked):
    """The hole itself; round."""

    depth: float
    diameter: float | None = None
    centre_east: float = 0.0
    centre_north: float = 0.0

    def __post_init__(self) -> None:
        _Checked.__post_init__(self)
        _refuse_unless(self.depth > 0.0, "depth", self.depth, "m", "more than 0 m")
        _refuse_unless(
            self.diameter is None or self.diameter > 0.0, "diameter", self.diameter, "m", "more than 0 m"
        )


@dataclass(frozen=True, slots=True, kw_only=True)
class Run(_Checked):
    """What is in the shaft, and the line that offsets are measured from."""

    kind: Kind
    reference: Reference = "straight"
    station_every: float = 10.0


@dataclass(frozen=True, slots=True, kw_only=True)
class Guide(_Checked):
    """A probe or cage running in guides."""

    line_speed: float = 0.0
    """For predictions [m/s], down positive; live and replay take it from the readings."""
    start_east: float = 0.0
    start_north: float = 0.0
    end_east: float | None = None
    end_north: float | None = None
    """Known offset of the deepest station; given, the misclosure is distributed over depth."""
    method: Method = "average"


@dataclass(frozen=True, slots=True, kw_only=True)
class Line(_Checked):
    """A plumb line and its bob."""

    bob_mass: float = 50.0
    bob_density: float = 7850.0
    mass_per_length: float = 0.0
    """[kg/m]; 0 is a weightless wire."""
    diameter: float = 0.001
    young: float = 200e9
    thermal_expansion: float = 1.2e-5
    line_speed: float = 0.0
    """While being lowered [m/s], down positive."""
    u_bob_mass: float = 0.0


@dataclass(frozen=True, slots=True, kw_only=True)
class Body(_Checked):
    """A body released at the collar."""

    mass: float
    diameter: float
    drag_coefficient: float | Literal["sphere"] = "sphere"
    release_east: float = 0.0
    release_north: float = 0.0
    release_speed_east: float = 0.0
    release_speed_north: float = 0.0
    release_speed_down: float = 0.0
    u_release: float = 0.0005
    """Of each horizontal coordinate of the release [m]."""
    u_release_speed: float = 0.002
    """Of each horizontal component of the release velocity [m/s]."""
    u_drag_fraction: float = 0.05
    """Relative, of the drag coefficient."""


@dataclass(frozen=True, slots=True, kw_only=True)
class Air(_Checked):
    """The air in the shaft."""

    density: float = 1.25
    """At the collar [kg/m³]; 0 is vacuum, without buoyancy either."""
    temperature: float = 288.15
    """At the collar [K]."""
    temperature_gradient: float = 0.0065
    """[K/m], warmer with depth."""
    cross_flow: tuple[tuple[float, float, float, float], ...] = ()
    """(from depth [m], to depth [m], speed [m/s], toward azimuth [rad])."""
    vertical: float = 0.0
    """Of the air itself [m/s], down positive."""
    u_density: float = 0.02
    u_vertical: float = 0.0
    u_cross_flow_fraction: float = 0.2
    """Relative, of every cross-flow speed."""

    @property
    def is_vacuum(self) -> bool:
        """Whether there is no air at all."""
        return self.density == 0.0


@dataclass(frozen=True, slots=True, kw_only=True)
class Instrument(_Checked):
    """The probe's own constants and uncertainties."""

    a_azimuth: float = 0.0
    azimuth_from: North = "true"
    north_offset: float = 0.0
    """From the stated north to true north [rad], clockwise; added to every azimuth; found at the edge."""
    zero_a: float = 0.0
    zero_b: float = 0.0
    scale_a: float = 1.0
    scale_b: float = 1.0
    cross_ab: float = 0.0
    """What of a tilt about the other axis shows on A [rad per rad]."""
    cross_ba: float = 0.0
    zero_a_per_c: float = 0.0
    zero_b_per_c: float = 0.0
    """Drift of the zero with temperature [rad/K]."""
    scale_per_c: float = 0.0
    reference_temperature: float = 293.15
    calibrated_on: str = ""
    """ISO date; empty if unknown."""
    u_tilt: float = 0.002 * DEGREE
    u_zero: float = 0.001 * DEGREE
    u_scale: float = 0.001
    u_azimuth: float = 0.5 * DEGREE
    u_depth_fraction: float = 0.0005
    u_offset: float = 0.0005
    """Of one direct offset reading [m], each axis."""


@dataclass(frozen=True, slots=True, kw_only=True)
class Limits(_Checked):
    """What is tolerated."""

    warning: float = 0.015
    action: float = 0.025
    ratio: float | None = None
    """depth/ratio is a further action limit; the larger of the two holds."""
    wall_clearance: float | None = None
    lean: float | None = None
    """Between neighbouring stations [m/m]."""
    table: tuple[tuple[float, float, float], ...] = ()
    """(depth [m], warning [m], action [m]), linear between; given, it replaces warning, action and ratio."""
    on_delay: float = 3.0
    off_delay: float = 3.0
    dead_band: float = 0.002
    feed_silent: float = 5.0

    def __post_init__(self) -> None:
        _Checked.__post_init__(self)
        _refuse_unless(
            self.warning <= self.action, "warning", self.warning, "m", "at most the action limit"
        )


@dataclass(frozen=True, slots=True, kw_only=True)
class Assumptions:
    """Everything that a prediction and a verdict rest on."""

    site: Site
    shaft: Shaft
    run: Run
    guide: Guide = field(default_factory=Guide)
    line: Line = field(default_factory=Line)
    body: Body | None = None
    """None: a body in vacuum."""
    air: Air = field(default_factory=Air)
    instrument: Instrument = field(default_factory=Instrument)
    limits: Limits = field(default_factory=Limits)
