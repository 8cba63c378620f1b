"""How far west a plumb guide seems to go: against the textbook integral, for fast cages, slow clocks and halts."""

from itertools import pairwise

import numpy as np
import pytest
from survey_help import COS, OMEGA, G, journey

from eastfall.physics.readings import Readings
from eastfall.physics.settings import Instrument
from eastfall.physics.survey import Survey

EXACT = Instrument(u_tilt=0.0, u_zero=0.0, u_scale=0.0, u_azimuth=0.0, u_depth_fraction=0.0)


def residuals(shaft, readings, blocks=()):
    """Give the residuals east of all stations of a guide that is plumb [m]."""
    survey = Survey(shaft(depth=300.0, instrument=EXACT), feed_watched=False)
    for begin, end in pairwise([0, *blocks, len(readings)]):
        survey.feed(readings[begin:end])
    survey.close(float("nan"))
    return np.array([one.residual_east for one in survey.result().stations])


@pytest.mark.parametrize(("speed", "rate", "allowed"), [(8.0, 1.0, 2e-4), (8.0, 4.0, 1e-4), (2.0, 4.0, 3e-5)])
def test_nothing_of_a_ramp_stays_in_the_expected_offset(shaft, speed, rate, allowed):
    """Down and up again with ramps of 1 m/s², up to 36 mm of lean: at the last station 0.2 mm at most is left of it.

    What the probe shows is worked out with the textbook Coriolis acceleration by the journey.
    """
    left = residuals(shaft, journey(speed=speed, rate=rate))
    assert abs(left[-1]) < allowed


def test_readings_taken_at_rest_alone_show_no_lean(shaft):
    """Eight readings at rest, 5 m on in 7 s without a reading, sixty times over: 0.3 mm at most of 2 mm at 0.7 m/s."""
    halts = np.repeat(np.arange(61), 8)
    time = halts * 14.0 + np.tile(np.arange(8.0), 61)
    readings = Readings.of(time=time, depth=5.0 * halts, tilt_a=0.0, tilt_b=0.0)
    # The guide is plumb and all tilts are nothing: what is left is what was expected of a line that seemed to run.
    assert 2.0 * OMEGA * COS / G * 5.0 / 7.0 * 300.0 > 1.6e-3
    assert np.abs(residuals(shaft, readings)).max() < 3.5e-4


def test_readings_that_arrive_late_and_early_leave_it_be(shaft):
    """Up to 30 ms late at 10 Hz and 8 m/s: 0.15 mm at most of 36 mm on the way, 0.1 mm at its end."""
    steady = journey(speed=8.0, rate=10.0)
    rng = np.random.default_rng(3)
    time = np.sort(steady.time + rng.uniform(0.0, 0.03, len(steady)))
    tilts = {name: steady.column(name) for name in ("tilt_a", "tilt_b")}
    left = residuals(shaft, Readings.of(time=time, depth=steady.depth, **tilts))
    assert np.abs(left).max() < 1.5e-4
    assert abs(left[-1]) < 1e-4


def test_blocks_change_nothing_to_the_last_bit(shaft):
    """Whole, row by row and in odd pieces; with a clock that falls back once and two rows without one at the end."""
    readings = journey(speed=8.0, rate=4.0, depth=60.0)
    readings.data[0, 20] -= 5.0
    readings.data[0, -2:] = np.nan
    whole = residuals(shaft, readings)
    for blocks in (range(1, len(readings)), (3, 4, 19, 20, 21, 50)):
        assert np.array_equal(residuals(shaft, readings, blocks), whole)
