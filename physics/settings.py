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
Taken = Literal["all", "still"]
Cable = Literal["as-shown", "unloaded"]
AlarmName = Literal[
    "action limit",
    "warning limit",
    "wall clearance",
    "feed silent",
    "bad lines",
    "depth jump",
    "tilt at end of range",
    "tilt frozen",
    "spinning",
    "probe temperature",
    "supply low",
    "link lost",
]

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
    hold: float = 5.0
    """A probe that rests for so long closes a station of its own [s]."""

    def __post_init__(self) -> None:
        _Checked.__post_init__(self)
        _refuse_unless(self.hold > 0.0, "hold", self.hold, "s", "more than 0 s")


@dataclass(frozen=True, slots=True, kw_only=True)
class Depth(_Checked):
    """How true depth follows from the depth shown, and what the counter may not do."""

    scale: float = 1.0
    """True metres in a metre shown."""
    offset: float = 0.0
    """True depth where the counter shows nothing [m]."""
    marks: tuple[tuple[float, float], ...] = ()
    """(true [m], shown [m]) of marks on the line; given, they replace scale and offset."""
    cable: Cable = "as-shown"
    """"unloaded": the counter shows the slack length of `Line`, which its load and the rock's warmth lengthen."""
    max_speed: float = 30.0
    """A depth that changes faster has jumped [m/s]."""
    max_acceleration: float = 5.0
    """A depth whose speed changes faster has jumped [m/s²]."""
    u_offset: float = 0.0
    """Of all depths alike [m]; what grows with depth is `Instrument.u_depth_fraction`."""

    def __post_init__(self) -> None:
        _Checked.__post_init__(self)
        _refuse_unless(self.scale > 0.0, "scale", self.scale, "", "more than 0")
        for name in ("max_speed", "max_acceleration"):
            _refuse_unless(getattr(self, name) > 0.0, name, getattr(self, name), "", "more than 0")
        rising = [sorted(set(one)) == list(one) for one in zip(*self.marks, strict=True)]
        _refuse_unless(all(rising), "marks", self.marks, "m", "true and shown depths that both rise")
        alone = self.scale == 1.0 and self.offset == 0.0
        _refuse_unless(not self.marks or alone, "marks", self.marks, "m", "no scale or offset beside them")


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
    u_end: float = 0.001
    """Of the known end offset, each axis [m]."""
    method: Method = "average"
    readings: Taken = "all"
    """Which readings are summed: every one, or only the means taken at rest."""

    def __post_init__(self) -> None:
        _Checked.__post_init__(self)
        both = (self.end_east is None) == (self.end_north is None)
        _refuse_unless(
            both, "end_east" if self.end_east is None else "end_north", None, "m", "both ends or none"
        )


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
    u_drag_fraction: float = 0.1
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

    def __post_init__(self) -> None:
        _Checked.__post_init__(self)
        for row in self.cross_flow:
            _refuse_unless(row[0] < row[1], "cross_flow", row[:2], "m", "from above to: [from m, to m, ...]")

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
    calibration_valid_days: float = 365.0
    """A calibration older than this is pointed out."""
    spike: float = 1.0 * DEGREE
    """A tilt that stands apart by more from those just before it is left aside [rad]."""
    range: float | None = None
    """Largest tilt that an axis can show [rad]; readings there are left aside."""
    lowest_temperature: float | None = None
    highest_temperature: float | None = None
    """Of the probe, as its maker allows [K]."""
    lowest_supply: float | None = None
    """[V]."""
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
    bad_lines_per_minute: float = 30.0
    """So many unreadable lines within a minute are an alarm."""
    spin: float = 30.0 * DEGREE
    """Faster turning of the probe about its own axis is an alarm [rad/s]."""
    frozen: float = 2.0
    """Both tilts the same to the last digit for so long on a moving line are an alarm [s]."""
    latching: tuple[AlarmName, ...] = ("depth jump",)
    """Alarms that stay until somebody acknowledges them."""

    def __post_init__(self) -> None:
        _Checked.__post_init__(self)
        _refuse_unless(self.warning <= self.action, "warning", self.warning, "m", "at most the action limit")


@dataclass(frozen=True, slots=True, kw_only=True)
class Assumptions:
    """Everything that a prediction and a verdict rest on."""

    site: Site
    shaft: Shaft
    run: Run
    depth: Depth = field(default_factory=Depth)
    guide: Guide = field(default_factory=Guide)
    line: Line = field(default_factory=Line)
    body: Body | None = None
    """None: a body in vacuum."""
    air: Air = field(default_factory=Air)
    instrument: Instrument = field(default_factory=Instrument)
    limits: Limits = field(default_factory=Limits)

    @property
    def line_speed(self) -> float:
        """Speed of probe or line that a prediction is for [m/s], down positive; a falling body has none, so 0."""
        return {"guided": self.guide.line_speed, "hung": self.line.line_speed, "drop": 0.0}[self.run.kind]
