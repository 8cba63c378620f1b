"""A plumb line through the engine: swings, rest points, readings by hand, line angles."""

from math import nan, radians

import numpy as np
import pytest
from survey_help import G, run, swinging

from eastfall.physics.lineangle import line_angle
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


def _by_eye(*levels: tuple[float, float, int]) -> Readings:
    """Return readings by eye: for each level when the first is read, its depth, and how many follow 4 s apart."""
    rows = [(start + 4.0 * n, depth) for start, depth, count in levels for n in range(count)]
    time, depth = np.array(rows).T
    return Readings.of(time=time, depth=depth, east=1e-4 * depth, north=0.0)


@pytest.mark.invariant
@pytest.mark.parametrize("block", [1, 2, 100])
def test_levels_read_by_eye_in_quick_turn_are_all_stations(shaft, block):
    """Three readings a level, ten seconds from level to level: no line was running while a person read the scale."""
    readings = _by_eye((0.0, 10.0, 3), (18.0, 20.0, 3), (36.0, 30.0, 3), (53.0, 40.0, 2))
    survey = Survey(shaft("hung", depth=90.0))
    for start in range(0, len(readings), block):
        survey.feed(readings[start : start + block])
    survey.close(nan)
    stations = survey.result().stations
    assert [(one.depth, one.readings) for one in stations] == [(10.0, 3), (20.0, 3), (30.0, 3), (40.0, 2)]
    assert [one.measured_east for one in stations] == pytest.approx([1e-3, 2e-3, 3e-3, 4e-3], abs=1e-12)
    # A swing of 40 m of line takes 6.3 s to one side; the two readings there are 4 s apart.
    assert [one.verdict for one in stations] == ["within", "within", "within", "undecided"]
    assert any(note.startswith("no single swing was seen at 40 m") for note in survey.standing().notes)


@pytest.mark.invariant
def test_readings_far_apart_of_a_line_that_runs_on_are_no_stations(shaft):
    """A line lowered at 1 m/s or 0.04 m/s and read every five seconds: but for its ends no level is closed."""
    for speed in (1.0, 0.04):
        time = 5.0 * np.arange(12)
        survey = Survey(shaft("hung", depth=90.0))
        survey.feed(Readings.of(time=time, depth=10.0 + speed * time, east=1e-3, north=0.0))
        survey.close(nan)
        stations = survey.result().stations
        assert {one.depth for one in stations} <= {10.0, 10.0 + speed * time[-1]}
        assert all(one.readings == 1 for one in stations)
        assert survey.unused["read once in passing"] == (10 if speed == 1.0 else 0)


def test_a_swing_across_the_axes_leaves_what_it_leaves_open_along_its_plane(shaft):
    """A swing toward 45° whose rest is not resolved may rest anywhere along its plane, and nowhere across it.

    Read by hand twice a swing, 20 mm to either side: the scatter is √2 · 20 mm along, 0.5 mm of reading across.
    """
    sides = np.tile([1.0, -1.0], 6)
    noise = 5e-4 * np.tile([1.0, 1.0, -1.0, -1.0], 3)
    east, north = 0.02 * sides + noise, 0.02 * sides - noise
    survey = Survey(shaft("hung", depth=90.0))
    survey.feed(Readings.of(time=15.0 * np.arange(12), depth=np.full(12, 80.0), east=east, north=north))
    now, station = survey.standing(), survey.close(nan).stations[-1]
    assert station.inputs[0] == "swing not resolved"
    (u_east, u_north), together = station.parts[0], station.correlations[0]
    mean, shared = (u_east**2 + u_north**2) / 2.0, together * u_east * u_north
    assert (mean + shared) ** 0.5 == pytest.approx(2**0.5 * 0.02 * (12 / 11) ** 0.5, rel=1e-6)
    assert (mean - shared) ** 0.5 == pytest.approx(2**0.5 * 5e-4 * (12 / 11) ** 0.5, rel=1e-6)
    assert now.covariance == station.covariance == pytest.approx(shared, rel=0.01)


def test_the_covariance_of_a_rest_point_is_that_of_its_swing(shaft):
    """Beside what is expected, which moves east and north by a micrometre here."""
    survey, _ = run(shaft("hung", depth=90.0), SWINGING)
    station = survey.result().stations[-1]
    fitted = station.correlations[0] * station.parts[0][0] * station.parts[0][1]
    assert fitted == pytest.approx(survey.result().rest_point.covariance_east_north, rel=1e-9)
    assert station.covariance == pytest.approx(fitted, abs=1e-12)


@pytest.mark.parametrize("by_angle", [False, True])
def test_a_running_line_knows_that_air_moves_it_along_its_own_way(shaft, by_angle):
    """Air toward 45°, known to a fifth: east and north of the newest reading err together."""
    air = Air(cross_flow=((0.0, 90.0, 1.0, np.pi / 4),))
    time, none = np.arange(0.0, 20.0, 0.5), np.zeros(40)
    shown = {"tilt_a": none, "tilt_b": none} if by_angle else {"east": none, "north": none}
    survey = Survey(shaft("hung", depth=90.0, line=Line(), air=air))
    survey.feed(Readings.of(time=time, depth=30.0 + time, **shown))
    now, curve = survey.standing(), survey.curve
    at = [49.5]
    blown = (line_angle(curve) if by_angle else curve).budget
    moved = blown.at(at)[blown.names.index("cross-flow"), :, 0]
    assert moved[0] == pytest.approx(moved[1], rel=0.02)
    assert now.covariance == pytest.approx(moved[0] * moved[1], rel=0.02)


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
