"""The keys of what reads the shaft and of what is tolerated: instrument, limits, links; data, as `sitesections`."""

from typing import Annotated, Literal, get_args

import msgspec
from msgspec import UNSET, Meta, UnsetType

from eastfall.io.checksum import Checksum
from eastfall.io.columns import DecimalSign
from eastfall.physics import settings

Form = Literal["columns", "iec61162"]
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
Depth = Annotated[float, Meta(ge=-1000.0, le=12000.0)]


class Section(msgspec.Struct, forbid_unknown_fields=True, frozen=True, kw_only=True):
    """A section of the file; a key that is not given stays UNSET."""


class InstrumentKeys(Section, frozen=True, kw_only=True):
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
    calibration_valid_days: (
        Annotated[float, Meta(gt=0.0, le=36500.0, description="An older calibration is pointed out")]
        | UnsetType
    ) = UNSET
    spike_deg: (
        Annotated[
            float,
            Meta(
                gt=0.0,
                le=180.0,
                description="A tilt so far from those just before it is left aside as a spike",
            ),
        ]
        | UnsetType
    ) = UNSET
    range_deg: (
        Annotated[
            float,
            Meta(gt=0.0, le=90.0, description="Largest tilt an axis shows; readings there are left aside"),
        ]
        | UnsetType
    ) = UNSET
    lowest_temperature_c: (
        Annotated[float, Meta(ge=-100.0, le=300.0, description="Of the probe, as its maker allows")]
        | UnsetType
    ) = UNSET
    highest_temperature_c: (
        Annotated[float, Meta(ge=-100.0, le=300.0, description="Of the probe, as its maker allows")]
        | UnsetType
    ) = UNSET
    lowest_supply_v: (
        Annotated[float, Meta(ge=0.0, le=1000.0, description="A lower supply is an alarm")] | UnsetType
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


class LimitKeys(Section, frozen=True, kw_only=True):
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
                tuple[Depth, Annotated[float, Meta(gt=0.0, le=1e5)], Annotated[float, Meta(gt=0.0, le=1e5)]],
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
    bad_lines_per_minute: (
        Annotated[float, Meta(ge=1.0, le=1e5, description="So many unreadable lines are an alarm")]
        | UnsetType
    ) = UNSET
    spin_degps: (
        Annotated[float, Meta(gt=0.0, le=300.0, description="Faster turning of the probe is an alarm")]
        | UnsetType
    ) = UNSET
    frozen_s: (
        Annotated[
            float,
            Meta(gt=0.0, le=3600.0, description="Tilt the same for so long on a moving line is an alarm"),
        ]
        | UnsetType
    ) = UNSET
    latching: (
        Annotated[
            tuple[settings.AlarmName, ...],
            Meta(
                description="alarms that stay until acknowledged, of: "
                + ", ".join(get_args(settings.AlarmName))
            ),
        ]
        | UnsetType
    ) = UNSET


class LinkKeys(Section, frozen=True, kw_only=True):
    """[[link]]."""

    url: Annotated[
        str,
        Meta(
            min_length=1,
            max_length=500,
            description="Serial device, COM port, socket://host:port, emulate:, hand:, -, a file",
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
    checksum: Annotated[Checksum, Meta(description="At the end of a line, after *")] = "none"
    decimal: Annotated[DecimalSign, Meta(description="Before the fraction of a number")] = "point"
    latency_s: Annotated[float, Meta(ge=0.0, le=60.0, description="Age of a reading when it arrives")] = 0.0
