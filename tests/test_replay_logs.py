"""The recorded demonstrations: made by the emulator, small, whole, and true to the hidden truth that they state."""

import json
from datetime import datetime
from pathlib import Path

import numpy as np
import pytest

from eastfall.io.arrivals import LineBlock
from eastfall.io.emulator import Emulator, emulator_for, options_of
from eastfall.io.forms import decoder_for
from eastfall.io.reduce import Reduction, reduce_file
from eastfall.io.rehearsal import main, rehearse
from eastfall.io.runlog import read_log, verify_log
from eastfall.io.scenes import DropScene, HungScene
from eastfall.io.sitefile import SiteFile, load_site
from eastfall.physics.readings import Readings
from eastfall.physics.settings import DEGREE

FOLDER = Path(__file__).parents[1] / "replay_logs"
STARTED = "2026-05-04T07:30:00Z"
LOGS = {
    "guided": "sandrigg-east_20260504T073000Z.eastfall.jsonl",
    "hung": "hollin-brake_20260504T073000Z.eastfall.jsonl",
    "drop": "carnwick-pit_20260504T073000Z.eastfall.jsonl",
}
KINDS = tuple(LOGS)


def site_of(kind: str) -> SiteFile:
    """Return the site file of a demonstration."""
    return load_site(FOLDER / f"{kind}.toml")


def emulator_of(kind: str) -> Emulator:
    """Return the emulator that made a log, with its truth."""
    site = site_of(kind)
    return emulator_for(site, options_of(site.links[0].url))


def records(path: Path) -> list[dict[str, object]]:
    """Return the records of a log as plain JSON."""
    return [json.loads(line) for line in path.read_text(encoding="utf-8").splitlines()]


@pytest.fixture(scope="module", params=KINDS)
def kind(request: pytest.FixtureRequest) -> str:
    """Return each kind of run."""
    word: str = request.param
    return word


@pytest.fixture(scope="module")
def reduced() -> dict[str, Reduction]:
    """Return the reductions of the three logs."""
    return {kind: reduce_file(FOLDER / name) for kind, name in LOGS.items()}


def test_every_log_is_small_intact_and_carries_its_site_file(kind: str) -> None:
    """At most 2500 lines and 200 kB, sealed to the end, with the text of the site file beside it in its header."""
    path = FOLDER / LOGS[kind]
    assert path.stat().st_size <= 200_000
    assert len(records(path)) <= 2500
    assert verify_log(path).state == "intact"
    with read_log(path) as log:
        assert log.header.site == (FOLDER / f"{kind}.toml").read_text(encoding="utf-8")
        assert log.header.started_at == STARTED
        assert log.header.kind == kind


@pytest.mark.regression
def test_every_log_is_made_again_by_the_emulator_within_its_last_digits(kind: str, tmp_path: Path) -> None:
    """The command in the README gives the same file name and the same readings at the same times.

    A step of one unit in a last digit is let pass: a refined model may move a value by a micrometre over a rounding.
    """
    made = rehearse(site_of(kind), tmp_path, started_at=datetime.fromisoformat(STARTED))
    assert made.name == LOGS[kind]
    now, then = readings_of(made, kind), readings_of(FOLDER / LOGS[kind], kind)
    assert len(now) == len(then) >= 36
    digits = {
        "host_time": 1e-6,
        "time": 1e-3,
        "depth": 1e-3,
        "east": 1e-5,
        "north": 1e-5,
        "temperature": 0.01,
    }
    digits |= {"tilt_a": 1e-5 * DEGREE, "tilt_b": 1e-5 * DEGREE}
    for name, digit in digits.items():
        np.testing.assert_allclose(now.column(name), then.column(name), rtol=0.0, atol=1.01 * digit)


def readings_of(path: Path, kind: str) -> Readings:
    """Return the good lines of a log."""
    decoder = decoder_for(site_of(kind).links[0])
    with read_log(path) as log:
        return Readings.joined([decoder.decode(one).readings for one in log if isinstance(one, LineBlock)])


def test_broken_lines_in_the_logs_are_counted_and_good_ones_are_readings(
    kind: str, reduced: dict[str, Reduction]
) -> None:
    """Frames and rejected lines of the reduction are the good and the broken lines that the emulator counts."""
    site = site_of(kind)
    emulator = emulator_for(site, options_of(site.links[0].url + "&once=1"))
    emulator.take(0, np.inf)
    counts = emulator.counts(0)
    assert reduced[kind].frames == counts.pop("good")
    assert reduced[kind].rejected == sum(counts.values())
    assert (kind == "drop") == (not counts)


def test_the_guided_log_gives_the_true_lean_within_its_uncertainty(reduced: dict[str, Reduction]) -> None:
    """At every station, down and up, the residual is the hidden offset within 3 standard uncertainties of each axis."""
    truth, result = emulator_of("guided").truth, reduced["guided"].result
    assert {(one.direction, one.depth) for one in result.stations} >= {
        (way, depth) for way in ("down", "up") for depth in np.arange(20.0, 350.0, 20.0)
    }
    for station in result.stations:
        east, north = truth.offset(station.depth)[:, 0]
        assert abs(station.residual_east - east) <= 3.0 * station.u_east + 1e-9
        assert abs(station.residual_north - north) <= 3.0 * station.u_north + 1e-9
    leaning = max(result.stations, key=lambda one: np.hypot(one.residual_east, one.residual_north))
    assert np.hypot(leaning.residual_east, leaning.residual_north) > 5.0 * np.hypot(
        leaning.u_east, leaning.u_north
    )


def test_the_guided_log_raises_the_warning_and_returns_on_both_passes(reduced: dict[str, Reduction]) -> None:
    """Two passes by the bulge are two warnings, each returned, and the passes part by what the moving line explains."""
    result = reduced["guided"].result
    warnings = [(one.old, one.new) for one in result.alarms if one.name == "warning limit"]
    assert [new for _, new in warnings] == ["active", "returned"] * 2
    closure = result.closure
    assert closure is not None
    assert closure.expected_east < -0.01
    # 720 m in steps of 3 m/s at 4 Hz: n steps Δz of random tilt u sum to u Δz √n = u √(720 m Δz).
    noise = reduced["guided"].site.assumptions.instrument.u_tilt * np.sqrt(720.0 * 0.75)
    assert closure.east == pytest.approx(closure.expected_east, abs=3.0 * noise)
    assert closure.north == pytest.approx(closure.expected_north, abs=3.0 * noise)


def test_the_hung_log_gives_the_rest_point_within_its_uncertainty(reduced: dict[str, Reduction]) -> None:
    """Out of a swing of 26 mm comes the hidden rest point within 3 standard uncertainties, and the period."""
    scene, rest = emulator_of("hung").scene, reduced["hung"].result.rest_point
    assert isinstance(scene, HungScene)
    assert rest is not None
    assert rest.fits
    east, north = scene.rest[:, 0]
    assert abs(rest.east - east) <= 3.0 * rest.u_east
    assert abs(rest.north - north) <= 3.0 * rest.u_north
    assert rest.u_east < 0.5e-3
    # Light wire, heavy bob: 2π√(L/g), within a thousandth.
    assert rest.period == pytest.approx(2.0 * np.pi * np.sqrt(540.0 / 9.808), rel=1e-3)
    assert rest.decay == pytest.approx(emulator_of("hung").truth.decay, rel=0.05)


def test_the_drop_log_gives_the_middle_of_the_marks_within_its_uncertainty(
    reduced: dict[str, Reduction],
) -> None:
    """At each level the mean mark is the body's true deflection plus the hidden drift, within 3 u."""
    emulator, result = emulator_of("drop"), reduced["drop"].result
    scene = emulator.scene
    assert isinstance(scene, DropScene)
    assert [one.depth for one in result.stations] == scene.levels.tolist()
    for station, east, north in zip(result.stations, *scene.middle, strict=True):
        assert station.readings == emulator.truth.bodies
        assert abs(station.measured_east - east) <= 3.0 * station.u_east
        assert abs(station.measured_north - north) <= 3.0 * station.u_north
        # Without the turning Earth there would be no east: it stands out by far.
        assert station.measured_east > 10.0 * station.u_east


def stated(kind: str) -> list[str]:
    """Return the numbers that the README must state of a kind's truth, as it prints them (mm)."""
    emulator = emulator_of(kind)
    if isinstance(emulator.scene, HungScene):
        rows = [emulator.scene.rest[:, 0]]
    elif isinstance(emulator.scene, DropScene):
        rows = list(emulator.scene.middle.T)
    else:
        rows = list(emulator.truth.offset(np.arange(60.0, 361.0, 60.0)).T)
    return [f"{1e3 * east:+.2f} | {1e3 * north:+.2f}" for east, north in rows]


def test_the_readme_states_seed_and_truth_of_every_log(kind: str) -> None:
    """The table of each log in the README holds the hidden truth that its seed draws, to 0.01 mm."""
    text = (FOLDER / "README.md").read_text(encoding="utf-8")
    assert LOGS[kind] in text
    assert site_of(kind).links[0].url in text
    for row in stated(kind):
        assert row in text, row


def test_the_command_of_the_readme_makes_a_log(tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    """It prints the path of the log that it made, and refuses a site that it cannot rehearse in one line."""
    arguments = [str(FOLDER / "drop.toml"), "--started", STARTED, "--into", str(tmp_path)]
    assert main(arguments) == 0
    assert capsys.readouterr().out == f"{tmp_path / LOGS['drop']}\n"
    nobody = tmp_path / "none.toml"
    assert main([str(nobody)]) == 2
    assert capsys.readouterr().err.startswith(f"{nobody}: No such file")
