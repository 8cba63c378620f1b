"""Guards: what each finds, what it leaves alone, and that blocks do not matter."""

import itertools

import numpy as np
import pytest
from hypothesis import HealthCheck, given, settings
from hypothesis import strategies as st
from truth_help import DEPTH, capture

from eastfall.physics.alarms import BEYOND
from eastfall.physics.guards import (
    FROZEN,
    SATURATED,
    SPINNING,
    SUPPLY,
    TEMPERATURE,
    BadLines,
    Guards,
)
from eastfall.physics.readings import CHANNELS, Readings
from eastfall.physics.settings import DEGREE, Instrument, Limits
from eastfall.physics.survey import BAD_LINES, JUMP, Survey

INSTRUMENT = Instrument(
    range=15.0 * DEGREE, lowest_temperature=263.15, highest_temperature=323.15, lowest_supply=11.0
)


def put(readings, **columns):
    """Give readings with columns exchanged."""
    data = readings.data.copy()
    for name, values in columns.items():
        data[CHANNELS.index(name)] = values
    return Readings(data)


def sighted(readings, name, cuts=(), limits=None):
    """Give the times at which a guard says BEYOND, and the rows it blanks."""
    guards, times, blank, at = Guards(INSTRUMENT, limits or Limits()), [], [], 0
    for begin, end in itertools.pairwise([0, *sorted(cuts), len(readings)]):
        seen, bad = guards.feed(readings[begin:end])
        for one in seen:
            if one.name == name:
                times += one.time[one.placed == BEYOND].tolist()
        blank += [] if bad is None else (begin + np.flatnonzero(bad)).tolist()
        at = end
    assert at == len(readings)
    return times, blank


def test_a_tilt_at_the_end_of_its_range_is_seen_and_blanked():
    """15.00° of 15° on either axis: those rows and no others."""
    readings = capture(1)
    readings.data[3, 200:205] = 15.0 * DEGREE
    readings.data[4, 300] = -15.0 * DEGREE
    times, blank = sighted(readings, SATURATED)
    assert blank == [*range(200, 205), 300]
    np.testing.assert_allclose(times, readings.time[blank])


@pytest.mark.parametrize("digits", [6, 4, 3])
def test_a_frozen_tilt_is_seen_after_its_time_whatever_the_digits(digits):
    """Readings printed to 1e-6, 1e-4 or 1e-3 of a degree: a stretch of 20 s is seen, and nothing else all day long."""
    readings = capture(2)
    for row in (3, 4):
        readings.data[row] = np.round(np.degrees(readings.data[row]), digits) * DEGREE
    assert sighted(readings, FROZEN) == ([], [])
    readings.data[3:5, 250:450] = readings.data[3:5, 250:251]
    times, _ = sighted(readings, FROZEN)
    begin = readings.time[250]
    assert begin + 2.0 <= times[0] <= begin + 4.0
    assert times[-1] == readings.time[449]


@pytest.mark.parametrize("tilt", ["nothing", "slow drift", "coarse steps"])
def test_a_calm_instrument_is_never_called_frozen(tilt):
    """No noise, or steps far larger than the noise: equal neighbours are the rule, and no fault."""
    readings = capture(3)
    calm = {
        "nothing": np.zeros(len(readings)),
        "slow drift": 1e-6 * np.floor(readings.time / 3.0),
        "coarse steps": np.round(readings.column("tilt_a"), 3),
    }[tilt]
    assert sighted(put(readings, tilt_a=calm, tilt_b=calm), FROZEN) == ([], [])


def test_a_probe_at_rest_may_show_the_same_for_ever():
    """Frozen only counts while the line moves."""
    readings = capture(4, rest=120.0)
    still = (readings.time > 63.0) & (readings.time < 180.0)
    readings.data[3:5, still] = 1e-3
    assert sighted(readings, FROZEN) == ([], [])


def test_spinning_is_a_rate_of_azimuth_and_a_change_of_face_is_not_one_for_long():
    """45°/s through north against 30°/s: seen while it lasts; half a turn at once: seen for one look of 0.5 s."""
    readings = capture(5)
    turning = np.interp(readings.time, [40.0, 50.0], [350.0, 350.0 + 450.0]) % 360.0 * DEGREE
    times, _ = sighted(put(readings, azimuth=turning), SPINNING)
    assert times[0] == pytest.approx(40.5, abs=0.51)
    assert times[-1] == pytest.approx(50.0, abs=0.51)
    flipped = np.where(readings.time > 62.0, np.pi, 0.0)
    assert len(sighted(put(readings, azimuth=flipped), SPINNING)[0]) == 1


def test_temperature_and_supply_have_their_bounds():
    """Above 50 °C, below -10 °C, below 11 V: seen from there on, and not before."""
    readings = capture(6)
    warm = np.interp(readings.time, [0.0, 100.0], [293.15, 343.15])
    assert sighted(put(readings, temperature=warm), TEMPERATURE)[0][0] == pytest.approx(60.0, abs=0.51)
    cold = np.interp(readings.time, [0.0, 100.0], [293.15, 243.15])
    assert sighted(put(readings, temperature=cold), TEMPERATURE)[0][0] == pytest.approx(60.0, abs=0.51)
    flat = np.interp(readings.time, [0.0, 100.0], [12.0, 10.0])
    assert sighted(put(readings, supply=flat), SUPPLY)[0][0] == pytest.approx(50.0, abs=0.51)


@pytest.mark.invariant
@settings(deadline=None, max_examples=40, suppress_health_check=[HealthCheck.too_slow])
@given(
    cuts=st.sets(st.integers(1, 1200), max_size=30),
    frozen=st.tuples(st.integers(0, 1100), st.integers(1, 300)),
)
def test_blocks_do_not_matter(cuts, frozen):
    """Every guard, cut anywhere, says the same of the same rows."""
    readings = capture(7)
    readings.data[3:5, frozen[0] : sum(frozen)] = readings.data[3:5, frozen[0] : frozen[0] + 1]
    azimuth = np.cumsum(np.where(readings.time > 90.0, 6.0 * DEGREE, 0.0)) % (2.0 * np.pi)
    readings = put(readings, azimuth=azimuth, supply=12.0 - 0.01 * readings.time)
    cuts = [cut for cut in cuts if cut < len(readings)]
    for name in (FROZEN, SPINNING, SUPPLY):
        assert sighted(readings, name, cuts) == sighted(readings, name)


def told(rejected, cuts=(), until=1000.0, most=5.0):
    """Give what the bad-line guard says of host times fed in pieces, with a look at each piece's end."""
    guard, events = BadLines(most), []
    for part in np.split(np.asarray(rejected, float), sorted(cuts)):
        events += guard.feed(part, float(part[-1]) if part.size else -np.inf)
    return events + guard.feed(np.empty(0), until)


def test_bad_lines_turn_on_with_the_fifth_in_a_minute_and_off_when_it_has_passed():
    """Five within 60 s: on with the fifth, off 60 s after the first of the last five."""
    assert told([0.0, 10.0, 20.0, 30.0]) == []
    assert told([0.0, 10.0, 20.0, 30.0, 40.0]) == [(40.0, True), (60.0, False)]
    assert told([0.0, 10.0, 20.0, 30.0, 40.0, 55.0]) == [(40.0, True), (70.0, False)]
    assert told([0.0, 10.0, 20.0, 30.0, 61.0]) == []


@pytest.mark.invariant
@given(
    gaps=st.lists(st.floats(0.0, 40.0), min_size=1, max_size=60),
    cuts=st.sets(st.integers(1, 59), max_size=10),
    most=st.integers(1, 8),
)
def test_bad_lines_agree_with_counting_one_by_one_however_they_come(gaps, cuts, most):
    """Against a count in a loop: the same instants, on and off, from any pieces."""
    times = np.round(np.cumsum(gaps), 3)
    events, until = [], None
    for at, now in enumerate(times.tolist()):
        if until is not None and until < now:
            events.append((until, False))
            until = None
        first = at - most + 1
        if first >= 0 and times[first] + 60.0 >= now:
            if until is None:
                events.append((now, True))
            until = float(times[first]) + 60.0
    if until is not None:
        events.append((until, False))
    pieces = told(times, [cut for cut in cuts if cut < times.size], until=1e6, most=float(most))
    assert pieces == events


def alarms(shaft, readings, name, **changes):
    """Give the states that one alarm goes through in a whole run."""
    survey = Survey(shaft(depth=DEPTH, instrument=INSTRUMENT, **changes))
    survey.feed(readings)
    return [(one.new, one.time, one.message) for one in survey.result().alarms if one.name == name]


def test_faults_of_the_instrument_are_alarms_with_delay_and_words(shaft):
    """A supply that falls under 11 V: an alarm three seconds later, with its depth and volts."""
    readings = put(capture(8), supply=np.interp(np.arange(0.0, 124.0, 0.1), [0.0, 100.0], [12.0, 10.0]))
    ((state, time, message),) = alarms(shaft, readings, SUPPLY)
    assert state == "active"
    assert time == pytest.approx(53.3, abs=0.6)
    assert "supply low at 1" in message
    assert message.endswith(" V")


def test_an_alarm_named_latching_stays_until_acknowledged(shaft):
    """Spinning for ten seconds: it returns by itself, or stays latched where the site says so."""
    readings = capture(9)
    azimuth = np.interp(readings.time, [40.0, 50.0], [0.0, 800.0]) % 360.0 * DEGREE
    readings = put(readings, azimuth=azimuth)
    assert [one[0] for one in alarms(shaft, readings, SPINNING)] == ["active", "returned"]
    latching = Limits(latching=("spinning",))
    assert [one[0] for one in alarms(shaft, readings, SPINNING, limits=latching)] == ["active", "latched"]


def test_bad_lines_are_an_alarm_from_ticks_and_from_readings_alike(shaft):
    """Thirty unreadable lines in a minute, whether readings go on or nothing but rubbish comes."""
    rejected = 20.0 + 0.1 * np.arange(40.0)
    one, other = Survey(shaft(depth=DEPTH)), Survey(shaft(depth=DEPTH))
    readings = capture(10)
    one.feed(readings, rejected)
    for start in range(0, len(readings), 100):
        block = readings[start : start + 100]
        low, high = block.host_time[[0, -1]]
        other.feed(block, rejected[(rejected > low - 0.05) & (rejected <= high + 0.05)])
    for survey in (one, other):
        changes = [(x.new, x.time) for x in survey.result().alarms if x.name == BAD_LINES]
        assert changes == [("active", pytest.approx(22.9)), ("returned", pytest.approx(81.0))]
    assert one.result().alarms == other.result().alarms
    only = Survey(shaft(depth=DEPTH))
    only.feed(Readings.none(), rejected)
    assert any(x.name == BAD_LINES for x in only.result().alarms)


def test_no_alarm_is_lost_in_a_flood(shaft):
    """A counter that jumps forty times while the link drops twice as often: every one is kept, in its order."""
    readings = capture(11)
    steps = 6.0 * ((np.arange(len(readings)) // 14) % 2)
    readings.data[2] = np.clip(readings.depth, 20.0, 100.0) + steps
    survey = Survey(shaft(depth=DEPTH + 20.0, instrument=INSTRUMENT))
    for start in range(0, len(readings), 10):
        survey.feed(readings[start : start + 10])
        now = float(readings.host_time[min(start + 9, len(readings) - 1)])
        survey.condition(now, "link lost", on=start % 20 == 0, message="cable")
    result = survey.result()
    jumps = [one for one in result.alarms if one.name == JUMP]
    edges = np.flatnonzero(np.diff(steps)) + 1
    assert len(jumps) == 2 * edges.size
    np.testing.assert_allclose([one.time for one in jumps[::2]], readings.time[edges], atol=1e-9)
    assert sum(one.name == "link lost" and one.new == "active" for one in result.alarms) == 62
    assert all(a.new == b.old for a, b in itertools.pairwise(jumps))
