"""A guided run through the engine: known truth in, findings out."""

from dataclasses import replace
from math import radians

import numpy as np
import pytest
from survey_help import COS, OMEGA, G, journey, run
from truth_help import DEPTH, capture

from eastfall.physics.readings import Readings
from eastfall.physics.settings import Depth, Guide, Instrument, Run
from eastfall.physics.survey import Survey


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


def test_what_the_edge_knows_stands_among_the_notes(shaft):
    """Notes given to the survey are in the standing answer and in the result; marks passed add their own."""
    given = replace(shaft(depth=DEPTH), depth=Depth(marks=((50.0, 50.0),)))
    survey = Survey(given, notes=("calibration is 400 days old",))
    survey.feed(capture(15))
    for notes in (survey.standing().notes, survey.result().notes):
        assert notes[0] == "calibration is 400 days old"
        assert any("deeper than the last depth mark, 50 m" in one for one in notes)


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
