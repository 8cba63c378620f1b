"""Hand-made findings and sources for the screen's tests, and an environment that does not colour them."""

import asyncio
import sys
import time
from collections.abc import Callable
from dataclasses import replace
from pathlib import Path
from types import SimpleNamespace
from typing import Any

import numpy as np
import pytest

from eastfall.physics.findings import AlarmView, Findings, Rows, Standing, Station
from eastfall.physics.settings import Assumptions, Run, Shaft, Site
from eastfall.tui.session import Session
from eastfall.tui.store import History, Snapshot

sys.path.insert(0, str(Path(__file__).parent))  # the helpers beside the tests stand in no package

SHAFT_DEPTH = 300.0
WARNING, ACTION = 0.015, 0.030


async def _settled(min_sleep: float = 0.0, max_sleep: float = 1.0) -> None:
    """Wait until the process rests, as the screen library's pilot does, in windows of 10 ms in place of its 20.

    Its own wait is most of what a test of many keys costs; what is due in the event loop runs before the window ends.
    """
    end = time.monotonic() + max_sleep
    while time.monotonic() < end:
        before, began = time.process_time(), time.monotonic()
        await asyncio.sleep(max(_WINDOW, min_sleep))
        # Woken late, the process was not at rest: another had the core.
        in_time = time.monotonic() - began < 2.0 * max(_WINDOW, min_sleep)
        if in_time and time.process_time() - before < _WINDOW / 10.0:
            return


_WINDOW = 0.01


@pytest.fixture(autouse=True)
def plain_environment(monkeypatch: pytest.MonkeyPatch, tmp_path_factory: pytest.TempPathFactory) -> None:
    """Take away what would change colours, glyphs and motion, and the settings of whoever runs the tests."""
    monkeypatch.setenv("EASTFALL_CONFIG", str(tmp_path_factory.mktemp("settings") / "settings.toml"))
    for name in ("NO_COLOR", "COLORTERM", "EASTFALL_GLYPHS", "TEXTUAL", "TEXTUAL_THEME"):
        monkeypatch.delenv(name, raising=False)
    monkeypatch.setenv("TEXTUAL_ANIMATIONS", "none")
    monkeypatch.setenv("LOGNAME", "Ada")
    monkeypatch.setattr("textual.pilot.wait_for_idle", _settled)


STANDING = Standing(
    time=400.0,
    depth=60.0,
    speed=-1.3,
    passing=1,
    direction="up",
    measured_east=0.0099,
    measured_north=0.0008,
    expected_east=0.0013,
    expected_north=0.0,
    u_east=0.0009,
    u_north=0.0012,
    warning=WARNING,
    action=ACTION,
    verdict="within",
    rest_point=None,
    hold_still=None,
    wall_clearance=2.74,
    frames=4000,
)
STATION = Station(
    number=0,
    depth=10.0,
    passing=0,
    direction="down",
    time=5.0,
    measured_east=0.001,
    measured_north=0.0,
    expected_east=0.0,
    expected_north=0.0,
    u_east=0.001,
    u_north=0.001,
    warning=WARNING,
    action=ACTION,
    verdict="within",
    readings=12,
    still=True,
)


@pytest.fixture
def standing() -> Callable[..., Standing]:
    """Build a standing answer: residual 8.6 mm east, 0.8 mm north at 60 m."""
    return lambda **changes: replace(STANDING, **changes)


@pytest.fixture
def station() -> Callable[..., Station]:
    """Build a closed station."""
    return lambda **changes: replace(STATION, **changes)


def make_rows(count: int) -> Rows:
    """Go down 300 m and up to 60 m; measured sways 12 mm about an expected that turns with the pass."""
    time = np.linspace(0.0, 400.0, count)
    depth = np.interp(time, [0.0, 200.0, 210.0, 400.0], [0.0, 300.0, 300.0, 60.0])
    passing = (time > 210.0).astype(float)
    expected = -2.2e-5 * depth * np.where(passing > 0, -1.0, 1.0)
    still = np.zeros(count)
    return Rows(
        np.array(
            [
                time,
                depth,
                np.gradient(depth, time) if count > 1 else still,
                passing,
                np.where(passing > 0, -1.0, 1.0),
                expected + 0.012 * np.sin(depth / 70.0),
                0.018 * (depth / 300.0) ** 2,
                expected,
                2e-4 * (depth / 300.0) ** 2,
                1e-3 + 4e-3 * depth / 300.0,
                1e-3 + 4e-3 * depth / 300.0,
                still + WARNING,
                still + ACTION,
                time,
            ]
        )
    )


@pytest.fixture
def rows() -> Callable[[int], Rows]:
    """Build rows of a run down and up."""
    return make_rows


def make_health(**changes: Any) -> Any:
    """Return feed and record health with the fields of the real one."""
    link = SimpleNamespace(
        name="/dev/ttyUSB0",
        url="/dev/ttyUSB0",
        state="open",
        retry_in=None,
        lines=4003,
        rate=10.2,
        silent_for=0.1,
        last_fault="",
        queue_dropped=0,
    )
    fields = {
        "links": (link,),
        "frames": 4000,
        "rejected": 3,
        "faults": {"checksum": 3},
        "log_path": "/tmp/run.eastfall.jsonl",  # noqa: S108 (a name on a screen, no file)
        "log_bytes": 312345,
        "log_state": "recording",
        "log_lost": 0,
        "set_aside": 0,
    }
    return SimpleNamespace(**(fields | changes))


@pytest.fixture
def health() -> Callable[..., Any]:
    """Build feed and record health."""
    return make_health


ALARM = AlarmView(
    name="warning limit",
    state="active",
    since=312.0,
    depth=212.3,
    message="warning limit at 212.3 m, 15.8 mm",
)


@pytest.fixture
def alarm() -> Callable[..., AlarmView]:
    """Build an alarm."""
    return lambda **changes: replace(ALARM, **changes)


@pytest.fixture
def session() -> Callable[..., Session]:
    """Build what is known of a run before its first reading."""

    def build(kind: str = "guided", mode: str = "live", **more: Any) -> Session:
        return Session(
            assumptions=Assumptions(
                site=Site(name="Brackwater North", latitude=1.0),
                shaft=Shaft(depth=SHAFT_DEPTH, diameter=5.5),
                run=Run(kind=kind),  # type: ignore[arg-type]
            ),
            mode=mode,  # type: ignore[arg-type]
            title="Brackwater North",
            bob=lambda depth: (0.0 * depth, 2e-9 * depth**2),
            fall=lambda depth: (1.2e-6 * depth**1.5, 0.0 * depth),
            **more,
        )

    return build


@pytest.fixture
def snapshot() -> Callable[..., Snapshot]:
    """Build a snapshot of a run down and up with 30 stations."""

    def build(count: int = 2000, mode: str = "live", **state: Any) -> Snapshot:
        history = History(mode)  # type: ignore[arg-type]
        stations = tuple(
            replace(STATION, number=i, depth=10.0 * (i + 1), time=5.0 + 6.0 * i, measured_east=0.001 * i)
            for i in range(30)
        )
        history.add([Findings(rows=make_rows(count), stations=stations)])
        fields = {"time": 400.0, "standing": STANDING, "health": make_health()}
        return history.snapshot(**(fields | state))

    return build
