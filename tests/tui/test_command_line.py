"""The command line: shapes, exit statuses, and one clear line for whatever cannot be used."""

import json
import os
import signal
import subprocess
import sys
import time
from pathlib import Path
from types import SimpleNamespace

import click
import pytest

from eastfall.tui.main import VERBS
from eastfall.tui.patient import PatientLines
from eastfall.tui.verbs import live

PROGRAM = str(Path(sys.executable).parent / "eastfall")

SITE = """
[site]
name = "Marram Pit"
latitude_deg = 57.3
[shaft]
depth_m = 300.0
diameter_m = 6.0
[run]
kind = "guided"
[guide]
line_speed_mps = 2.0
[[link]]
url = "emulate:?seed=2&rate=50&pace=10"
columns = ["time_s", "depth_m", "tilt_a_deg", "tilt_b_deg"]
"""

# A guide that leans 0.2 mm/m toward A (north), read every 10 m by hand: no clock needed for a probe at rest.
CAPTURE = "".join(f"{depth}.0,{0.0114592:.7f},0.0\n" for depth in range(0, 310, 10))


@pytest.fixture
def place(tmp_path):
    """Give a folder with a site file and a capture."""
    (tmp_path / "site.toml").write_text(SITE, encoding="utf-8")
    drop = SITE.replace('"guided"', '"drop"').replace('"tilt_a_deg", "tilt_b_deg"', '"east_mm", "north_mm"')
    (tmp_path / "drop.toml").write_text(drop, encoding="utf-8")
    (tmp_path / "walk.toml").write_text(SITE.replace('"time_s", ', ""), encoding="utf-8")
    (tmp_path / "walk.csv").write_text(CAPTURE, encoding="utf-8")
    return tmp_path


def eastfall(*words, cwd, **options):
    """Run the program and give what it did."""
    environment = {**os.environ, "COLUMNS": "200"}
    return subprocess.run(
        [PROGRAM, *map(str, words)],
        cwd=cwd,
        env=environment,
        capture_output=True,
        text=True,
        timeout=60,
        check=False,
        stdin=subprocess.DEVNULL,
        **options,
    )


def refused(outcome, *words):
    """Assert exit status 2 and one clear line, with these words in it, and nothing on standard output."""
    assert outcome.returncode == 2, outcome
    assert outcome.stdout == ""
    assert len(outcome.stderr.strip().splitlines()) == 1, outcome.stderr
    for word in words:
        assert word in outcome.stderr
    return True


def test_help_lists_every_verb_and_the_cautions(place):
    """Help names all verbs and says that this is no safety device."""
    out = eastfall("--help", cwd=place).stdout
    for verb in (
        "demo",
        "watch",
        "record",
        "replay",
        "expect",
        "reduce",
        "report",
        "verify",
        "export",
        "selfcheck",
    ):
        assert verb in out
    assert "not a safety device" in out


@pytest.mark.parametrize(
    "verb",
    [*VERBS],
)
def test_every_verb_has_its_own_help(place, verb):
    """Each verb can be imported and explains itself."""
    outcome = eastfall(verb, "--help", cwd=place)
    assert outcome.returncode == 0, outcome.stderr
    assert outcome.stdout.startswith(f"Usage: eastfall {verb}")


def test_expect_has_the_shape_that_others_rely_on(place):
    """JSON on standard output alone, with the fixed keys in their units."""
    outcome = eastfall("expect", "site.toml", "--at", "100,300", "--format", "json", cwd=place)
    shape = json.loads(outcome.stdout)
    assert outcome.stderr == ""
    assert {"kind", "site", "stations", "wall_contact_depth_m"} <= shape.keys()
    assert list(shape["stations"][0]) == [
        *("depth_m", "east_mm", "north_mm", "u_east_mm", "u_north_mm", "bob_east_mm", "bob_north_mm"),
        *("fall_east_mm", "fall_north_mm", "time_s", "speed_mps"),
    ]
    # 2 m/s at 57.3° and normal gravity there: 16.05 µrad of lean, 4.81 mm over 300 m, to the west.
    assert shape["stations"][1]["east_mm"] == pytest.approx(-4.81, abs=0.01)


def test_expect_without_options_gives_a_row_for_every_station(place):
    """0 to 300 m every 10 m: 31 rows below the head, in CSV as in the table."""
    table = eastfall("expect", "site.toml", cwd=place).stdout.splitlines()
    comma = eastfall("expect", "site.toml", "--format", "csv", cwd=place).stdout.splitlines()
    assert len(table) >= 33
    assert len(comma) == 32
    assert comma[0].startswith("depth_m,east_mm,north_mm")


def test_the_budget_adds_up_to_the_combined_uncertainty(place):
    """The root sum of squares of the parts is the combined u at the same depth."""
    out = eastfall("expect", "drop.toml", "--at", "300", "--budget", "--format", "json", cwd=place).stdout
    station = json.loads(out)["stations"][0]
    total = sum(one["east_mm"] ** 2 for one in station["parts"]) ** 0.5
    assert station["u_east_mm"] == pytest.approx(total, rel=1e-12)


def test_the_line_itself_can_be_asked_for(place):
    """Stretch, swing, what a winch at 2 m/s leaves, the wait for it, and two lines 5 m apart: by hand formulas.

    300 m of 1 mm steel under 50 kg: MgL/(AE) = 937.4 mm (g 9.817, E 200 GPa); the lean of 2 m/s at 57.3°, 16.05 µrad,
    leaves 4.8 mm; sL/R = 5·300/6.39e6 = 0.235 mm; from 4.8 to 1 mm takes 600 s · ln 4.8 = 942 s.
    """
    site = (
        SITE.replace('"guided"', '"hung"')
        + "[line]\nline_speed_mps = 2.0\n[air]\ntemperature_gradient_cpkm = 0.0\n"
    )
    (place / "line.toml").write_text(
        site.replace('"tilt_a_deg", "tilt_b_deg"', '"east_mm", "north_mm"'), encoding="utf-8"
    )
    words = ("--at", "300", "--line", "--apart", "5", "--decay", "600", "--format", "json")
    (row,) = json.loads(eastfall("expect", "line.toml", *words, cwd=place).stdout)["line"]
    assert row["stretch_mm"] == pytest.approx(937.4, abs=0.1)
    assert row["single_swing_s"] == pytest.approx(300.0**0.5, rel=5e-3)
    assert row["swing_left_mm"] == pytest.approx(4.81, abs=0.01)
    assert row["nearer_mm"] == pytest.approx(0.235, abs=0.001)
    assert row["wait_s"] == pytest.approx(942.0, abs=2.0)


def test_reduce_of_a_capture_finds_its_lean_and_has_the_fixed_shape(place):
    """0.2 mm/m toward A = north: 60 mm at 300 m, the fixed keys, and exit status 1 because it is over 25 mm."""
    outcome = eastfall(
        "reduce", "walk.csv", "--site", "walk.toml", "--interval", "30", "--format", "json", cwd=place
    )
    assert outcome.returncode == 1
    shape = json.loads(outcome.stdout)
    assert {
        "kind",
        "site",
        "frames",
        "rejected",
        "stations",
        "alarms",
        "closure",
        "rest_point",
    } <= shape.keys()
    bottom = shape["stations"][-1]
    assert list(bottom)[:11] == [
        *(
            "depth_m",
            "pass",
            "measured_east_mm",
            "measured_north_mm",
            "expected_east_mm",
            "expected_north_mm",
        ),
        *("residual_east_mm", "residual_north_mm", "u_east_mm", "u_north_mm", "verdict"),
    ]
    assert (bottom["depth_m"], bottom["pass"], bottom["verdict"]) == (300.0, "down", "over")
    assert bottom["measured_north_mm"] == pytest.approx(60.0, abs=1e-3)
    assert shape["frames"] == 31


UNUSABLE = [
    (("expect", "nowhere.toml"), ("nowhere.toml", "No such file")),
    (("expect", "walk.csv"), ("walk.csv", "not TOML")),
    (("expect", "site.toml", "--at", "400"), ("400", "shaft.depth_m, 300 m")),
    (("expect", "site.toml", "--at", "deep"), ("--at", "expected depths in metres")),
    (("expect", "site.toml", "--every", "0"), ("--every",)),
    (("expect",), ("SITE",)),
    (("frobnicate",), ("frobnicate",)),
    (("reduce", "walk.csv"), ("walk.csv", "--site")),
    (("reduce", "nowhere.jsonl"), ("nowhere.jsonl", "No such file")),
    (("reduce", "walk.toml", "--site", "walk.toml"), ("walk.toml",)),
    (("replay", "nowhere.jsonl"), ("nowhere.jsonl",)),
    (("record", "site.toml", "--link", "/dev/nowhere"), ("/dev/nowhere",)),
    (("record", "site.toml", "--link", "socket://127.0.0.1:1"), ("127.0.0.1",)),
    (("record", "drop.toml"), ("--shaft-clear",)),
    (("watch", "site.toml"), ("terminal",)),
    (("emulate", "site.toml", "--tcp", "99999"), ("--tcp",)),
    (("emulate", "nowhere.toml"), ("nowhere.toml",)),
    (("runs", "nowhere"), ("nowhere", "does not exist")),
]


@pytest.mark.parametrize(("words", "said"), UNUSABLE)
def test_what_cannot_be_used_ends_with_one_clear_line_and_status_2(place, words, said):
    """No traceback, nothing on standard output, nothing left behind."""
    before = sorted(place.rglob("*"))
    assert refused(eastfall(*words, cwd=place), *said)
    after = [one for one in place.rglob("*") if one.is_file()]
    assert sorted(after) == [one for one in before if one.is_file()]


@pytest.mark.parametrize(
    ("old", "new", "said"),
    [
        ("depth_m", "dept_m", "did you mean depth_m"),
        ("57.3", "95", "expected a number from -90 to 90 deg"),
        ("57.3", '"x"', "expected a number from -90 to 90 deg"),
        ('"Marram Pit"', '"\\u001b[31mred"', None),
    ],
)
def test_a_bad_site_file_is_refused_with_file_line_and_key(place, old, new, said):
    """Unknown key, range, type; and control characters from the file never reach the terminal as such."""
    (place / "site.toml").write_text(SITE.replace(old, new, 1), encoding="utf-8")
    outcome = eastfall("expect", "site.toml", "--at", "10", cwd=place)
    assert "\x1b" not in outcome.stdout + outcome.stderr
    if said is None:
        assert outcome.returncode == 0
        assert "\\x1b[31mred" in outcome.stdout
    else:
        refused(outcome, "site.toml, line", said)


def test_binary_rubbish_as_log_or_capture_is_refused(place):
    """Random bytes instead of a log or capture: one line, status 2."""
    (place / "rubbish.jsonl").write_bytes(bytes(range(256)) * 40)
    assert refused(eastfall("reduce", "rubbish.jsonl", cwd=place), "rubbish.jsonl")
    assert refused(eastfall("reduce", "rubbish.jsonl", "--site", "site.toml", cwd=place), "rubbish.jsonl")
    assert refused(eastfall("replay", "rubbish.jsonl", "--plain", cwd=place), "rubbish.jsonl")


def test_record_prints_the_path_of_its_log_and_reduce_gives_the_same_again(place):
    """One line on standard output; the log reduces, and replays to the same stations."""
    outcome = eastfall("record", "site.toml", "--into", "runs", "--for", "2", cwd=place)
    assert outcome.returncode == 0, outcome.stderr
    (path,) = outcome.stdout.splitlines()
    shape = json.loads(eastfall("reduce", path, "--format", "json", cwd=place).stdout)
    assert shape["frames"] > 0
    assert shape["rejected"] == 0
    replayed = eastfall("replay", path, "--plain", cwd=place).stdout
    # A station at which the probe comes to rest is told again when the rest has closed it.
    told = {line.split(":")[0] for line in replayed.splitlines() if line.startswith("station ")}
    assert len(told) == len(shape["stations"])


def test_record_ends_on_sigterm_with_a_closed_log(place):
    """SIGTERM: exit status 0, and the log verifies as intact."""
    process = subprocess.Popen(
        [PROGRAM, "record", "site.toml", "--into", "runs"], cwd=place, stdout=subprocess.PIPE, text=True
    )
    path = process.stdout.readline().strip()
    deadline = time.monotonic() + 10.0
    while (place / path).stat().st_size < 4000 and time.monotonic() < deadline:
        pass
    process.send_signal(signal.SIGTERM)
    assert process.wait(timeout=10.0) == 0
    process.stdout.close()
    assert eastfall("verify", path, cwd=place).returncode == 0


def test_a_second_record_never_writes_over_the_first(place):
    """Two runs started in the same second have two logs."""
    first, second = (
        eastfall("record", "site.toml", "--into", "runs", "--for", "0.2", cwd=place).stdout.strip()
        for _ in range(2)
    )
    assert first != second
    assert (place / first).exists()
    assert (place / second).exists()


def test_selfcheck_computes_every_published_value_and_none_is_off(place):
    """Every check has a source and a computed value within its tolerance; exit status 0."""
    outcome = eastfall("selfcheck", "--format", "json", cwd=place)
    shape = json.loads(outcome.stdout)
    assert outcome.returncode == 0
    assert shape["failed"] == 0
    assert len(shape["checks"]) >= 40
    assert all(one["source"] for one in shape["checks"])


def test_the_demo_runs_without_a_screen_as_lines_of_text(place):
    """Without a terminal the demo prints stations and an answer, and where it recorded them."""
    outcome = eastfall("demo", "--for", "4", "--into", "runs", cwd=place)
    assert outcome.returncode == 0, outcome.stderr
    assert "station 10.0 m down: WITHIN" in outcome.stdout
    assert Path(place / outcome.stdout.splitlines()[-1]).exists()


@pytest.mark.parametrize(("lost", "status"), [(0, None), (3, 1)])
def test_a_run_whose_record_lost_lines_ends_with_status_1(lost, status, capfd):
    """A full disk: the log's path and the count on standard error, and the status of a log that is not intact."""
    health = SimpleNamespace(log_path="run.eastfall.jsonl", log_lost=lost)
    left = None
    with click.Context(live.record):
        try:
            live.finish(health, PatientLines(sys.stdout), PatientLines(sys.stderr), hurried=False)
        except click.exceptions.Exit as over:
            left = over.exit_code
    said = capfd.readouterr()
    assert (left, said.out) == (status, "")
    assert ("run.eastfall.jsonl: incomplete, 3 lines" in said.err) is bool(lost)
