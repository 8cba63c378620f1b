"""From an instrument in another process, over a pseudo-terminal, to findings: nothing lost, all of it repeatable."""

import json
import signal
import subprocess
import sys
import time
from collections.abc import Iterator
from contextlib import contextmanager
from dataclasses import dataclass
from datetime import UTC, datetime
from pathlib import Path

import numpy as np
import pytest

from eastfall.io.emulator import Emulator
from eastfall.io.journey import Winch, down_and_up
from eastfall.io.pipeline import merged
from eastfall.io.reduce import Reduction, reduce_file
from eastfall.io.replay import Replay
from eastfall.io.run import Run, RunUpdate
from eastfall.io.runlog import RunLogWriter
from eastfall.io.serve import serve_pty
from eastfall.io.sitefile import SiteFile, load_site
from eastfall.io.truth import Bend, Truth
from eastfall.physics.earth import EARTH_ROTATION
from eastfall.physics.findings import Findings, Result

PATIENCE = 30.0
"""How long a condition may take on a busy machine, beyond the length of the run [s]."""
RATE = 50.0
SPEED, PULL, DEPTH = 1.6, 1.6, 4.0
BEND = Bend(depth=2.0, width=0.3, east=-2e-5, north=1e-5)
TRUTH = Truth(lean_east=1e-4, lean_north=-5e-5, bends=(BEND,))

SITE = """
[site]
name = "Ferrow Test Shaft"
latitude_deg = 54.6
[shaft]
depth_m = {depth}
[run]
kind = "guided"
station_every_m = 0.5
[instrument]
a_azimuth_deg = 75.0
zero_a_deg = 0.03
u_tilt_deg = 0.001
u_zero_deg = 0.0002
[limits]
warning_mm = 0.3
action_mm = 1.0
on_delay_s = 0.5
off_delay_s = 0.5
dead_band_mm = 0.05
[[link]]
url = "set by the test"
columns = ["time_s", "depth_m", "tilt_a_deg", "tilt_b_deg"]
"""


def emulator_of(site: SiteFile) -> Emulator:
    """Return the instrument that the other process serves: down and up once, one broken line to five good ones."""
    winch = Winch(speed=SPEED, acceleration=PULL, creep_length=0.0, collar_time=0.5, bottom_time=0.3)
    until = down_and_up(site.assumptions.shaft.depth, winch).duration
    return Emulator(site, seed=6, rate=RATE, broken=0.2, truth=TRUTH, winch=winch, until=until)


def lines_of(site: SiteFile) -> int:
    """Return how many lines will come, good and broken."""
    return len(emulator_of(site).take(0, np.inf))


@dataclass(frozen=True, slots=True, kw_only=True)
class Ridden:
    """A recorded ride, and what is known of it from either side."""

    sent: dict[str, object]
    """What the other process says that it sent."""
    site: SiteFile
    log: Path
    live: Findings
    """All findings of the live run."""
    result: Result
    last: RunUpdate


@contextmanager
def running(command: list[str]) -> Iterator[subprocess.Popen[str]]:
    """Run a process; whatever happens, it is gone at the end."""
    with subprocess.Popen(command, stdout=subprocess.PIPE, stderr=subprocess.PIPE, text=True) as process:
        try:
            yield process
        finally:
            process.kill()


@contextmanager
def serving(folder: Path) -> Iterator[tuple[subprocess.Popen[str], str]]:
    """Emulate the folder's site in another process; yield it and the device that it serves."""
    with running([sys.executable, __file__, str(folder)]) as server:
        assert server.stdout is not None
        yield server, server.stdout.readline().strip()


def end(server: subprocess.Popen[str]) -> None:
    """Let the server end of itself, as it does when everything is sent and nobody listens; it has no complaint."""
    assert server.communicate(timeout=PATIENCE) == ("", "")
    assert server.returncode == 0


def ride(folder: Path, depth: float) -> Ridden:
    """Emulate in another process, record here with the program's own live path."""
    (folder / "site.toml").write_text(SITE.format(depth=depth))
    site = load_site(folder / "site.toml")
    with serving(folder) as (server, device):
        log = RunLogWriter.create(folder / "logs", site, started_at=datetime.now(UTC))
        run = Run(site, links=[device], log=log)
        updates = list(driven(run, lines_of(site), 3.0 * depth / SPEED + PATIENCE))
        end(server)
    return Ridden(
        sent=json.loads((folder / "sent.json").read_text())["links"][0],
        site=site,
        log=log.path,
        live=merged([one for update in updates for one in update.findings]),
        result=run.pipeline.survey.result(),
        last=updates[-1],
    )


def driven(run: Run, lines: int, longest: float) -> Iterator[RunUpdate]:
    """Step a run until all lines have come, and half a second more for what should not come."""
    deadline = time.monotonic() + longest
    run.start()
    try:
        done = False
        while not done:
            update = run.step(0.1)
            yield update
            link = update.health.links[0]
            done = link.lines >= lines and link.silent_for > 0.5
            assert time.monotonic() < deadline, f"{link.lines} of {lines} lines have come"
    finally:
        last = run.stop()
    yield last


@pytest.fixture(scope="module")
def ridden(tmp_path_factory: pytest.TempPathFactory) -> Ridden:
    """Return a ride of 4 m down and back, in real time."""
    return ride(tmp_path_factory.mktemp("ride"), DEPTH)


def broken_sent(ridden: Ridden) -> int:
    """Return how many broken lines the other process sent."""
    broken = ridden.sent["broken"]
    assert isinstance(broken, dict)
    return sum(broken.values())


def test_no_good_line_is_lost_and_every_bad_one_is_counted(ridden: Ridden) -> None:
    """At 50 lines a second the recorder's counts of readings and of faults are the sender's counts of lines."""
    health = ridden.last.health
    assert ridden.sent["good"] == health.frames == ridden.result.frames > 400
    assert broken_sent(ridden) == health.rejected == sum(health.faults.values()) > 50
    assert ridden.sent["unheard"] == 0
    assert (health.links[0].queue_dropped, health.log_lost) == (0, 0)


def test_the_log_holds_every_line_as_it_was_sent(ridden: Ridden) -> None:
    """Read back from the log, the lines are as many as were sent, and the good ones hold the sampled times in order."""
    raw = [json.loads(line) for line in ridden.log.read_text(encoding="utf-8").split("\n")[:-1]]
    lines = [line for record in raw for line in record.get("raw", ())]
    good = ridden.sent["good"]
    assert isinstance(good, int)
    assert len(lines) == good + broken_sent(ridden)
    wanted = [f"{number / RATE:.3f}" for number in range(good)]
    times = iter(line.split(",")[0] for line in lines)
    assert all(time in times for time in wanted)


def noise_at(ridden: Ridden, depth: float, direction: str) -> float:
    """Return the standard deviation of the summed tilt from the noise of single readings [m].

    Readings are v/rate apart at v m/s, so n of them over the way z sum to u v/rate √n = u √(z v/rate).
    """
    way = depth if direction == "down" else 2.0 * ridden.site.assumptions.shaft.depth - depth
    return ridden.site.assumptions.instrument.u_tilt * np.sqrt(way * SPEED / RATE)


def test_the_measured_offset_is_the_hidden_truth_within_the_noise(ridden: Ridden) -> None:
    """At every station of both passes the residual is the guide's hidden offset within 4 standard deviations.

    Beside the noise stands what a level in a moving probe shows beyond the lean that is corrected: P'v²/2g while the
    probe has sped up, and v²ΔP'/g where the guide bends (20 µm together); depth comes in whole millimetres.
    """
    assert [one.depth for one in ridden.result.stations if one.direction == "down"] == pytest.approx(
        np.arange(0.0, DEPTH + 0.01, 0.5)
    )
    assert sum(one.direction == "up" for one in ridden.result.stations) >= 8
    inertia = (
        SPEED**2 / 9.8 * (np.hypot(TRUTH.lean_east, TRUTH.lean_north) / 2.0 + np.hypot(BEND.east, BEND.north))
    )
    for station in ridden.result.stations:
        away = np.array([station.residual_east, station.residual_north]) - TRUTH.offset(station.depth)[:, 0]
        bound = 4.0 * noise_at(ridden, station.depth, station.direction) + inertia + 1e-6
        assert np.abs(away).max() < bound, f"{station.depth} m {station.direction}"
    # What the moving line shows in a plumb guide is beyond that bound at the bottom: uncorrected, it would be seen.
    ridden_west = 2.0 * EARTH_ROTATION * SPEED * np.cos(np.radians(54.6)) / 9.81 * DEPTH
    assert ridden_west > 4.0 * noise_at(ridden, DEPTH, "down") + inertia
    assert ridden.result.closure is not None
    # Slower at either end, the whole journey leaves a tenth less than it would at full speed.
    assert ridden.result.closure.expected_east == pytest.approx(-2.0 * ridden_west, rel=0.15)


def same_bits(one: np.ndarray, other: np.ndarray) -> bool:
    """Whether two arrays are the same to the last bit."""
    return one.shape == other.shape and one.tobytes() == other.tobytes()


def replayed(path: Path, steps: int) -> Findings:
    """Replay a log in so many advances of time."""
    replay = Replay(path)
    times = np.linspace(0.0, replay.duration, steps + 1)[1:]
    updates = [replay.advance(float(at)) for at in times]
    replay.close()
    return merged([one for update in updates for one in update.findings])


@pytest.mark.invariant
@pytest.mark.parametrize("steps", [1, 7, 300])
def test_a_replay_of_the_log_repeats_the_live_findings_to_the_last_bit(ridden: Ridden, steps: int) -> None:
    """Rows, stations and alarms of a replay are those of the live run, however coarsely time is advanced."""
    again = replayed(ridden.log, steps)
    assert len(again.rows) == ridden.sent["good"]
    assert same_bits(again.rows.data, ridden.live.rows.data)
    assert repr(again.stations) == repr(ridden.live.stations)
    assert repr(again.alarms) == repr(ridden.live.alarms)
    assert ridden.live.alarms


@pytest.fixture(scope="module")
def reduced(ridden: Ridden) -> Reduction:
    """Return what `reduce` makes of the log."""
    return reduce_file(ridden.log)


@pytest.mark.invariant
def test_reduce_of_the_log_gives_the_live_result_to_the_last_bit(ridden: Ridden, reduced: Reduction) -> None:
    """Stations, alarms, closure and counts of the headless reduction are those of the live run."""
    assert repr(reduced.result) == repr(ridden.result)
    assert reduced.frames == ridden.sent["good"]
    assert reduced.rejected == broken_sent(ridden)
    assert dict(reduced.faults) == dict(ridden.last.health.faults)


def test_the_program_s_own_record_verb_counts_the_same(tmp_path: Path) -> None:
    """`eastfall record` in a process of its own, ended by SIGTERM, leaves a log that reduces to the sender's counts."""
    (tmp_path / "site.toml").write_text(SITE.format(depth=0.3))
    program = [sys.executable, "-c", "from eastfall.tui.main import main; main()", "record"]
    with serving(tmp_path) as (server, device):
        options = [str(tmp_path / "site.toml"), "--link", device, "--into", str(tmp_path / "logs")]
        with running([*program, *options]) as recorder:
            assert recorder.stdout is not None
            log = Path(recorder.stdout.readline().strip())
            wait_for_lines(log, lines_of(load_site(tmp_path / "site.toml")))
            recorder.send_signal(signal.SIGTERM)
            assert recorder.wait(PATIENCE) == 0
        end(server)
    sent = json.loads((tmp_path / "sent.json").read_text())["links"][0]
    found = reduce_file(log)
    assert (found.frames, found.rejected) == (sent["good"], sum(sent["broken"].values()))
    assert sent["good"] > 100


def wait_for_lines(log: Path, count: int) -> None:
    """Wait until so many lines have been recorded."""
    deadline = time.monotonic() + PATIENCE
    while recorded_lines(log) < count:
        assert time.monotonic() < deadline, f"{recorded_lines(log)} of {count} lines were recorded"
        time.sleep(0.05)


def recorded_lines(log: Path) -> int:
    """Return how many instrument lines a log holds so far; its last record may still be half written."""
    if not log.is_file():
        return 0
    whole = log.read_text(encoding="utf-8").split("\n")[:-1]
    return sum(len(json.loads(record).get("raw", ())) for record in whole)


@pytest.mark.soak
def test_a_deep_ride_in_real_time_loses_nothing(tmp_path: Path) -> None:
    """The same over 120 m down and back, two and a half minutes at 50 lines a second."""
    deep = ride(tmp_path, 120.0)
    assert deep.sent["good"] == deep.last.health.frames > 7500
    assert broken_sent(deep) == deep.last.health.rejected
    again = replayed(deep.log, 50)
    assert same_bits(again.rows.data, deep.live.rows.data)


if __name__ == "__main__":  # the other process
    there = Path(sys.argv[1])
    serve_pty(
        emulator_of(load_site(there / "site.toml")), link_path=there / "probe", report=there / "sent.json"
    )
