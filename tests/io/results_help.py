"""Reductions built by hand for the tests of what is written from them."""

from dataclasses import replace
from datetime import UTC, datetime
from pathlib import Path

from record_help import site

from eastfall.io.arrivals import RunEvent
from eastfall.io.reduce import Reduction
from eastfall.io.seal import Verification
from eastfall.physics.findings import AlarmChange, Closure, RestPoint, Result, Station


def station(depth: float, east: float, north: float = 0.0, *, passing: int = 0, **changes: object) -> Station:
    """Return a station with that residual [m], expected 1 mm west and 2 mm north."""
    one = Station(
        number=0,
        depth=depth,
        passing=passing,
        direction="up" if passing % 2 else "down",
        time=10.0 * depth,
        measured_east=east - 0.001,
        measured_north=north + 0.002,
        expected_east=-0.001,
        expected_north=0.002,
        u_east=0.001,
        u_north=0.0012,
        warning=0.015,
        action=0.025,
        verdict="within",
        readings=4,
        still=False,
        inputs=("tilt, zero", "azimuth"),
        parts=((0.0009, 0.001), (4e-4, 6e-4)),
    )
    return replace(one, **changes)  # type: ignore[arg-type]


def numbered(*stations: Station) -> tuple[Station, ...]:
    """Give the stations their numbers."""
    return tuple(replace(one, number=number) for number, one in enumerate(stations))


STATIONS = numbered(
    station(10.0, 0.003, -0.001),
    station(20.0, 0.0071234, -0.0124567),
    station(30.5, 0.0262, 0.004, verdict="over", measured_north=float("nan")),
    station(30.5, 0.0261, 0.004, passing=1, verdict="over"),
    station(20.0, 0.007, -0.0119, passing=1, verdict="undecided"),
)
RESULT = Result(
    frames=400,
    stations=STATIONS,
    alarms=(
        AlarmChange(
            time=1003.5,
            depth=30.1,
            name="action limit",
            old="normal",
            new="active",
            message="26.2 mm",
            host_time=3.5,
        ),
        AlarmChange(
            time=1004.0,
            depth=float("nan"),
            name="feed silent",
            old="active",
            new="acknowledged",
            host_time=4.0,
        ),
    ),
    closure=Closure(depth=20.0, east=-0.003, north=0.0, expected_east=-0.0025, expected_north=0.0),
    rest_point=RestPoint(
        east=0.001,
        north=-0.002,
        u_east=0.0001,
        u_north=0.0002,
        covariance_east_north=0.0,
        period=46.5,
        decay=float("inf"),
        swings=3.0,
        fits=True,
    ),
)
SOUND = Verification(
    state="intact",
    path="kestrel.eastfall.jsonl",
    good_lines=420,
    good_until_time=99.0,
    first_bad_line=None,
    sealed=True,
    seal="5e" * 32,
    reason="every seal holds, up to the final one",
)


def reduction(result: Result = RESULT, **changes: object) -> Reduction:
    """Return a reduction of that result."""
    used = site()
    one = Reduction(
        path=Path("kestrel.eastfall.jsonl"),
        site=used,
        differences=(),
        started_at=datetime(2026, 1, 14, 8, 30, 5, tzinfo=UTC),
        kind="guided",
        frames=400,
        rejected=3,
        unreadable=0,
        faults={"checksum wrong": 3},
        unused={},
        result=result,
        standing=None,
        events=(
            RunEvent(time=4.0, name="acknowledge", fields={"name": "feed silent", "who": "R. Vane"}),
            RunEvent(time=5.0, name="note", fields={"text": "water at 12 m", "who": "R. Vane"}),
        ),
        duration=99.0,
        verification=SOUND,
    )
    return replace(one, **changes)  # type: ignore[arg-type]
