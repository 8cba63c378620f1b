"""Site files and run logs of any content, from whatever gives numbers: a fuzzer's bytes or a property test."""

import json
import shutil
from datetime import UTC, datetime
from pathlib import Path
from typing import Protocol
from unittest.mock import patch

import numpy as np

from eastfall.io import prediction, sitekeys
from eastfall.io.arrivals import LineBlock, RunEvent
from eastfall.io.lineprediction import line_table
from eastfall.io.pipeline import Pipeline
from eastfall.io.recording import Recording
from eastfall.io.reduce import reduce_file
from eastfall.io.replay import Replay
from eastfall.io.report import report_text
from eastfall.io.runlog import RunLogWriter, verify_log
from eastfall.io.safetext import safe
from eastfall.io.sitefile import parse_site
from eastfall.io.siteplace import refusals_of
from eastfall.io.tables import reduce_table
from eastfall.physics.expected import ExpectedCurve, expected_curve
from eastfall.physics.settings import Assumptions


class Give(Protocol):
    """Where choices come from."""

    def whole(self, low: int, high: int) -> int:
        """Return a whole number from `low` to `high`."""

    def number(self, low: float, high: float) -> float:
        """Return a number from `low` to `high`."""


SITE = """\
[site]
latitude_deg = 57.3
[shaft]
depth_m = 300.0
[run]
kind = "guided"
[[link]]
url = "-"
"""
KEYS = [
    one
    for one in sitekeys.all_keys()
    if (one.section, one.name) not in {("site", "grid"), ("link", "url"), ("link", "baud")}
]


def any_site(give: Give) -> None:
    """Give known keys values; what is accepted makes a prediction and a run."""
    given = {
        "site": {"latitude_deg": 50.0},
        "shaft": {"depth_m": 300.0},
        "run": {"kind": '"guided"'},
        "link": {},
    }
    for _ in range(give.whole(0, 12)):
        key = KEYS[give.whole(0, len(KEYS) - 1)]
        begun = {"mass_kg": 0.5, "diameter_mm": 50.0} if key.section == "body" else {}
        given.setdefault(key.section, begun)[key.name] = value(key, give)
    parts = []
    for section, keys in given.items():
        parts.append("[[link]]\nurl = '-'" if section == "link" else f"[{section}]")
        parts += [f"{name} = {one}" for name, one in keys.items()]
    place = parse_site("\n".join(parts), "fuzz.toml")
    with refusals_of(place):
        depths = [place.assumptions.shaft.depth * part for part in (0.0, 0.3, 1.0)]
        json.dumps(prediction.predict(place.assumptions, depths).shape, allow_nan=False)
        json.dumps(prediction.budget(place.assumptions, depths), allow_nan=False)
        json.dumps(line_table(place.assumptions, depths), allow_nan=False)
        pipeline = Pipeline(place, armed=True)
    width = len(place.links[0].columns) if place.links else 0
    for number in range(give.whole(0, 60)):
        row = [b"%.6g" % give.number(-100.0, 1000.0) for _ in range(width)]
        line = (place.links[0].delimiter.encode() if place.links else b",").join(row) + b"\n"
        pipeline.take(LineBlock(data=line, times=np.array([number / 4.0]), first_line=number + 1))
    pipeline.close(100.0)


def value(key: sitekeys.Key, give: Give) -> str:
    """Return what to write behind a key, mostly something that it accepts."""
    low, high = key.low, key.high
    way = give.whole(0, 30)
    if way == 0:
        return ODD[give.whole(0, len(ODD) - 1)]
    if key.choices:
        return json.dumps(key.choices[give.whole(0, len(key.choices) - 1)])
    if low is None or high is None:
        return shaped(key.name, give)
    if way <= 2:
        return repr((low, high)[way - 1])
    if way == 3:
        return repr(key.default) if isinstance(key.default, int | float) else repr(low)
    found = give.number(low, high)
    return repr(int(found) if isinstance(key.default, int) else found)


def shaped(name: str, give: Give) -> str:
    """Return what is accepted by a key without a range."""
    within = give.number
    rows = {
        "rock_density": [[0.0, within(0.0, 5000.0)], [within(0.1, 400.0), within(0.0, 5000.0)]],
        "deflections_arcsec": [
            [0.0, 0.0, 0.0],
            [within(1.0, 400.0), within(-100.0, 100.0), within(-9.0, 9.0)],
        ],
        "marks": [[0.0, within(-1.0, 1.0)], [within(1.0, 400.0), within(1.0, 400.0)]],
        "cross_flow": [[within(0.0, 100.0), within(100.0, 400.0), within(0.0, 20.0), within(-360.0, 360.0)]],
        "table_mm": [[within(0.0, 300.0), within(0.1, 100.0), within(0.1, 200.0)]],
        "drag_coefficient": within(0.01, 5.0),
        "latching": ["tilt frozen", "link lost"][: give.whole(0, 2)],
        "columns": COLUMNS[give.whole(0, len(COLUMNS) - 1)],
        "delimiter": ",; \t"[give.whole(0, 3)],
        "calibrated_on": "2024-02-29",
        "name": "x",
    }
    return json.dumps(rows[name])


COLUMNS = (
    ["time_s", "depth_m", "tilt_a_deg", "tilt_b_deg"],
    ["depth_m", "tilt_a_deg", "tilt_b_deg", "azimuth_deg", "face_deg", "-"],
    ["depth_m", "east_mm", "north_mm"],
    ["tilt_a_deg", "tilt_b_deg"],
)
ODD = (
    "0",
    "-0.0",
    "1e-300",
    "1e300",
    "nan",
    "-inf",
    "true",
    '"x"',
    "[]",
    "[[0.0, 1.0]]",
    "[[0.0, 1000.0], [100.0, 2000.0]]",
    "[[100.0, 1.0], [0.0, 1.0]]",
    "[[0.0, 10.0, 1.0, 90.0]]",
    "[[10.0, 10.0, 1.0, 90.0], [5.0, 20.0, 1.0, -90.0]]",
    "[[0.0, 0.0, 0.0]]",
    '["depth_m", "tilt_a_deg"]',
    '["time_s", "depth_m", "east_mm", "north_mm"]',
    '["depth_m", "depth_m"]',
    "2024-02-30",
    "2024-02-29",
)
LARGE = (0.0, -0.0, 1e300, -1e300, 1e-300, 2.0**63)
NAMES = (
    "note",
    "acknowledge",
    "shelve",
    "condition",
    "link",
    "mark",
    "armed",
    "alarm",
    "end",
    "summary",
    "start",
    "lost",
)
FIELDS = {
    "note": ("text", "who"),
    "acknowledge": ("name", "who"),
    "shelve": ("name", "seconds", "reason", "who"),
    "condition": ("name", "on", "message"),
    "link": ("link", "state", "message", "cut"),
    "mark": ("depth_m", "east_m", "north_m", "who"),
    "alarm": ("name", "at", "from", "to", "depth", "message"),
    "summary": ("verdict", "deepest_m"),
    "lost": ("count", "message"),
}
NUMBERS = {"seconds", "depth_m", "east_m", "north_m", "at", "depth", "deepest_m", "count", "link"}
WORDS = (
    "warning limit",
    "action limit",
    "feed silent",
    "link lost",
    "down",
    "lost",
    "open",
    "",
    "\x1b[2J",
    "\ud800",
    "å",
)


CURVES: dict[str, ExpectedCurve] = {}


def curve_of(assumptions: Assumptions) -> ExpectedCurve:
    """Return the curve of a kind of run at the one site, worked out once."""
    kind = assumptions.run.kind
    if kind not in CURVES:
        CURVES[kind] = expected_curve(assumptions)
    return CURVES[kind]


def with_curve(self: Recording, curve: ExpectedCurve | None = None, **options: bool) -> Pipeline:
    """Make the pipeline of a recording with that curve: a replay works it out anew for each file."""
    return PIPELINE_OF(self, curve or curve_of(self.site.assumptions), **options)


PIPELINE_OF = Recording.pipeline


def any_run(give: Give, folder: Path) -> None:
    """Write a log of lines and events, and look at it in every way."""
    path = folder / "events"
    shutil.rmtree(path, ignore_errors=True)
    kind = ("guided", "hung", "drop")[give.whole(0, 2)]
    columns = 'columns = ["depth_m", "east_mm", "north_mm"]\n' if kind == "drop" else ""
    site = parse_site(SITE.replace("guided", kind) + columns, "fuzz.toml")
    log = RunLogWriter.create(path, site, started_at=datetime(2026, 1, 2, tzinfo=UTC))
    try:
        fill(log, give)
    finally:
        log.close(0.0)
    assert verify_log(log.path).state == "intact"
    found = reduce_file(log.path, curve_for=curve_of)
    json.dumps(reduce_table(found), allow_nan=False)
    assert all(one.isprintable() for one in report_text(found).split("\n"))
    with patch.object(Recording, "pipeline", with_curve):
        replay = Replay(log.path)
        play(replay)


def fill(log: RunLogWriter, give: Give) -> None:
    """Write lines and events."""
    time, depth = 0.0, 0.0
    for number in range(give.whole(1, 40)):
        time += (0.0, 0.1, 1.0, 30.0)[give.whole(0, 3)]
        if give.whole(0, 2):
            depth += (0.1, 1.0, -1.0, 5.0, -30.0)[give.whole(0, 4)]
            line = b"%.2f,%.3f,0.01\n" % (depth, give.number(-5.0, 5.0))
            count = give.whole(1, 3)
            link = give.whole(0, 1)
            log.raw(
                LineBlock(data=line * count, times=np.full(count, time), first_line=number + 1, link=link)
            )
        else:
            name = NAMES[give.whole(0, len(NAMES) - 1)]
            fields = {one: field(one, give) for one in FIELDS.get(name, ("text", "message"))}
            log.event(RunEvent(time=time, name=name, fields=fields))


def play(replay: Replay) -> None:
    """Play it instant by instant, go back, and list what can be jumped to."""
    try:
        while not replay.ended:
            replay.step()
        replay.seek(0.3 * replay.duration)
        assert all(safe(one.text) == one.text for one in replay.index.marks)
    finally:
        replay.close()


def field(name: str, give: Give) -> object:
    """Return what an event may carry, mostly of the right kind."""
    way = give.whole(0, 60)
    if way == 0:
        return (None, True, 0, "", [], {}, 2**70)[give.whole(0, 6)]
    if way == 1:
        return LARGE[give.whole(0, len(LARGE) - 1)]
    if name == "on":
        return bool(give.whole(0, 1))
    if name in NUMBERS:
        return give.number(-10.0, 300.0)
    return WORDS[give.whole(0, len(WORDS) - 1)]
