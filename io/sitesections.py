"""The sections and keys of the site file: type, range and a line of help for each; data, nothing is converted here."""

from typing import Annotated, Literal

from msgspec import UNSET, Meta, UnsetType

from eastfall.io.readerkeys import Depth, InstrumentKeys, LimitKeys, LinkKeys, Section
from eastfall.physics import settings


class SiteKeys(Section, frozen=True, kw_only=True):
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
            tuple[tuple[Depth, Annotated[float, Meta(ge=0.0, le=8000.0)]], ...],
            Meta(min_length=1, description="[from depth m, kg/m3] downward; 0 is open air"),
        ]
        | UnsetType
    ) = UNSET
    deflections_arcsec: (
        Annotated[
            tuple[tuple[Depth, float, float], ...],
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


class ShaftKeys(Section, frozen=True, kw_only=True):
    """[shaft]."""

    depth_m: Annotated[float, Meta(ge=0.1, le=12000.0, description="Collar to the deepest point of the run")]
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


class RunKeys(Section, frozen=True, kw_only=True):
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
    hold_s: (
        Annotated[float, Meta(gt=0.0, le=600.0, description="At rest for so long closes a station")]
        | UnsetType
    ) = UNSET


class DepthKeys(Section, frozen=True, kw_only=True):
    """[depth]."""

    scale: (
        Annotated[
            float,
            Meta(ge=0.1, le=10.0, description="True metres in one shown; 0.3048 for a counter in feet"),
        ]
        | UnsetType
    ) = UNSET
    offset_m: (
        Annotated[float, Meta(ge=-1000.0, le=1000.0, description="True depth where the counter shows 0")]
        | UnsetType
    ) = UNSET
    marks: (
        Annotated[
            tuple[tuple[Depth, Depth], ...],
            Meta(
                min_length=1,
                description="[true m, shown m] of marks on the line, straight between; instead of scale and offset",
            ),
        ]
        | UnsetType
    ) = UNSET
    cable: (
        Annotated[
            settings.Cable,
            Meta(
                description="unloaded: the counter shows the slack length of [line]; stretch and warmth are added"
            ),
        ]
        | UnsetType
    ) = UNSET
    max_speed_mps: (
        Annotated[float, Meta(gt=0.0, le=100.0, description="Depth that changes faster has jumped")]
        | UnsetType
    ) = UNSET
    max_acceleration_mps2: (
        Annotated[float, Meta(gt=0.0, le=100.0, description="Depth whose speed changes faster has jumped")]
        | UnsetType
    ) = UNSET
    u_offset_m: (
        Annotated[float, Meta(ge=0.0, le=100.0, description="Of all depths alike, standard uncertainty")]
        | UnsetType
    ) = UNSET


class GuideKeys(Section, frozen=True, kw_only=True):
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
    u_end_mm: (
        Annotated[float, Meta(ge=0.0, le=1e4, description="Of the known end, standard uncertainty")]
        | UnsetType
    ) = UNSET
    method: (
        Annotated[settings.Method, Meta(description="How tilt is summed between readings")] | UnsetType
    ) = UNSET
    readings: (
        Annotated[
            settings.Taken, Meta(description="all: every reading is summed; still: only means taken at rest")
        ]
        | UnsetType
    ) = UNSET


class LineKeys(Section, frozen=True, kw_only=True):
    """[line]."""

    bob_mass_kg: Annotated[float, Meta(ge=1e-6, le=5000.0, description="Mass of the bob")] | UnsetType = UNSET
    bob_density_kgm3: (
        Annotated[float, Meta(gt=500.0, le=23000.0, description="Of the bob's material, for buoyancy")]
        | UnsetType
    ) = UNSET
    mass_per_length_kgpm: (
        Annotated[float, Meta(ge=0.0, le=5.0, description="Of the wire; 0 is weightless")] | UnsetType
    ) = UNSET
    diameter_mm: Annotated[float, Meta(ge=0.001, le=50.0, description="Of the wire")] | UnsetType = UNSET
    young_gpa: (
        Annotated[float, Meta(ge=0.001, le=1000.0, description="Young's modulus of the wire")] | UnsetType
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


class BodyKeys(Section, frozen=True, kw_only=True):
    """[body]."""

    mass_kg: Annotated[float, Meta(ge=1e-6, le=10000.0, description="Mass of the falling body")]
    diameter_mm: Annotated[
        float, Meta(ge=0.01, le=5000.0, description="Its diameter, for drag and wall contact")
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


class AirKeys(Section, frozen=True, kw_only=True):
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
                    Depth,
                    Depth,
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


class SiteDocument(Section, frozen=True, kw_only=True):
    """The whole file."""

    site: SiteKeys
    shaft: ShaftKeys
    run: RunKeys
    depth: DepthKeys | None = None
    guide: GuideKeys | None = None
    line: LineKeys | None = None
    body: BodyKeys | None = None
    air: AirKeys | None = None
    instrument: InstrumentKeys | None = None
    limits: LimitKeys | None = None
    link: Annotated[tuple[LinkKeys, ...], Meta(max_length=8)] = ()


SECTIONS: dict[str, type[Section]] = {
    "site": SiteKeys,
    "shaft": ShaftKeys,
    "run": RunKeys,
    "depth": DepthKeys,
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
    "depth": settings.Depth,
    "guide": settings.Guide,
    "line": settings.Line,
    "body": settings.Body,
    "air": settings.Air,
    "instrument": settings.Instrument,
    "limits": settings.Limits,
}
