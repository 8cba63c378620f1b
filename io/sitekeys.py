"""Every key of the site file: its type, range and a line of help, and the one rule from its unit to SI.

Defaults stand in `physics.settings` alone: a key that is not given is left out when the record is built. The site
form and the messages read unit, range, default and help from here.
"""

import math
import re
from dataclasses import MISSING, dataclass, fields
from typing import Annotated, Any, Literal, get_args

import msgspec
from msgspec import UNSET, Meta, UnsetType

from eastfall.physics import settings
from eastfall.physics.settings import ARCSECOND, DEGREE

Form = Literal["columns", "iec61162"]
CheckSum = Literal["none", "xor", "crc16-modbus"]
ColumnName = Literal[
    "time_s",
    "depth_m",
    "tilt_a_deg",
    "tilt_b_deg",
    "east_mm",
    "north_mm",
    "azimuth_deg",
    "temperature_c",
    "supply_v",
    "face_deg",
    "-",
]
_Depth = Annotated[float, Meta(ge=-1000.0, le=12000.0)]
_Text = Annotated[str, Meta(max_length=200)]


class _Section(msgspec.Struct, forbid_unknown_fields=True, frozen=True, kw_only=True):
    """A section of the file; a key that is not given stays UNSET."""


class SiteKeys(_Section, frozen=True, kw_only=True):
    """[site]."""

    name: Annotated[str, Meta(max_length=200, description="What the shaft is called")] | UnsetType = UNSET
    latitude_deg: Annotated[float, Meta(ge=-90.0, le=90.0, description="Geodetic latitude, north positive")]
    longitude_deg: (
        Annotated[
            float, Meta(ge=-180.0, le=360.0, description="East positive; only for magnetic or grid north")
        ]
        | UnsetType
    ) = UNSET
    grid: (
        Annotated[str, Meta(max_length=40, description="Projection of grid north, e.g. EPSG:25832")]
        | UnsetType
    ) = UNSET
    elevation_m: (
        Annotated[float, Meta(ge=-1000.0, le=9000.0, description="Collar above the ellipsoid")] | UnsetType
    ) = UNSET
    gravity_mps2: (
        Annotated[
            float, Meta(ge=9.7, le=9.9, description="Measured at the collar; else normal gravity there")
        ]
        | UnsetType
    ) = UNSET
    rock_density: (
        Annotated[
            tuple[tuple[_Depth, Annotated[float, Meta(ge=0.0, le=8000.0)]], ...],
            Meta(min_length=1, description="[from depth m, kg/m3] downward; 0 is open air"),
        ]
        | UnsetType
    ) = UNSET
    deflections_arcsec: (
        Annotated[
            tuple[tuple[_Depth, float, float], ...],
            Meta(description="Measured [depth m, north, east] deflection of the vertical against the collar"),
        ]
        | UnsetType
    ) = UNSET
    u_latitude_deg: (
        Annotated[float, Meta(ge=0.0, le=5.0, description="Its standard uncertainty")] | UnsetType
    ) = UNSET
    u_elevation_m: (
        Annotated[float, Meta(ge=0.0, le=1000.0, description="Its standard uncertainty")] | UnsetType
    ) = UNSET
    u_gravity_mps2: (
        Annotated[float, Meta(ge=0.0, le=0.1, description="Its standard uncertainty")] | UnsetType
    ) = UNSET
    u_rock_density_kgm3: (
        Annotated[float, Meta(ge=0.0, le=2000.0, description="Its standard uncertainty")] | UnsetType
    ) = UNSET
    u_deflection_arcsec: (
        Annotated[
            float, Meta(ge=0.0, le=120.0, description="Unknown bending of the vertical from collar to bottom")
        ]
        | UnsetType
    ) = UNSET


class ShaftKeys(_Section, frozen=True, kw_only=True):
    """[shaft]."""

    depth_m: Annotated[float, Meta(gt=0.0, le=12000.0, description="Collar to the deepest point of the run")]
    diameter_m: (
        Annotated[float, Meta(gt=0.0, le=100.0, description="Round; allows wall contact and clearance")]
        | UnsetType
    ) = UNSET
    centre_east_m: (
        Annotated[float, Meta(ge=-50.0, le=50.0, description="Shaft centre from the reference point")]
        | UnsetType
    ) = UNSET
    centre_north_m: (
        Annotated[float, Meta(ge=-50.0, le=50.0, description="Shaft centre from the reference point")]
        | UnsetType
    ) = UNSET


class RunKeys(_Section, frozen=True, kw_only=True):
    """[run]."""

    kind: Annotated[
        settings.Kind, Meta(description="guided: probe in guides; hung: plumb line; drop: falling body")
    ]
    reference: (
        Annotated[settings.Reference, Meta(description="The line that offsets are measured from")] | UnsetType
    ) = UNSET
    station_every_m: (
        Annotated[float, Meta(ge=0.01, le=1000.0, description="Spacing of stations")] | UnsetType
    ) = UNSET


class GuideKeys(_Section, frozen=True, kw_only=True):
    """[guide]."""

    line_speed_mps: (
        Annotated[float, Meta(ge=-30.0, le=30.0, description="For predictions, down positive")] | UnsetType
    ) = UNSET
    start_east_mm: (
        Annotated[float, Meta(ge=-1e5, le=1e5, description="Known offset of the first station")] | UnsetType
    ) = UNSET
    start_north_mm: (
        Annotated[float, Meta(ge=-1e5, le=1e5, description="Known offset of the first station")] | UnsetType
    ) = UNSET
    end_east_mm: (
        Annotated[float, Meta(ge=-1e5, le=1e5, description="Known offset of the deepest station")] | UnsetType
    ) = UNSET
    end_north_mm: (
        Annotated[float, Meta(ge=-1e5, le=1e5, description="Known offset of the deepest station")] | UnsetType
    ) = UNSET
    method: (
        Annotated[settings.Method, Meta(description="How tilt is summed between readings")] | UnsetType
    ) = UNSET


class LineKeys(_Section, frozen=True, kw_only=True):
    """[line]."""

    bob_mass_kg: Annotated[float, Meta(gt=0.0, le=5000.0, description="Mass of the bob")] | UnsetType = UNSET
    bob_density_kgm3: (
        Annotated[float, Meta(gt=500.0, le=23000.0, description="Of the bob's material, for buoyancy")]
        | UnsetType
    ) = UNSET
    mass_per_length_kgpm: (
        Annotated[float, Meta(ge=0.0, le=5.0, description="Of the wire; 0 is weightless")] | UnsetType
    ) = UNSET
    diameter_mm: Annotated[float, Meta(gt=0.0, le=50.0, description="Of the wire")] | UnsetType = UNSET
    young_gpa: (
        Annotated[float, Meta(gt=0.0, le=1000.0, description="Young's modulus of the wire")] | UnsetType
    ) = UNSET
    thermal_expansion_ppmpc: (
        Annotated[float, Meta(ge=0.0, le=100.0, description="Of the wire, millionths per degree")] | UnsetType
    ) = UNSET
    line_speed_mps: (
        Annotated[float, Meta(ge=-30.0, le=30.0, description="While being lowered, down positive")]
        | UnsetType
    ) = UNSET
    u_bob_mass_kg: (
        Annotated[float, Meta(ge=0.0, le=500.0, description="Its standard uncertainty")] | UnsetType
    ) = UNSET


class BodyKeys(_Section, frozen=True, kw_only=True):
    """[body]."""

    mass_kg: Annotated[float, Meta(gt=0.0, le=10000.0, description="Mass of the falling body")]
    diameter_mm: Annotated[
        float, Meta(gt=0.0, le=5000.0, description="Its diameter, for drag and wall contact")
    ]
    drag_coefficient: (
        Annotated[
            Annotated[float, Meta(ge=0.0, le=5.0)] | Literal["sphere"],
            Meta(description='"sphere", or a number on the area of that diameter'),
        ]
        | UnsetType
    ) = UNSET
    release_east_mm: (
        Annotated[float, Meta(ge=-5e4, le=5e4, description="Release point from the reference point")]
        | UnsetType
    ) = UNSET
    release_north_mm: (
        Annotated[float, Meta(ge=-5e4, le=5e4, description="Release point from the reference point")]
        | UnsetType
    ) = UNSET
    release_speed_east_mmps: (
        Annotated[float, Meta(ge=-1e4, le=1e4, description="Velocity at release")] | UnsetType
    ) = UNSET
    release_speed_north_mmps: (
        Annotated[float, Meta(ge=-1e4, le=1e4, description="Velocity at release")] | UnsetType
    ) = UNSET
    release_speed_down_mmps: (
        Annotated[float, Meta(ge=-1e5, le=1e5, description="Velocity at release; negative is thrown up")]
        | UnsetType
    ) = UNSET
    u_release_mm: (
        Annotated[float, Meta(ge=0.0, le=1000.0, description="Standard uncertainty of each coordinate")]
        | UnsetType
    ) = UNSET
    u_release_speed_mmps: (
        Annotated[float, Meta(ge=0.0, le=1000.0, description="Standard uncertainty of each component")]
        | UnsetType
    ) = UNSET
    u_drag_fraction: (
        Annotated[float, Meta(ge=0.0, le=1.0, description="Relative, of the drag coefficient")] | UnsetType
    ) = UNSET


class AirKeys(_Section, frozen=True, kw_only=True):
    """[air]."""

    density_kgm3: (
        Annotated[float, Meta(ge=0.0, le=10.0, description="At the collar; 0 is vacuum, no buoyancy either")]
        | UnsetType
    ) = UNSET
    temperature_c: Annotated[float, Meta(ge=-60.0, le=80.0, description="At the collar")] | UnsetType = UNSET
    temperature_gradient_cpkm: (
        Annotated[float, Meta(ge=-50.0, le=80.0, description="Positive is warmer with depth")] | UnsetType
    ) = UNSET
    cross_flow: (
        Annotated[
            tuple[
                tuple[
                    _Depth,
                    _Depth,
                    Annotated[float, Meta(ge=0.0, le=40.0)],
                    Annotated[float, Meta(ge=-360.0, le=360.0)],
                ],
                ...,
            ],
            Meta(description="[from m, to m, speed m/s, toward azimuth deg]"),
        ]
        | UnsetType
    ) = UNSET
    vertical_mps: (
        Annotated[float, Meta(ge=-40.0, le=40.0, description="Of the air itself, down positive")] | UnsetType
    ) = UNSET
    u_density_kgm3: (
        Annotated[float, Meta(ge=0.0, le=5.0, description="Its standard uncertainty")] | UnsetType
    ) = UNSET
    u_vertical_mps: (
        Annotated[float, Meta(ge=0.0, le=20.0, description="Its standard uncertainty")] | UnsetType
    ) = UNSET
    u_cross_flow_fraction: (
        Annotated[float, Meta(ge=0.0, le=2.0, description="Relative, of every cross-flow speed")] | UnsetType
    ) = UNSET


class InstrumentKeys(_Section, frozen=True, kw_only=True):
    """[instrument]."""

    a_azimuth_deg: (
        Annotated[float, Meta(ge=-360.0, le=360.0, description="Of the A axis, clockwise")] | UnsetType
    ) = UNSET
    azimuth_from: Annotated[settings.North, Meta(description="The north it is counted from")] | UnsetType = (
        UNSET
    )
    zero_a_deg: (
        Annotated[float, Meta(ge=-10.0, le=10.0, description="What A reads when plumb")] | UnsetType
    ) = UNSET
    zero_b_deg: (
        Annotated[float, Meta(ge=-10.0, le=10.0, description="What B reads when plumb")] | UnsetType
    ) = UNSET
    scale_a: Annotated[float, Meta(ge=0.5, le=2.0, description="Reading per true tilt on A")] | UnsetType = (
        UNSET
    )
    scale_b: Annotated[float, Meta(ge=0.5, le=2.0, description="Reading per true tilt on B")] | UnsetType = (
        UNSET
    )
    cross_ab: (
        Annotated[float, Meta(ge=-0.2, le=0.2, description="Part of a B tilt that shows on A")] | UnsetType
    ) = UNSET
    cross_ba: (
        Annotated[float, Meta(ge=-0.2, le=0.2, description="Part of an A tilt that shows on B")] | UnsetType
    ) = UNSET
    zero_a_deg_per_c: Annotated[float, Meta(ge=-1.0, le=1.0, description="Drift of the zero")] | UnsetType = (
        UNSET
    )
    zero_b_deg_per_c: Annotated[float, Meta(ge=-1.0, le=1.0, description="Drift of the zero")] | UnsetType = (
        UNSET
    )
    scale_per_c: Annotated[float, Meta(ge=-0.01, le=0.01, description="Drift of the scale")] | UnsetType = (
        UNSET
    )
    reference_temperature_c: (
        Annotated[float, Meta(ge=-60.0, le=120.0, description="Where the drifts are zero")] | UnsetType
    ) = UNSET
    calibrated_on: (
        Annotated[
            str, Meta(pattern=r"^\d{4}-\d{2}-\d{2}$", description="Date of the calibration, e.g. 2026-03-01")
        ]
        | UnsetType
    ) = UNSET
    u_tilt_deg: (
        Annotated[float, Meta(ge=0.0, le=5.0, description="Random, one reading, standard uncertainty")]
        | UnsetType
    ) = UNSET
    u_zero_deg: Annotated[float, Meta(ge=0.0, le=5.0, description="Of the zeros")] | UnsetType = UNSET
    u_scale: Annotated[float, Meta(ge=0.0, le=0.5, description="Relative, of the scales")] | UnsetType = UNSET
    u_azimuth_deg: (
        Annotated[float, Meta(ge=0.0, le=90.0, description="Of the A axis' azimuth")] | UnsetType
    ) = UNSET
    u_depth_fraction: Annotated[float, Meta(ge=0.0, le=0.1, description="Relative, of depth")] | UnsetType = (
        UNSET
    )
    u_offset_mm: (
        Annotated[float, Meta(ge=0.0, le=1000.0, description="Of one direct offset, each axis")] | UnsetType
    ) = UNSET


class LimitKeys(_Section, frozen=True, kw_only=True):
    """[limits]."""

    warning_mm: (
        Annotated[float, Meta(gt=0.0, le=1e5, description="Warning limit on the residual")] | UnsetType
    ) = UNSET
    action_mm: (
        Annotated[float, Meta(gt=0.0, le=1e5, description="Action limit on the residual")] | UnsetType
    ) = UNSET
    ratio: (
        Annotated[
            float, Meta(ge=1.0, le=1e6, description="depth/ratio is a further action limit; the larger holds")
        ]
        | UnsetType
    ) = UNSET
    wall_clearance_mm: (
        Annotated[float, Meta(ge=0.0, le=1e5, description="Least distance to the shaft wall")] | UnsetType
    ) = UNSET
    lean_mmpm: (
        Annotated[float, Meta(gt=0.0, le=1000.0, description="Between neighbouring stations, mm per m")]
        | UnsetType
    ) = UNSET
    table_mm: (
        Annotated[
            tuple[
                tuple[_Depth, Annotated[float, Meta(gt=0.0, le=1e5)], Annotated[float, Meta(gt=0.0, le=1e5)]],
                ...,
            ],
            Meta(min_length=1, description="[depth m, warning, action] by depth, instead of the keys above"),
        ]
        | UnsetType
    ) = UNSET
    on_delay_s: (
        Annotated[float, Meta(ge=0.0, le=3600.0, description="Beyond for so long before an alarm")]
        | UnsetType
    ) = UNSET
    off_delay_s: (
        Annotated[float, Meta(ge=0.0, le=3600.0, description="Inside for so long before it returns")]
        | UnsetType
    ) = UNSET
    dead_band_mm: (
        Annotated[float, Meta(ge=0.0, le=1e4, description="Returns only inside limit minus this")] | UnsetType
    ) = UNSET
    feed_silent_s: (
        Annotated[float, Meta(gt=0.0, le=86400.0, description="No line for so long is an alarm")] | UnsetType
    ) = UNSET


class LinkKeys(_Section, frozen=True, kw_only=True):
    """[[link]]."""

    url: Annotated[
        str,
        Meta(
            min_length=1,
            max_length=500,
            description="Serial device, COM port, socket://host:port, emulate:, -, a file",
        ),
    ]
    baud: Annotated[int, Meta(ge=50, le=4_000_000, description="Serial speed")] = 9600
    form: Annotated[Form, Meta(description="What a line looks like")] = "columns"
    columns: Annotated[
        tuple[ColumnName, ...],
        Meta(
            min_length=1,
            max_length=40,
            description="names of the fields in order: " + ", ".join(get_args(ColumnName)),
        ),
    ] = ("depth_m", "tilt_a_deg", "tilt_b_deg")
    delimiter: Annotated[
        str,
        Meta(min_length=1, max_length=1, description="Between fields; a blank stands for any white space"),
    ] = ","
    checksum: Annotated[CheckSum, Meta(description="At the end of a line, after *")] = "none"
    latency_s: Annotated[float, Meta(ge=0.0, le=60.0, description="Age of a reading when it arrives")] = 0.0


class SiteDocument(_Section, frozen=True, kw_only=True):
    """The whole file."""

    site: SiteKeys
    shaft: ShaftKeys
    run: RunKeys
    guide: GuideKeys | None = None
    line: LineKeys | None = None
    body: BodyKeys | None = None
    air: AirKeys | None = None
    instrument: InstrumentKeys | None = None
    limits: LimitKeys | None = None
    link: Annotated[tuple[LinkKeys, ...], Meta(max_length=8)] = ()


SECTIONS: dict[str, type[_Section]] = {
    "site": SiteKeys,
    "shaft": ShaftKeys,
    "run": RunKeys,
    "guide": GuideKeys,
    "line": LineKeys,
    "body": BodyKeys,
    "air": AirKeys,
    "instrument": InstrumentKeys,
    "limits": LimitKeys,
    "link": LinkKeys,
}
RECORDS: dict[str, type] = {
    "site": settings.Site,
    "shaft": settings.Shaft,
    "run": settings.Run,
    "guide": settings.Guide,
    "line": settings.Line,
    "body": settings.Body,
    "air": settings.Air,
    "instrument": settings.Instrument,
    "limits": settings.Limits,
}

_UNITS: dict[str, tuple[str, str, float]] = {
    "_deg_per_c": ("_per_c", "deg/°C", DEGREE),
    "_deg": ("", "deg", DEGREE),
    "_arcsec": ("", "arcsec", ARCSECOND),
    "_mmps": ("", "mm/s", 1e-3),
    "_mmpm": ("", "mm/m", 1e-3),
    "_mps2": ("", "m/s²", 1.0),
    "_mps": ("", "m/s", 1.0),
    "_mm": ("", "mm", 1e-3),
    "_kgpm": ("", "kg/m", 1.0),
    "_kgm3": ("", "kg/m³", 1.0),
    "_kg": ("", "kg", 1.0),
    "_gpa": ("", "GPa", 1e9),
    "_ppmpc": ("", "1e-6/°C", 1e-6),
    "_cpkm": ("", "°C/km", 1e-3),
    "_m": ("", "m", 1.0),
    "_s": ("", "s", 1.0),
}
"""Suffix of a key: what stands for it in the SI name, how it is shown, and its size in SI units."""
_KELVIN = 273.15


def _suffix(name: str) -> str:
    return next((one for one in _UNITS if name.endswith(one)), "")


def si_name(name: str) -> str:
    """Return the field of `physics.settings` that a key stands for."""
    if name.endswith("temperature_c"):
        return name.removesuffix("_c")
    suffix = _suffix(name)
    return name.removesuffix(suffix) + _UNITS[suffix][0] if suffix else name


def unit(name: str) -> str:
    """Return the unit of a key as shown to people; empty for a word or a pure number."""
    if name.endswith("temperature_c"):
        return "°C"
    suffix = _suffix(name)
    return _UNITS[suffix][1] if suffix else ""


def to_si(name: str, value: Any) -> Any:
    """Convert the value of a key to SI units and radians."""
    if name == "cross_flow":
        return tuple((top, end, speed, toward * DEGREE) for top, end, speed, toward in value)
    if name in {"deflections_arcsec", "table_mm"}:
        size = _UNITS[_suffix(name)][2]
        return tuple((row[0], *(one * size for one in row[1:])) for row in value)
    if isinstance(value, str | tuple):
        return value
    if name.endswith("temperature_c"):
        return value + _KELVIN
    suffix = _suffix(name)
    return value * _UNITS[suffix][2] if suffix else value


def from_si(name: str, value: Any) -> Any:
    """Convert back: what to write for a key; a number is rounded to the 12 digits that survive the conversion."""
    if name == "cross_flow":
        return [[top, end, speed, _rounded(toward / DEGREE)] for top, end, speed, toward in value]
    if name in {"deflections_arcsec", "table_mm"}:
        size = _UNITS[_suffix(name)][2]
        return [[row[0], *(_rounded(one / size) for one in row[1:])] for row in value]
    if isinstance(value, tuple):
        return [list(one) if isinstance(one, tuple) else one for one in value]
    if isinstance(value, str) or value is None:
        return value
    if name.endswith("temperature_c"):
        return _rounded(value - _KELVIN)
    suffix = _suffix(name)
    return _rounded(value / _UNITS[suffix][2]) if suffix else value


def _rounded(value: float) -> float:
    return float(f"{value:.12g}") if math.isfinite(value) else value


@dataclass(frozen=True, slots=True, kw_only=True)
class Key:
    """One key, for messages and for the site form."""

    section: str
    name: str
    unit: str
    help: str
    choices: tuple[str, ...]
    low: float | None
    high: float | None
    required: bool
    default: Any
    """In the unit of the key; None where there is none."""
    expectation: str
    """What is accepted, in words, as it follows "expected"."""


def names_in(section: str) -> list[str]:
    """Return the keys of a section, or the sections for an empty name."""
    plain = re.sub(r"\[\d+\]", "", section)
    struct = SECTIONS.get(plain)
    return list(struct.__struct_fields__) if struct is not None else list(SECTIONS)


def key(path: str) -> Key | None:
    """Return what is known of "section.key"; None for anything else."""
    section, _, name = path.partition(".")
    struct = SECTIONS.get(section)
    if struct is None or name not in struct.__struct_fields__:
        return None
    return _described(section, name, struct)


def all_keys() -> list[Key]:
    """Return every key in the order of the file."""
    return [
        _described(section, name, struct)
        for section, struct in SECTIONS.items()
        for name in struct.__struct_fields__
    ]


def _described(section: str, name: str, struct: type[_Section]) -> Key:
    annotation = struct.__annotations__[name]
    candidates = (annotation, *get_args(annotation))
    base, meta = get_args(next(one for one in candidates if hasattr(one, "__metadata__")))[:2]
    choices = get_args(base) if _is_choice(base) else ()
    low, high = _range(meta)
    return Key(
        section=section,
        name=name,
        unit=unit(name),
        help=meta.description or "",
        choices=tuple(choices),
        low=low,
        high=high,
        required=_is_required(struct, name),
        default=_default(section, name),
        expectation=_in_words(base, meta, tuple(choices), unit(name)),
    )


def _is_choice(annotation: Any) -> bool:
    return getattr(annotation, "__origin__", None) is Literal


def _is_required(struct: type[_Section], name: str) -> bool:
    return any(one.name == name and one.required for one in msgspec.structs.fields(struct))


def _default(section: str, name: str) -> Any:
    if section == "link":
        found = next(one for one in msgspec.structs.fields(LinkKeys) if one.name == name)
        return None if found.required else found.default
    default = next(one.default for one in fields(RECORDS[section]) if one.name == si_name(name))
    return None if default is MISSING else from_si(name, default)


def _in_words(base: Any, meta: Meta, choices: tuple[str, ...], shown: str) -> str:
    if choices:
        return "one of " + ", ".join(choices)
    if base is str:
        return (
            meta.description
            if meta.pattern and meta.description
            else f"text of at most {meta.max_length} characters"
        )
    low, high = _range(meta)
    if base in {float, int} and low is not None and high is not None:
        what = "a whole number" if base is int else "a number"
        between = f"more than {low:g} and at most" if meta.gt is not None else f"from {low:g} to"
        return f"{what} {between} {high:g} {shown}".rstrip()
    return meta.description or "another value"


def _range(meta: Meta) -> tuple[float | None, float | None]:
    return (meta.ge if meta.ge is not None else meta.gt), (meta.le if meta.le is not None else meta.lt)
