"""Sentences: units, signs, directions and the line they are reckoned from."""

from collections.abc import Callable
from dataclasses import replace
from math import nan

import pytest

from eastfall.physics.findings import AlarmView, RestPoint, Standing
from eastfall.tui import words
from eastfall.tui.steering import steer

pytestmark = pytest.mark.invariant
Make = Callable[..., Standing]


def test_answer_names_depth_residual_uncertainty_direction_and_limit(standing: Make) -> None:
    """The answer is one line with every number's unit: residual 8.637 mm toward atan2(8.6, 0.8) = 84.7°."""
    assert words.answer(standing()) == ("WITHIN 60.0 m: residual 8.6 ± 1.8 mm toward 085°, limit 30.0 mm")


def test_answer_past_the_warning_limit_says_so(standing: Make) -> None:
    """Between warning and action limit the verdict holds and the warning is told; it fits 80 columns."""
    said = words.answer(standing(measured_east=0.0213, depth=1160.0))
    assert said == "WITHIN, PAST WARNING 1160.0 m: residual 20.0 ± 1.8 mm toward 088°, limit 30.0 mm"
    assert len(said) <= 80


@pytest.mark.parametrize(("verdict", "word"), [("over", "OVER"), ("undecided", "UNDECIDED")])
def test_answer_begins_with_the_verdict(standing: Make, verdict: str, word: str) -> None:
    """The first word is the decision, not a colour."""
    assert words.answer(standing(verdict=verdict)).startswith(f"{word} 60.0 m: ")


def test_no_reading_and_no_offset_are_said_in_words(standing: Make) -> None:
    """Nothing is never shown as a number."""
    assert words.answer(None) == "NO ANSWER YET: waiting for the first reading"
    assert words.answer(standing(measured_east=nan)) == "NO ANSWER 60.0 m: no offset in the readings"


@pytest.mark.parametrize(
    ("east", "north", "shown"),
    [(0, 1, "000°"), (1, 0, "090°"), (0, -1, "180°"), (-1, 0, "270°"), (-1e-9, 1, "000°"), (0, 0, "–")],
)
def test_bearings_are_clockwise_from_north_with_three_digits(east: float, north: float, shown: str) -> None:
    """North is 000°, east 090°; 359.99° rounds to 000°, not 360°; no length has no direction."""
    assert words.bearing(east, north) == shown


def test_steering_points_back_along_the_residual(standing: Make) -> None:
    """A residual toward 085° is undone by a move toward 265°."""
    assert words.steering(standing(), "guided") == "Move 9 mm toward 265° to meet the expected line."


def test_steering_by_a_bob_says_what_goes_which_way(standing: Make) -> None:
    """A bob that reads 085° of its mark: the line's top goes back, or the mark goes after the bob."""
    said = words.steering(standing(), "hung")
    assert said == "Move the top of the line 9 mm toward 265°, or the mark here toward 085°."
    assert len(said) <= 80


def test_steering_leaves_alone_what_the_instrument_cannot_tell(standing: Make) -> None:
    """A residual smaller than its expanded uncertainty is no reason to move."""
    said = words.steering(standing(measured_east=0.0018, measured_north=0.0), "guided")
    assert said == "Leave it: 0.5 mm is less than its uncertainty, ± 2.4 mm."


def test_small_moves_are_told_to_a_tenth(standing: Make) -> None:
    """Below two millimetres a whole millimetre would be too coarse."""
    said = words.steering(
        standing(measured_east=0.0029, measured_north=0.0, u_east=1e-4, u_north=1e-4), "guided"
    )
    assert said.startswith("Move 1.6 mm toward 270°")


@pytest.mark.parametrize(
    ("changes", "kind", "begins"),
    [
        ({"hold_still": 4.2}, "guided", "Hold still: 4 s"),
        ({"hold_still": 0.3}, "guided", "Hold still: the next reading closes this station."),
        ({"measured_east": nan}, "guided", "Nothing to steer by"),
        ({}, "drop", "Stand clear"),
    ],
)
def test_steering_says_first_what_matters_most(
    standing: Make, changes: dict[str, float], kind: str, begins: str
) -> None:
    """Holding still, missing offsets and falling bodies come before moving anything."""
    assert words.steering(standing(**changes), kind).startswith(begins)  # type: ignore[arg-type]


def test_swing_that_does_not_fit_is_waited_for(standing: Make) -> None:
    """A rest point from a swing that does not fit is no reason to move."""
    rest = RestPoint(
        east=0.0, north=0.0, u_east=1e-3, u_north=1e-3, covariance_east_north=0.0, period=30.0, decay=100.0,
        swings=1.0, fits=False, message="half a swing seen",
    )  # fmt: skip
    assert words.steering(standing(rest_point=rest), "hung") == "Let it swing: half a swing seen."
    assert words.swing(rest) == "rest point E +0.0 N +0.0 mm ± 2.0 mm, 1.0 full swings seen, period 30.00 s"


def test_offsets_carry_sign_and_letter() -> None:
    """East and north are named and signed."""
    assert words.pair(-0.00123, 0.0456) == "E -1.2 N +45.6 mm"
    assert words.pair(nan, 0.0) == "E – N – mm"


@pytest.mark.parametrize(("seconds", "shown"), [(0, "0:00"), (59.9, "0:59"), (3661, "1:01:01"), (nan, "–")])
def test_times_are_minutes_and_seconds(seconds: float, shown: str) -> None:
    """Below an hour the hour is left out."""
    assert words.clock(seconds) == shown


def test_alarm_line_begins_with_its_state(alarm: Callable[..., AlarmView]) -> None:
    """State and time stand before what the alarm is about, and its name is not said twice."""
    assert words.alarm(alarm()) == "NEW 5:12 warning limit at 212.3 m, 15.8 mm"
    silent = alarm(name="feed silent", state="returned", message="no reading for 5 s")
    assert words.alarm(silent) == "WENT BACK, NOT SEEN 5:12 feed silent: no reading for 5 s"


def test_every_reference_line_and_kind_has_a_name() -> None:
    """The title can always name what the offsets are measured from."""
    assert set(words.REFERENCE) == {"straight", "field-line", "hung-line"}
    assert set(words.KIND) == {"guided", "hung", "drop"}


def test_swing_tells_what_is_left_to_wait_for() -> None:
    """Swings to go for half a millimetre, the free period, and 25 mm dying to 2 mm: decay 1000 s times ln 12.5."""
    rest = RestPoint(
        east=0.001, north=0.0, u_east=4e-4, u_north=3e-4, covariance_east_north=0.0, period=41.1, decay=1000.0,
        swings=2.0, fits=True, free_period=41.0, amplitude=0.025, swings_needed=5.1,
    )  # fmt: skip
    told = words.swing(rest)
    assert "2.0 full swings seen, 3.1 more for ± 0.5 mm" in told
    assert "period 41.10 s, a free line 41.00 s" in told
    assert "swings 25.0 mm to each side, under 2.0 mm in 42:05" in told
    assert "MAY BE TOUCHING" not in told
    enough = words.swing(replace(rest, swings=6.0, swings_needed=6.0, amplitude=0.001))
    assert "enough for ± 0.5 mm" in enough
    assert enough.endswith("swings 1.0 mm to each side")
    touching = replace(rest, message="the line may be touching: it swings in 10.00 s from side to side")
    assert "MAY BE TOUCHING" in words.swing(touching)


def test_what_is_not_known_well_enough_is_not_to_be_moved(standing: Make) -> None:
    """5.9 mm with ± 37 mm against 20 mm: undecided, and nobody is told that it may be left."""
    vague = standing(
        measured_east=0.0059, measured_north=0.0, expected_east=0.0, u_east=0.0185, u_north=0.0185,
        verdict="undecided",
    )  # fmt: skip
    told = words.steering(vague, "hung")
    assert told.startswith("Do not move it yet: 5.9 mm is less than its uncertainty, ± 37.0 mm")


@pytest.mark.parametrize(("kind", "begins"), [("hung", "Let it swing: "), ("guided", "Do not move it yet: ")])
def test_an_offset_without_an_uncertainty_is_not_to_be_moved(standing: Make, kind: str, begins: str) -> None:
    """26 mm ± nothing, as from the first seconds of a swing: nobody is told to move, and no arrow points."""
    blind = standing(measured_east=0.026, u_east=nan, u_north=nan, verdict="undecided")
    assert words.steering(blind, kind).startswith(begins)  # type: ignore[arg-type]
    told = steer(blind, kind)  # type: ignore[arg-type]
    assert (told.angle, told.beat) == (None, None)


def test_nobody_is_told_to_move_nothing(standing: Make) -> None:
    """0.03 mm ± 0.02 mm is shown as 0.0: no "move 0.0 mm", no arrow, no sound."""
    tiny = standing(
        measured_east=0.00003,
        measured_north=0.0,
        expected_east=0.0,
        expected_north=0.0,
        u_east=1e-5,
        u_north=1e-5,
    )
    assert words.steering(tiny, "guided") == "Leave it: it is off by less than this screen shows."
    told = steer(tiny, "guided")
    assert (told.angle, told.beat) == (None, None)


@pytest.mark.parametrize(
    ("kind", "changes", "told"),
    [
        ("guided", {"still": True, "direction": "down"}, "down, at rest"),
        ("guided", {"still": False, "direction": "up"}, "up, in passing"),
        ("drop", {"readings": 1, "still": True}, "1 body"),
        ("drop", {"readings": 12, "still": True}, "12 bodies"),
    ],
)
def test_stations_of_a_drop_are_told_by_their_bodies(station, kind, changes, told: str) -> None:
    """A body that fell made no pass and came to no rest: what counts is how many fell."""
    assert words.taken(station(**changes), kind) == told
