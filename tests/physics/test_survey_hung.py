"""A plumb line through the engine: swings, rest points, readings by hand, line angles."""

from math import nan, radians

import numpy as np
import pytest
from survey_help import G, run, swinging

from eastfall.physics.readings import Readings
from eastfall.physics.settings import Air, Instrument, Limits, Line
from eastfall.physics.survey import Survey

SWINGING = swinging()


def test_a_swinging_bob_is_known_at_rest_and_each_halt_is_one_station(shaft):
    """Two halts of a swing of 20 mm with 0.3 mm of noise: two stations, rest points within 3u of nothing."""
    survey, _ = run(shaft("hung", depth=90.0), SWINGING)
    result = survey.result()
    assert [round(one.depth) for one in result.stations] == [50, 60]
    for one in result.stations:
        assert abs(one.measured_east) <= 3.0 * one.u_east
        assert one.u_east < 0.0003
    assert result.rest_point.fits
    assert result.rest_point.period == pytest.approx(2.0 * np.pi * np.sqrt(60.0 / G), rel=2e-3)


def test_a_rest_point_tells_the_swing_that_is_left_and_whether_it_is_good_enough(shaft):
    """A swing of 20 mm that decays in 400 s stands at 12.1 mm after 200 s; under 0.5 mm it needs no more swings."""
    rest = run(shaft("hung", depth=90.0), SWINGING)[0].result().rest_point
    assert rest.amplitude == pytest.approx(0.02 * np.exp(-200.0 / 400.0), abs=3.0 * 3e-4)
    assert abs(rest.width) < 3.0 * 3e-4
    assert rest.decay == pytest.approx(400.0, rel=0.1)
    assert rest.free_period == pytest.approx(2.0 * np.pi * np.sqrt(60.0 / G), rel=0.01)
    assert rest.swings_needed == rest.swings
    assert abs(rest.schuler_east) < 1e-3


def test_a_run_that_has_ended_at_a_swinging_bob_still_answers_with_its_rest_point(shaft):
    """The standing answer before and after the end is the same offset, not where the bob swung last."""
    survey = Survey(shaft("hung", depth=90.0))
    survey.feed(SWINGING)
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


def test_a_probe_turned_to_its_other_face_shows_the_same_line(shaft):
    """The same lean of 10 mm on 50 m read in faces 0° and 180°, signs exchanged: 10 mm both times."""
    lean = 0.010 / 50.0
    for face, sign in ((0.0, 1.0), (np.pi, -1.0)):
        readings = Readings.of(
            time=np.arange(20.0), depth=np.full(20, 50.0), tilt_a=sign * lean, tilt_b=-sign * lean, face=face
        )
        survey, _ = run(shaft("hung", depth=90.0), readings)
        station = survey.result().stations[-1]
        assert station.measured_north == pytest.approx(0.010, rel=1e-6)
        assert station.measured_east == pytest.approx(-0.010, rel=1e-6)


def both_ways(assumptions):
    """Give the stations of a still line of 90 m, read at its bob and by its angle at the collar."""
    at = np.full(20, 90.0)
    bob = Readings.of(time=np.arange(20.0), depth=at, east=0.0, north=0.0)
    angle = Readings.of(time=np.arange(20.0), depth=at, tilt_a=0.0, tilt_b=0.0)
    return [run(assumptions, one)[0].result().stations[-1] for one in (bob, angle)]


def part(station, name):
    """Give what one input puts into the uncertainty of a station, east and north [m]."""
    return station.parts[station.inputs.index(name)]


def test_the_angle_of_a_blown_line_is_expected_where_statics_puts_it_and_not_at_its_bob(shaft):
    """Air from 40 to 60 m moves a bob at 90 m by F · 50 m/W; length times angle is F · 90 m/W, and so its uncertainty.

    The triangle of forces of a weightless cord with a weight W at its end and a force F at 50 m (any text of statics).
    """
    air = Air(temperature_gradient=0.0, cross_flow=((40.0, 60.0, 0.5, np.pi / 2),))
    bob, angle = both_ways(shaft("hung", depth=90.0, line=Line(), air=air))
    assert bob.expected_east > 5e-4
    assert angle.expected_east / bob.expected_east == pytest.approx(90.0 / 50.0, rel=1e-3)
    assert part(angle, "cross-flow")[0] / part(bob, "cross-flow")[0] == pytest.approx(90.0 / 50.0, rel=1e-3)


def test_a_bare_wire_shows_two_thirds_of_the_offset_of_its_end_by_its_angle(shaft):
    """¾κL² at the end, ½κL² by the angle: T x' = ∫ λgκz dz from the collar down, with T = λgL, worked out by hand."""
    line, air = Line(bob_mass=1e-6, mass_per_length=0.2), Air(density=0.0)
    end, angle = both_ways(shaft("hung", depth=90.0, line=line, air=air))
    assert end.expected_north > 1e-6
    assert angle.expected_north / end.expected_north == pytest.approx(2.0 / 3.0, rel=1e-3)
