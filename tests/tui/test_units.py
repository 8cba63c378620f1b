"""Units: the sizes are those agreed, and the same length reads the same in both."""

import math
import re
from dataclasses import replace
from pathlib import Path
from typing import get_args

import numpy as np
import pytest
from click.testing import CliRunner
from screen_harness import shown, text_of

from eastfall.physics.board import JUMP, Board
from eastfall.physics.guards import Sighting
from eastfall.physics.settings import AlarmName, Limits
from eastfall.tui import words
from eastfall.tui.app import Dashboard
from eastfall.tui.axes import Axis
from eastfall.tui.glyphs import BRAILLE
from eastfall.tui.main import cli
from eastfall.tui.screens.stations import head, row
from eastfall.tui.screens.watch import WatchScreen
from eastfall.tui.typed import read_moment
from eastfall.tui.units import FEET, METRIC, UNITS, lengths_in, size_of

pytestmark = pytest.mark.invariant


@pytest.mark.published
def test_foot_and_inch_are_those_of_nist_sp_811() -> None:
    """NIST SP 811 (2008), appendix B.8: 1 ft = 3.048 E-01 m and 1 in = 2.54 E-02 m, both exactly."""
    assert FEET.long_size == 0.3048
    assert FEET.short_size == 0.0254
    assert FEET.long_size / FEET.short_size == pytest.approx(12.0, rel=1e-15)


@pytest.mark.parametrize("units", UNITS.values())
@pytest.mark.parametrize("length", [0.0, 1e-4, 0.0086, -0.031, 612.4, -7.0])
def test_shown_length_is_the_length_within_half_its_last_digit(units, length: float) -> None:
    """Reading a shown number back gives the length within half a unit of the last place."""
    shown = float(units.offset(length)) * units.short_size
    assert abs(shown - length) <= 0.5 * 10.0 ** -(1 + units.finer) * units.short_size * (1 + 1e-9)
    assert abs(float(units.depth(length)) * units.long_size - length) <= 0.05 * units.long_size * (1 + 1e-9)


@pytest.mark.parametrize("units", UNITS.values())
def test_no_number_is_a_dash(units) -> None:
    """NaN and infinity are never shown as numbers."""
    assert units.offset(math.nan) == units.depth(math.inf) == units.signed(-math.inf) == "–"


def test_answer_and_steering_name_feet_and_inches(standing) -> None:
    """8.637 mm at 60 m is 0.340 in at 196.9 ft; the direction is the same."""
    said = words.answer(standing(), FEET)
    assert said == "WITHIN 196.9 ft: residual 0.340 ± 0.071 in toward 085°, limit 1.181 in"
    assert words.steering(standing(), "guided", FEET) == "Move 0.34 in toward 265° to meet the expected line."


def test_station_table_heads_name_the_unit_and_columns_stay(station) -> None:
    """In both units the line over the table is as long as a row below it."""
    for units in (METRIC, FEET):
        assert units.depth_head in head(units)
        assert f"resid {units.short}" in head(units)
        assert len(head(units)) == len(row(station(), units)) <= 80


@pytest.mark.parametrize(
    ("typed", "units", "metres"),
    [("100", METRIC, 100.0), ("100", FEET, 30.48), ("100 m", FEET, 100.0), ("100 ft", METRIC, 30.48)],
)
def test_typed_depth_is_in_the_readers_unit_unless_it_says_another(typed, units, metres) -> None:
    """A mark behind the number overrules the setting."""
    assert read_moment(typed, 940.0, units) == ("depth", pytest.approx(metres, abs=1e-12))


def test_ticks_are_round_in_the_unit_shown() -> None:
    """An axis of 300 m has ticks at whole hundreds of feet when read in feet."""
    ticks = Axis(low=0.0, high=300.0, dots=100).ticks(6, FEET.long_size)
    assert [round(one / FEET.long_size, 9) for one in ticks] == [0.0, 200.0, 400.0, 600.0, 800.0]


@pytest.mark.parametrize(
    ("mark", "shown", "size"),
    [
        ("m", "ft", 0.3048),
        ("mm", "in", 25.4),
        ("m/s", "ft/s", 0.3048),
        ("kg", "kg", 1.0),
        ("deg", "deg", 1.0),
    ],
)
def test_units_of_the_site_file_are_shown_in_the_readers(mark: str, shown: str, size: float) -> None:
    """Lengths and speeds change, masses and angles do not; metric leaves all as they are."""
    assert size_of(mark, FEET) == (shown, pytest.approx(size, rel=1e-15))
    assert size_of(mark, METRIC) == (mark, 1.0)


@pytest.mark.parametrize("units", UNITS.values(), ids=UNITS)
def test_nothing_is_not_written_with_a_minus(units) -> None:
    """What rounds to nothing has no sign of its own; what is unknown is a dash."""
    assert units.signed(-1e-9) == units.signed(0.0) == f"+{units.offset(0.0)}"
    assert units.offset(-1e-9) == units.offset(0.0)
    assert units.depth(-1e-9) == "0.0"
    assert {units.signed(math.nan), units.offset(math.inf), units.depth(math.nan)} == {"–"}


@pytest.mark.parametrize(
    ("said", "told"),
    [
        ("action limit at 212.3 m, 31.2 mm", "action limit at 696.5 ft, 1.228 in"),
        (
            "depth jumped from 1.00 m to 254.00 m; not summed across",
            "depth jumped from 3.28 ft to 833.33 ft; not summed across",
        ),
        ("face sums stand apart at 10, 20, 30 m", "face sums stand apart at 33, 66, 98 ft"),
        ("tied: -3.0 mm east and +1.5 mm north", "tied: -0.118 in east and +0.059 in north"),
        ("line at 3 m/s", "line at 10 ft/s"),
        ("probe temperature at 30.5 m, 55.0 °C", "probe temperature at 100.1 ft, 55.0 °C"),
        ("supply low at 30.5 m, 10.50 V", "supply low at 100.1 ft, 10.50 V"),
        # What is no length, or no plain number before its unit, stays as it is.
        ("normal gravity 9.81 m/s² in 2670 kg/m³", "normal gravity 9.81 m/s² in 2670 kg/m³"),
        ("no reading for 5 s", "no reading for 5 s"),
        ("apart at 10, 20 and 3 more m", "apart at 10, 20 and 3 more m"),
        ("in 3, 12.4 mm", "in 3, 12.4 mm"),
        ("port v1.2 m", "port v1.2 m"),
    ],
)
def test_what_the_engine_says_is_told_in_feet_and_inches(said: str, told: str) -> None:
    """Lengths and speeds change with their unit, no coarser than they were written; the rest stands as it was."""
    assert lengths_in(said, FEET) == told
    assert lengths_in(said, METRIC) == said


@pytest.mark.parametrize("name", [*get_args(AlarmName)])
def test_every_alarm_of_the_engine_is_told_in_feet_and_inches(name: str) -> None:
    """No message that the board makes of a sighting keeps a metric length; its depth and value are the same length."""
    board = Board(Limits())
    if name == JUMP:
        (change, *_) = board.jumped(1.0, 10.0, 200.0)
    else:
        at = np.array([0.0, 100.0])
        seen = Sighting(name, at, np.array([1, 1], dtype=np.int8), np.full(2, 212.3), np.full(2, 0.0312))
        found = board.see(seen) if name in board._on_readings else board.turn(name, 1.0, on=True, message="x")
        change = found[0]
    told = words.alarm_change(change, FEET)
    assert not re.search(r"\d (m|mm)\b", told), told
    if "212.3 m" in change.message:
        assert "696.5 ft" in told


def test_what_a_person_said_of_an_alarm_stays_as_it_was() -> None:
    """A reason for shelving is quoted, whatever lengths are in it."""
    message = "action limit at 212.3 m, 31.2 mm; shelved by Ada for 600 s: rope is 10 m short"
    told = words.reworded(message, FEET)
    assert told == "action limit at 696.5 ft, 1.228 in; shelved by Ada for 600 s: rope is 10 m short"


_METRIC = re.compile(r"\d (m|mm|m/s)\b|\b(m|mm) \w|(?<!\w)mm\b")


@pytest.mark.parametrize("size", [(80, 24), (120, 40)])
async def test_watch_screen_shows_no_metric_length_in_feet_and_inches(
    session, snapshot, alarm, standing, size: tuple[int, int]
) -> None:
    """With feet and inches no picture, figure, line, alarm or note of the watch screen says m or mm."""
    app = Dashboard(WatchScreen(replace(session(), units=FEET)), glyphs=BRAILLE)
    app.remembered.change(units="feet")
    noted = standing(notes=("down and up pass disagree at 3 of 9 stations, first at 40 m",))
    async with app.run_test(size=size) as pilot:
        text = "\n".join(await shown(pilot, snapshot(alarms=(alarm(),), standing=noted)))
        await pilot.press("l")
        text += text_of(app)
    assert not _METRIC.search(text), _METRIC.search(text)
    assert text.count("696.5 ft, 0.622 in") >= 2
    assert "first at 131 ft" in text


@pytest.mark.parametrize("way", ["l", "s", "d", "c"])
async def test_units_change_on_whatever_page_is_open(session, snapshot, alarm, way: str) -> None:
    """F2 over a page, one arrow, escape: the page speaks feet and inches, and metres again after another."""
    stations = snapshot().stations
    passes = tuple(replace(one, number=30 + i, passing=1, direction="up") for i, one in enumerate(stations))
    app = Dashboard(WatchScreen(session()))
    async with app.run_test(size=(120, 40)) as pilot:
        await shown(pilot, replace(snapshot(alarms=(alarm(),)), stations=(*stations, *passes)))
        await pilot.press(way)
        assert _METRIC.search(text_of(app))
        before = text_of(app)
        await pilot.press("f2", "right", "escape")
        await pilot.pause()
        left = _METRIC.search(text_of(app).replace("m sound", ""))  # a key and its name
        assert left is None
        await pilot.press("f2", "right", "escape")
        await pilot.pause()
        assert text_of(app) == before


def test_lines_of_text_follow_the_units_and_tables_do_not(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    """`--plain` speaks as the screen would; `reduce`, the report and the export stay metric in every setting."""
    log = next((Path(__file__).parents[2] / "replay_logs").glob("sandrigg*"))
    told = {}
    for units in ("metric", "feet"):
        path = tmp_path / f"{units}.toml"
        path.write_text(f'units = "{units}"\n')
        monkeypatch.setenv("EASTFALL_CONFIG", str(path))
        run = CliRunner()
        plain = run.invoke(cli, ["replay", str(log), "--plain"]).output
        out = tmp_path / f"{units}.csv"
        assert run.invoke(cli, ["export", str(log), str(out)]).exit_code == 0
        reduced = run.invoke(cli, ["reduce", str(log)]).output
        report = run.invoke(cli, ["report", str(log)]).output
        told[units] = plain, out.read_text(), reduced, report
    assert " m: residual " in told["metric"][0]
    assert " ft: residual " in told["feet"][0]
    assert not _METRIC.search(told["feet"][0])
    assert told["metric"][1:] == told["feet"][1:]
    assert all(told["feet"][1:])
