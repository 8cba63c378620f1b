"""Alarms of a run: limits with their delays, silence, clocks, and what persons and the edge do to them."""

from dataclasses import replace

import numpy as np
import pytest
from survey_help import journey, run

from eastfall.physics.errors import ParameterError
from eastfall.physics.readings import Readings
from eastfall.physics.settings import Limits, Shaft
from eastfall.physics.survey import ACTION, SILENT, WALL, WARNING, Survey


def test_a_slow_lean_raises_warning_then_action_after_the_delay_and_returns_with_the_dead_band(shaft):
    """1 mm/m: beyond 15 mm from 15 m on, raised 3 s later; back inside 13 mm on the way up, returned 3 s after that."""
    assumptions = shaft(depth=40.0, limits=Limits(on_delay=3.0, off_delay=3.0, dead_band=0.002))
    readings = journey(speed=1.0, depth=40.0, lean=(1e-3, 0.0))
    survey, _ = run(assumptions, readings)
    changes = [(one.name, one.new, one.time) for one in survey.result().alarms]
    down = readings.time <= 41.0
    at = lambda depth: np.interp(depth, readings.depth[down], readings.time[down])  # noqa: E731
    end = readings.time[-1]
    # One row, 0.05 s, is the grain of a crossing.
    assert changes == [
        (WARNING, "active", pytest.approx(at(15.0) + 3.0, abs=0.06)),
        (ACTION, "active", pytest.approx(at(25.0) + 3.0, abs=0.06)),
        (ACTION, "returned", pytest.approx(end - at(23.0) + 3.0, abs=0.06)),
        (WARNING, "returned", pytest.approx(end - at(13.0) + 3.0, abs=0.06)),
    ]


def test_an_excursion_shorter_than_the_delay_raises_nothing(shaft):
    """Two seconds beyond the limit of a three-second delay: no alarm."""
    readings = journey(speed=1.0, depth=40.0)
    readings.data[4, 200:210] += 0.05
    readings.data[4, 240:250] -= 0.05
    survey, rows = run(shaft(depth=40.0), readings)
    assert np.hypot(rows[5] - rows[7], rows[6] - rows[8]).max() > 0.015
    assert survey.result().alarms == ()


def test_silence_is_an_alarm_stamped_at_its_limit_whenever_somebody_looks(shaft):
    """No reading for 5 s: the alarm bears the fifth second, and is the same from ticks as from the next reading."""
    readings = journey(speed=1.0, depth=40.0)
    kept = readings[(readings.time <= 10.0) | (readings.time >= 22.0)]
    looked, not_looked = Survey(shaft(depth=40.0)), Survey(shaft(depth=40.0))
    early = kept.time <= 10.0
    looked.feed(kept[early])
    assert looked.tick(14.9).alarms == ()
    assert [(one.name, one.time) for one in looked.tick(17.3).alarms] == [(SILENT, 15.0)]
    looked.feed(kept[~early])
    not_looked.feed(kept)
    assert looked.result().alarms == not_looked.result().alarms
    assert [(one.new, one.time) for one in looked.result().alarms] == [("active", 15.0), ("returned", 22.0)]


def test_a_feed_that_never_begins_is_silent(shaft):
    """Without a single reading the alarm comes after the stated seconds from the start of the run."""
    survey = Survey(shaft())
    assert [(one.name, one.time) for one in survey.tick(6.0).alarms] == [(SILENT, 5.0)]
    assert survey.standing() is None


def test_a_capture_without_arrival_times_has_no_silence(shaft):
    """Host times that are missing, or a survey told not to watch the feed, raise no silent-feed alarm."""
    readings = journey(speed=1.0, depth=40.0)[::200]
    survey = Survey(shaft(depth=40.0), feed_watched=False)
    survey.feed(readings)
    assert survey.result().alarms == ()
    readings.data[1] = np.nan
    other = Survey(shaft(depth=40.0))
    other.feed(readings)
    assert other.result().alarms == ()


def test_an_instruments_own_clock_may_stand_apart_from_the_hosts(shaft):
    """Instrument time an hour ahead of the host: silence is judged by the host and shown on the instrument's clock."""
    readings = journey(speed=1.0, depth=40.0)
    data = readings.data.copy()
    data[0] += 3600.0
    survey = Survey(shaft(depth=40.0))
    survey.feed(Readings(data)[:200])
    changes = survey.tick(9.95 + 5.0 + 1.0).alarms
    assert [(one.name, round(one.time, 6)) for one in changes] == [(SILENT, 3614.95)]


def test_time_that_steps_back_is_held(shaft):
    """An instrument clock that jumps back does not take the run back."""
    readings = journey(speed=1.0, depth=40.0)
    data = readings.data.copy()
    data[0, 500:] -= 7.0
    _, rows = run(shaft(depth=40.0), Readings(data))
    assert np.all(np.diff(rows[0]) >= 0.0)


def test_conditions_from_the_edge_and_persons_go_through_the_same_states(shaft):
    """Link lost, acknowledged by a person, back again: active, acknowledged, normal, with the name of who did it."""
    survey = Survey(shaft())
    survey.feed(journey()[:100])
    survey.condition(5.0, "link lost", on=True, message="the cable")
    survey.acknowledge(6.0, "link lost", who="Ines")
    survey.condition(7.0, "link lost", on=False, message="back")
    changes = [one for one in survey.result().alarms if one.name == "link lost"]
    assert [(one.old, one.new) for one in changes] == [
        ("normal", "active"),
        ("active", "acknowledged"),
        ("acknowledged", "normal"),
    ]
    assert "Ines" in changes[1].message


def test_acknowledging_or_shelving_what_is_not_there_is_refused(shaft):
    """A wrong name, no reason or no time is refused in one line."""
    survey = Survey(shaft())
    with pytest.raises(ParameterError, match="alarm is frobnicate; expected one of action limit"):
        survey.acknowledge(1.0, "frobnicate")
    with pytest.raises(ParameterError, match="reason"):
        survey.shelve(1.0, WARNING, 60.0, "  ")
    with pytest.raises(ParameterError, match="seconds"):
        survey.shelve(1.0, WARNING, -1.0, "crew change")


def test_wall_clearance_is_judged_on_where_the_guide_is(shaft):
    """A guide that leans to within 100 mm of the wall raises the alarm; the lean of the moving line does not count."""
    base = shaft(depth=40.0, limits=Limits(wall_clearance=0.10, action=9.0, warning=9.0, on_delay=0.0))
    narrow = replace(base, shaft=Shaft(depth=40.0, diameter=0.40))
    plumb, _ = run(narrow, journey(depth=40.0, speed=10.0))
    assert plumb.result().alarms == ()
    leaning, _ = run(narrow, journey(depth=40.0, speed=1.0, lean=(0.003, 0.0)))
    first = leaning.result().alarms[0]
    assert (first.name, first.new) == (WALL, "active")
    assert first.depth == pytest.approx(0.1 / 0.003, abs=0.1)
