"""Units: the sizes are those agreed, and the same length reads the same in both."""

import math

import pytest

from eastfall.tui import words
from eastfall.tui.app import Dashboard
from eastfall.tui.axes import Axis
from eastfall.tui.glyphs import BRAILLE
from eastfall.tui.screens.stations import head, row
from eastfall.tui.typed import read_moment
from eastfall.tui.units import FEET, METRIC, UNITS, size_of

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


async def test_watch_screen_shows_no_metric_length_in_feet_and_inches(session, snapshot) -> None:
    """With feet and inches no picture, figure or line of the watch screen says m or mm; alarms keep their words."""
    from dataclasses import replace

    from eastfall.tui.screens.watch import WatchScreen

    app = Dashboard(WatchScreen(replace(session(), units=FEET)), glyphs=BRAILLE)
    app.remembered.change(units="feet")
    async with app.run_test(size=(120, 40)) as pilot:
        app.take(snapshot())
        await pilot.pause()
        strips = app.screen._compositor.render_strips()
        text = " ".join("".join(part.text for part in strip) for strip in strips)
    said = text.replace("mm/s", "").split()
    assert {"ft", "in"} <= set(said)
    assert not {"m", "mm", "m:", "m/s"} & set(said)
