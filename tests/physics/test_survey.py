"""The engine: known truth in, findings out, the same however the rows are cut."""

import itertools
from dataclasses import replace
from math import cos, nan, radians

import numpy as np
import pytest
import truth_help
from hypothesis import HealthCheck, given, settings
from hypothesis import strategies as st
from truth_help import DEPTH, capture

from eastfall.physics.errors import ParameterError
from eastfall.physics.readings import Readings
from eastfall.physics.settings import Body, Depth, Guide, Instrument, Limits, Run, Shaft
from eastfall.physics.survey import ACTION, JUMP, SILENT, WALL, WARNING, Survey

OMEGA = 7.292115e-5  # GRS80, Moritz (1980)
G = 9.8167
COS = cos(radians(57.3))


def journey(
    *, speed=2.0, depth=300.0, rate=20.0, seed=None, lean=(0.0, 0.0), zero=0.0, noise=3.5e-5, azimuth=0.0
):
    """Give readings of a probe run down and up a straight guide that leans by `lean` (east, north) in m/m.

    The winch speeds up and slows down at 1 m/s². The tilts are worked out here from the textbook Coriolis
    acceleration, not by the program: a probe moving down at v, speeding up by a, feels the vertical lean east by
    2ωv cos φ/(g - a), so a plumb guide shows that much west.
    """
    rng = np.random.default_rng(seed)
    leg = depth / speed + speed
    time = np.arange(0.0, 2.0 * leg + 0.5 / rate, 1.0 / rate)
    into = np.where(time <= leg, time, 2.0 * leg - time)
    gone = np.clip(into, 0.0, speed) ** 2 / 2.0 + np.clip(into - speed, 0.0, leg - 2.0 * speed) * speed
    late = np.clip(into - (leg - speed), 0.0, speed)
    depth_now = gone + speed * late - late**2 / 2.0
    down = np.where(time <= leg, 1.0, -1.0)
    moving = down * np.minimum(np.minimum(into, leg - into), speed).clip(0.0)
    pull = np.where(into < speed, 1.0, np.where(into > leg - speed, -1.0, 0.0))
    east = lean[0] - 2.0 * OMEGA * moving * COS / (G - pull)
    north = np.full_like(time, lean[1])
    a = north * np.cos(azimuth) + east * np.sin(azimuth) + zero
    b = -north * np.sin(azimuth) + east * np.cos(azimuth) + zero
    if seed is not None:
        a, b = a + rng.normal(0, noise, time.size), b + rng.normal(0, noise, time.size)
    return Readings.of(time=time, depth=np.round(depth_now, 3), tilt_a=a, tilt_b=b)


def run(assumptions, readings, cuts=()):
    """Feed readings in pieces, close, and give the survey and its findings joined."""
    survey, found = Survey(assumptions), []
    for begin, end in itertools.pairwise([0, *sorted(cuts), len(readings)]):
        found.append(survey.feed(readings[begin:end]))
    survey.close(float(readings.host_time[-1]))
    return survey, np.concatenate([one.rows.data for one in found], axis=1)


def test_a_plumb_guide_without_noise_leaves_no_residual_down_or_up(shaft):
    """The Earth's part is all there is to see, and all of it is expected: residuals below 50 µm over 300 m.

    What is left comes from the six moments at which the winch changes its acceleration: the speed is estimated over
    1.8 s, so each is worth up to 8 µrad/(m/s) · 0.5 m/s · 2 m = 8 µm.
    """
    survey, _ = run(shaft(), journey())
    result = survey.result()
    assert len(result.stations) == 61
    # The first and last fifth of a second, where the line's speed is not known yet, are worth 5 µm each.
    assert max(abs(one.residual_east) for one in result.stations) < 5e-5
    # North: ½κz² of the curved vertical, which this journey leaves out; 31 µm at 300 m.
    assert max(abs(one.residual_north) for one in result.stations) < 4e-5


def test_a_true_lean_is_found_within_its_stated_uncertainty(shaft):
    """Lean 0.1 mm/m east and -0.05 mm/m north, noise of 0.002°: residual within 3u of the truth at every station."""
    survey, _ = run(shaft(), journey(lean=(1e-4, -5e-5), seed=3))
    for one in survey.result().stations:
        assert abs(one.residual_east - 1e-4 * one.depth) <= 3.0 * one.u_east + 2e-5
        assert abs(one.residual_north + 5e-5 * one.depth) <= 3.0 * one.u_north + 4e-5


@pytest.mark.invariant
@pytest.mark.parametrize("azimuth", [0.0, 37.0, 190.0, 359.0])
def test_the_azimuth_of_the_a_axis_does_not_change_what_is_found(shaft, azimuth):
    """The same guide seen by an instrument turned any way: the same residuals."""
    plain, _ = run(shaft(), journey(lean=(1e-4, 2e-4)))
    turned, _ = run(
        shaft(instrument=Instrument(a_azimuth=radians(azimuth))),
        journey(lean=(1e-4, 2e-4), azimuth=radians(azimuth)),
    )
    for one, other in zip(plain.result().stations, turned.result().stations, strict=True):
        assert other.residual_east == pytest.approx(one.residual_east, abs=1e-9)
        assert other.residual_north == pytest.approx(one.residual_north, abs=1e-9)


def test_closure_shows_what_the_moving_line_predicts_and_the_rest_is_error(shaft):
    """10 m/s at 57.3°, 300 m down and up: the sum ends 2·∫ε dz west of where it began, as predicted.

    ∫ v dz = 200 m · 10 m/s + 2·(10 m/s)³/(3 · 1 m/s²) a leg, ε = 2ωv cos φ/g: 42.8 mm, with a hundredth more or less
    for the felt gravity g - a of the ramps; a zero error of the tilt cancels between the passes.
    """
    survey, _ = run(shaft(), journey(speed=10.0, zero=1e-5))
    closure = survey.result().closure
    predicted = -2.0 * (2000.0 + 2000.0 / 3.0) * 2.0 * OMEGA * COS / G
    assert closure.depth == 0.0
    assert closure.east == pytest.approx(predicted, rel=1e-2)
    # Ramps of ten seconds: the estimate of the speed is late by up to half a metre a second at their corners.
    assert closure.expected_east == pytest.approx(closure.east, rel=5e-3)
    assert closure.north == pytest.approx(0.0, abs=1e-6)


def test_a_probe_that_starts_below_the_collar_counts_from_its_known_start(shaft):
    """Starting at 100 m with a known offset of (5, -3) mm: measured begins there, expected at nothing."""
    readings = journey()
    part = readings[(readings.depth >= 100.0) & (readings.time < 150.0)]
    survey, rows = run(shaft(guide=Guide(start_east=0.005, start_north=-0.003)), part)
    first = survey.result().stations[0]
    assert (first.depth, first.measured_east, first.measured_north) == pytest.approx((100.0, 0.005, -0.003))
    assert rows[7:9, 0].tolist() == [0.0, 0.0]


def test_readings_without_depth_or_tilt_or_outside_the_shaft_are_left_aside_and_counted(shaft):
    """Each reason has its count; what is left gives the findings of the good readings alone."""
    readings = journey(seed=2)
    bad = readings.data[:, :5].copy()
    bad[2, 0] = np.nan
    bad[2, 1] = 5000.0
    bad[2, 2] = -40.0
    bad[2, 3:] = readings.depth[900]
    bad[3, 3] = np.nan
    bad[3:5, 4] = 1.5
    mixed = Readings(np.concatenate([readings.data[:, :900], bad, readings.data[:, 900:]], axis=1))
    mixed.data[0, 900:905] = readings.data[0, 900]
    survey, rows = run(shaft(), mixed)
    assert survey.unused == {"no depth": 1, "depth outside the shaft": 2, "no usable tilt": 2}
    np.testing.assert_array_equal(rows, run(shaft(), readings)[1])


def swinging():
    """Give readings of a bob lowered to 50 m, swinging there, lowered to 60 m and swinging there."""
    rng = np.random.default_rng(8)
    time = np.arange(0.0, 200.0, 0.1)
    depth = np.interp(time, [0.0, 20.0, 100.0, 105.0, 200.0], [40.0, 50.0, 50.0, 60.0, 60.0])
    east = 0.02 * np.cos(time * np.sqrt(G / depth)) * np.exp(-time / 400.0) + rng.normal(0, 3e-4, time.size)
    return Readings.of(time=time, depth=depth, east=east, north=rng.normal(0, 3e-4, time.size))


def marks():
    """Give landing marks at three levels in turn."""
    rng = np.random.default_rng(9)
    count = 60
    east, north = rng.normal(0.02, 0.004, (2, count))
    return Readings.of(
        time=np.arange(count) * 20.0, depth=np.tile([30.0, 60.0, 80.0], 20), east=east, north=north
    )


EVERY_KIND = {
    "guided": journey(depth=90.0, seed=4, lean=(3e-4, 0.0)),
    "hung": swinging(),
    "drop": marks(),
}


@pytest.mark.invariant
@settings(deadline=None, max_examples=20, suppress_health_check=[HealthCheck.function_scoped_fixture])
@given(cuts=st.sets(st.integers(1, 1999), max_size=12), kind=st.sampled_from(["guided", "hung", "drop"]))
def test_findings_do_not_depend_on_how_the_rows_are_cut_into_blocks(shaft, cuts, kind):
    """Rows, stations, alarms, closure and rest point are the same to the last bit, whole or in pieces."""
    assumptions, readings = shaft(kind, depth=90.0), EVERY_KIND[kind]
    whole, rows = run(assumptions, readings)
    pieces, other = run(assumptions, readings, [one for one in cuts if one < len(readings)])
    np.testing.assert_array_equal(other, rows)
    assert pieces.result() == whole.result()


def troubled():
    """Give a ride in two faces with rests, spikes, a jump, a frozen stretch, lost rows and rows without tilt."""
    readings = capture(5, faces=True, rest=14.0)
    data = readings.data
    data[0:2, 900:] += 3.0
    data[2, 150:153] += 40.0
    data[2, 1100:] += 2.5
    data[3:5, 300:340] = data[3:5, 299:300]
    data[3, 420:440] = np.nan
    data[3, 700] = 1.4
    return Readings(np.delete(data, np.r_[480:520, 1000], axis=1))


TROUBLED = troubled()


@pytest.mark.invariant
@settings(deadline=None, max_examples=25, suppress_health_check=[HealthCheck.function_scoped_fixture])
@given(cuts=st.sets(st.integers(1, len(TROUBLED) - 1), max_size=14), taken=st.sampled_from(["all", "still"]))
def test_faults_halts_faces_and_jumps_do_not_depend_on_blocks_either(shaft, cuts, taken):
    """A ride with every trouble there is: rows, stations, alarms, faces, best estimate and notes to the last bit."""
    assumptions = shaft(depth=DEPTH, guide=Guide(readings=taken), instrument=Instrument(range=1.2))
    whole, rows = run(assumptions, TROUBLED)
    pieces, other = run(assumptions, TROUBLED, cuts)
    np.testing.assert_array_equal(other, rows)
    assert repr(pieces.result()) == repr(whole.result())
    assert pieces.unused == whole.unused
    if taken == "all":
        assert {one.name for one in whole.result().alarms} == {JUMP, "tilt frozen", "tilt at end of range"}
        assert whole.unused["depth spike"] == 3


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


def test_lean_between_stations_is_judged_with_its_own_uncertainty(shaft):
    """1 mm/m between stations 10 m apart: over 0.8, within 1.3, undecided at 1.0; the first of a pass has none."""
    readings = journey(depth=60.0, speed=1.0, lean=(6e-4, 8e-4), seed=13)
    for limit, word in ((0.0008, "over"), (0.0013, "within"), (0.001, "undecided")):
        survey, _ = run(shaft(depth=60.0, limits=Limits(lean=limit)), readings)
        first, *others = survey.result().stations[:7]
        assert first.lean is None
        assert first.lean_verdict is None
        assert {one.lean_verdict for one in others} == {word}
        for one in others:
            assert one.lean == pytest.approx(1e-3, abs=4.0 * one.u_lean)
            # A zero carries every metre alike, and its 0.001° is the larger part of what is not known.
            assert 1.7e-5 < one.u_lean < 4e-5


def test_lean_is_none_of_the_verdict_where_no_limit_is_given(shaft):
    """Lean and clearance are always told; their verdicts only where the site has a limit."""
    survey, _ = run(shaft(depth=60.0), journey(depth=60.0, speed=1.0, lean=(1e-3, 0.0)))
    second = survey.result().stations[1]
    assert second.lean == pytest.approx(1e-3, rel=1e-3)
    assert second.clearance == pytest.approx(3.0 - 0.01, abs=1e-4)
    assert (second.lean_verdict, second.clearance_verdict) == (None, None)


def test_clearance_has_a_guard_band_of_its_own(shaft):
    """3 m of radius less a lean of 3 mm/m, 2.85 m wanted: within above, undecided about, over below 50 m."""
    limits = Limits(wall_clearance=2.85, action=9.0, warning=9.0)
    survey, _ = run(shaft(depth=80.0, limits=limits), journey(depth=80.0, speed=1.0, lean=(3e-3, 0.0)))
    down = [one for one in survey.result().stations if one.direction == "down"]
    assert [one.clearance_verdict for one in down] == ["within"] * 5 + ["undecided"] + ["over"] * 3
    for one in down:
        assert one.clearance == pytest.approx(3.0 - 3e-3 * one.depth, abs=2e-4)
        assert one.u_clearance == pytest.approx(one.u_east, rel=1e-6)


def test_a_rest_renews_the_station_there_and_counts_the_seconds_down(shaft):
    """Twelve seconds at the bottom: "hold still" until the fifth, then one station at rest, its readings counted."""
    readings = capture(14, rest=12.0)
    survey = Survey(shaft(depth=DEPTH))
    stopped = int(np.argmax(readings.depth))
    survey.feed(readings[: stopped + 15])
    assert survey.standing().hold_still == pytest.approx(3.6, abs=0.8)
    survey.feed(readings[stopped + 15 :])
    assert survey.standing().hold_still is None
    still = [one for one in survey.result().stations if one.still]
    assert [(one.depth, one.number, one.readings) for one in still] == [(DEPTH, 12, 51)]
    slope = truth_help.Guide().slope(np.array([DEPTH]))[:, 0]
    assert (still[0].halt.east, still[0].halt.north) == pytest.approx(tuple(slope), abs=3e-5)
    assert still[0].halt.scatter_east == pytest.approx(3.5e-5, rel=0.4)


def test_what_the_edge_knows_stands_among_the_notes(shaft):
    """Notes given to the survey are in the standing answer and in the result; marks passed add their own."""
    given = replace(shaft(depth=DEPTH), depth=Depth(marks=((50.0, 50.0),)))
    survey = Survey(given, notes=("calibration is 400 days old",))
    survey.feed(capture(15))
    for notes in (survey.standing().notes, survey.result().notes):
        assert notes[0] == "calibration is 400 days old"
        assert any("deeper than the last depth mark, 50 m" in one for one in notes)


def test_marks_on_the_line_move_readings_to_their_true_depth(shaft):
    """A counter that shows 0.42 m too much at 100 m: put right by one mark, the stations are where they should be."""
    readings = capture(16)
    shown = Readings(readings.data.copy())
    shown.data[2] *= 1.0042
    right, _ = run(shaft(depth=DEPTH), readings)
    marked, _ = run(replace(shaft(depth=DEPTH), depth=Depth(marks=((100.0, 100.42),))), shown)
    for one, other in zip(right.result().stations, marked.result().stations, strict=True):
        assert other.depth == one.depth
        assert other.residual_east == pytest.approx(one.residual_east, abs=1e-9)


def test_each_landing_mark_is_its_own_reading_and_the_level_its_mean(shaft):
    """Nine marks 8 mm about a point: the station is their mean, with u of the scatter over √9 and the rest."""
    rng = np.random.default_rng(11)
    marks = rng.normal([0.065, 0.002], 0.008, (9, 2))
    readings = Readings.of(time=np.arange(9.0), depth=np.full(9, 300.0), east=marks[:, 0], north=marks[:, 1])
    survey, rows = run(shaft("drop", body=Body(mass=0.5, diameter=0.05, u_release_speed=0.0)), readings)
    (level,) = survey.result().stations
    assert rows.shape[1] == 9
    assert level.readings == 9
    assert level.measured_east == pytest.approx(marks[:, 0].mean(), rel=1e-12)
    scatter = next(one for one in level.shares if one.name == "scatter of the marks")
    assert scatter.east == pytest.approx(marks[:, 0].std(ddof=1) / 3.0, rel=1e-9)
    assert level.spread_east == pytest.approx(marks[:, 0].std(ddof=1), rel=1e-9)
    assert level.spread_north == pytest.approx(marks[:, 1].std(ddof=1), rel=1e-9)


def test_a_swinging_bob_is_known_at_rest_and_each_halt_is_one_station(shaft):
    """Two halts of a swing of 20 mm with 0.3 mm of noise: two stations, rest points within 3u of nothing."""
    survey, _ = run(shaft("hung", depth=90.0), EVERY_KIND["hung"])
    result = survey.result()
    assert [round(one.depth) for one in result.stations] == [50, 60]
    for one in result.stations:
        assert abs(one.measured_east) <= 3.0 * one.u_east
        assert one.u_east < 0.0003
    assert result.rest_point.fits
    assert result.rest_point.period == pytest.approx(2.0 * np.pi * np.sqrt(60.0 / G), rel=2e-3)


def test_a_rest_point_tells_the_swing_that_is_left_and_whether_it_is_good_enough(shaft):
    """A swing of 20 mm that decays in 400 s stands at 12.1 mm after 200 s; under 0.5 mm it needs no more swings."""
    rest = run(shaft("hung", depth=90.0), EVERY_KIND["hung"])[0].result().rest_point
    assert rest.amplitude == pytest.approx(0.02 * np.exp(-200.0 / 400.0), abs=3.0 * 3e-4)
    assert abs(rest.width) < 3.0 * 3e-4
    assert rest.decay == pytest.approx(400.0, rel=0.1)
    assert rest.free_period == pytest.approx(2.0 * np.pi * np.sqrt(60.0 / G), rel=0.01)
    assert rest.swings_needed == rest.swings
    assert abs(rest.schuler_east) < 1e-3


def test_a_run_that_has_ended_at_a_swinging_bob_still_answers_with_its_rest_point(shaft):
    """The standing answer before and after the end is the same offset, not where the bob swung last."""
    survey = Survey(shaft("hung", depth=90.0))
    survey.feed(EVERY_KIND["hung"])
    before = survey.standing()
    station = survey.close(nan).stations[-1]
    after = survey.standing()
    assert (after.measured_east, after.measured_north) == (station.measured_east, station.measured_north)
    assert (after.u_east, after.u_north, after.verdict) == (station.u_east, station.u_north, station.verdict)
    assert after.measured_east == pytest.approx(before.measured_east, abs=3.0 * station.u_east)


def test_a_few_readings_near_a_turning_point_do_not_pass_for_rest(shaft):
    """80 mm of swing on 80 m of line: 3 s about its turning point raise nothing and leave it undecided."""
    time = np.arange(0.0, 60.0, 0.1)
    east = 0.08 * np.cos(np.sqrt(G / 80.0) * time)
    readings = Readings.of(time=time, depth=np.full(time.size, 80.0), east=east, north=np.zeros(time.size))
    survey = Survey(shaft("hung", depth=90.0, limits=Limits(on_delay=0.0)))
    survey.feed(readings[:30])
    assert survey.standing().verdict == "undecided"
    assert survey.result().alarms == ()
    survey.feed(readings[30:])
    assert survey.standing().verdict == "within"
    assert survey.result().alarms == ()


def test_hand_readings_of_a_still_bob_make_a_station_a_level(shaft):
    """One reading a level half a minute apart, or several at one level: stations of one and of three readings."""
    depth = np.array([10.0, 20.0, 30.0, 30.0, 30.0])
    readings = Readings.of(
        time=np.arange(5) * 30.0, depth=depth, east=[1e-3, 2e-3, 3e-3, 3.2e-3, 2.8e-3], north=0.0
    )
    survey, _ = run(shaft("hung", depth=90.0), readings)
    stations = survey.result().stations
    assert [(one.depth, one.readings) for one in stations] == [(10.0, 1), (20.0, 1), (30.0, 3)]
    assert stations[2].measured_east == pytest.approx(3e-3, rel=1e-12)


def test_a_line_angle_times_its_length_is_the_offset(shaft):
    """1 mrad toward A at azimuth 90° on 50 m of line: 50 mm east."""
    instrument = Instrument(a_azimuth=radians(90.0))
    readings = Readings.of(time=[0.0, 1.0], depth=[50.0, 50.0], tilt_a=[1e-3, 1e-3], tilt_b=[0.0, 0.0])
    _, rows = run(shaft("hung", depth=90.0, instrument=instrument), readings)
    assert rows[5, -1] == pytest.approx(0.050, rel=1e-6)
    assert rows[6, -1] == pytest.approx(0.0, abs=1e-12)


def test_levels_keep_their_station_whatever_the_order_of_the_bodies(shaft):
    """Marks at 100, 300, 100, 300 m make two stations of two readings each."""
    readings = Readings.of(
        time=np.arange(4.0), depth=[100.0, 300.0, 100.02, 300.0], east=[0.01] * 4, north=[0.0] * 4
    )
    survey, _ = run(shaft("drop"), readings)
    assert [(one.depth, one.readings) for one in survey.result().stations] == [(100.0, 2), (300.0, 2)]


def test_a_drop_says_that_tilt_is_not_summed(shaft):
    """A falling body feels no vertical: tilt in the readings leaves a note and no offset."""
    readings = Readings.of(time=[0.0], depth=[100.0], east=[0.011], north=[0.0], tilt_a=[0.1], tilt_b=[0.1])
    survey, rows = run(shaft("drop"), readings)
    assert any("feels no vertical" in one for one in survey.standing().notes)
    assert rows[5, 0] == 0.011


def test_a_body_in_vacuum_lands_where_the_textbook_says_and_leaves_no_residual(shaft):
    """E = ⅓ω cos φ √(8h³/g) read at 100 m and 300 m: residual below 3 µm, the terms the formula leaves out."""
    depth = np.array([100.0, 300.0])
    east = OMEGA * COS * np.sqrt(8.0 * depth**3 / G) / 3.0
    readings = Readings.of(time=[0.0, 1.0], depth=depth, east=east, north=[0.0, 0.0])
    survey, _ = run(shaft("drop", body=None), readings)
    assert [abs(one.residual_east) < 3e-6 for one in survey.result().stations] == [True, True]


def test_the_standing_answer_is_that_of_the_newest_reading(shaft):
    """Depth, pass, direction, speed and residual of the last row."""
    readings = journey(lean=(1e-4, 0.0))[:4000]
    survey, rows = run(shaft(), readings)
    now = survey.standing()
    assert (now.depth, now.passing, now.direction) == (readings.depth[-1], 1, "up")
    assert now.speed == pytest.approx(-2.0, abs=2e-3)
    assert now.residual_east == rows[5, -1] - rows[7, -1]
    assert now.frames == rows.shape[1]


def test_readings_without_a_clock_use_the_sites_line_speed_and_say_so(shaft):
    """Time missing: the lean of the moving line comes from guide.line_speed_mps, signed by the direction of travel."""
    readings = journey(speed=2.0)
    data = readings.data.copy()
    data[0:2] = np.nan
    survey, _ = run(shaft(guide=Guide(line_speed=2.0)), Readings(data))
    stations = survey.result().stations
    assert max(abs(one.residual_east) for one in stations) < 2e-4
    assert any("no clock" in one for one in survey.standing().notes)


def test_the_other_reference_lines_move_expected_and_not_measured(shaft):
    """Against the field line a plumb guide at rest shows nothing, and the measured sum stays what it was."""
    straight, rows = run(shaft(), journey(seed=1))
    line, other = run(shaft(run=Run(kind="guided", reference="field-line")), journey(seed=1))
    np.testing.assert_array_equal(other[5:7], rows[5:7])
    bottom = next(one for one in line.result().stations if one.depth == 300.0)
    assert bottom.expected_north == pytest.approx(0.0, abs=1e-12)
    assert straight.result().stations[30].expected_north < -3e-5
