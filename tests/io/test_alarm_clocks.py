"""Whose clock an alarm is told by: live, replayed and reduced it is the same, and a capture knows only one."""

import json
from pathlib import Path

import pytest
from click.testing import CliRunner
from live_help import GUIDED, FedLink, HandClock, Openers, site, until
from record_help import STARTED

from eastfall.io.arrivals import RunEvent
from eastfall.io.reduce import reduce_file
from eastfall.io.replay import Replay
from eastfall.io.reportview import alarms
from eastfall.io.run import Run
from eastfall.io.runlog import RunLogWriter, read_log
from eastfall.io.tables import reduce_table
from eastfall.physics.findings import AlarmChange
from eastfall.tui.main import cli

TIMED = '[[link]]\nurl = "test"\ncolumns = ["time_s", "depth_m", "tilt_a_deg", "tilt_b_deg"]\n'
AHEAD, RATE = 1000.0, 1.25
"""The instrument's clock began so much earlier [s] and runs so much faster than the host's."""


def line(host: float) -> bytes:
    """Return the line of an instant: down at 1 m/s of the host's time along a guide that leans 1 mm/m."""
    return b"%.3f,%.2f,0.0573,0.0\n" % (AHEAD + RATE * host, host)


@pytest.fixture
def recorded(tmp_path: Path) -> tuple[Path, tuple[AlarmChange, ...]]:
    """Record a run of 20 s, four lines a second, with a silence of 5 s behind it; return the log and what live told."""
    where, clock, link = site(TIMED), HandClock(), FedLink()
    log = RunLogWriter.create(tmp_path, where, started_at=STARTED)
    run = Run(where, log=log, clock=clock, opener=Openers(link), wait=lambda _: False)
    began = clock.time
    run.start()
    told: list[AlarmChange] = []
    for number in range(80):
        clock.time = began + number / 4
        link.put(line(number / 4))
        for update in until(run, lambda update, wanted=number + 1: update.health.frames == wanted):
            told += [one for found in update.findings for one in found.alarms]
    clock.time = began + 25.0
    told += [one for found in run.step(0.0).findings for one in found.alarms]
    run.stop()
    return log.path, tuple(told)


def test_live_replay_and_reduce_tell_an_alarm_at_one_instant_on_each_clock(
    recorded: tuple[Path, tuple[AlarmChange, ...]],
) -> None:
    """Beyond 5 mm at 5 m, 3 s later by the instrument: 2.4 s by the host. Silence after 2 s by the host."""
    path, live = recorded
    reduced = reduce_file(path)
    assert reduced.result.alarms == tuple(sorted(live, key=lambda one: (one.time, one.name)))
    raised = {one.name: (one.time, one.host_time) for one in reduced.result.alarms if one.new == "active"}
    # 0.25 s, one line, is the grain of a crossing.
    assert raised["warning limit"][1] == pytest.approx(5.0 + 3.0 / RATE, abs=0.25)
    assert raised["feed silent"][1] == 21.75
    last = AHEAD + RATE * 19.75
    assert raised["feed silent"][0] == pytest.approx(last + 2.0)
    assert raised["warning limit"][0] == pytest.approx(AHEAD + RATE * raised["warning limit"][1], abs=0.07)
    replay = Replay(path)
    told = [one for found in replay.advance(30.0).findings for one in found.alarms]
    assert tuple(told) == live
    marks = [one.time for one in replay.index.of("alarm")]
    assert marks == sorted(one.host_time for one in live)
    replay.close()
    with read_log(path) as log:
        said = [one.fields for one in log if isinstance(one, RunEvent) and one.name == "alarm"]
    assert [(one["name"], one["at"], one["host_at"]) for one in said] == [
        (one.name, one.time, one.host_time) for one in live
    ]


def test_results_say_by_whose_clock_the_time_of_an_alarm_is(
    recorded: tuple[Path, tuple[AlarmChange, ...]], tmp_path: Path
) -> None:
    """JSON, table and report tell a log's alarms by the host, a capture's by the instrument, and say so."""
    path, _ = recorded
    capture, settings = tmp_path / "capture.txt", tmp_path / "site.toml"
    capture.write_bytes(b"".join(line(number / 4) for number in range(80)))
    settings.write_text(GUIDED + TIMED, encoding="utf-8")
    from_log, from_capture = reduce_file(path), reduce_file(capture, site=site(TIMED))
    of_log = {(one["name"], one["to"]): one for one in reduce_table(from_log)["alarms"]}
    of_capture = {(one["name"], one["to"]): one for one in reduce_table(from_capture)["alarms"]}
    key = ("warning limit", "active")
    assert of_log[key]["time_s"] == of_capture[key]["time_s"] == pytest.approx(1009.25, abs=0.32)
    assert of_log[key]["host_time_s"] == pytest.approx(7.4, abs=0.25)
    assert of_capture[key]["host_time_s"] is None
    assert alarms(from_log).heads[:2] == ("time s", "instrument's time s")
    assert alarms(from_capture).heads[:2] == ("instrument's time s", "depth m")
    told = CliRunner().invoke(cli, ["reduce", str(path)]).output
    assert "time of alarms: by the clock of the machine that recorded, from the start of the run" in told
    assert "alarm 0:07 warning limit: normal -> active" in told
    told = CliRunner().invoke(cli, ["reduce", str(capture), "--site", str(settings)]).output
    assert "time of alarms: as the lines of the capture state it" in told
    assert "alarm 16:49 warning limit: normal -> active" in told
    json.dumps(reduce_table(from_capture), allow_nan=False)
