"""What bends put into a sum of tilts, against the equation of motion integrated along an invented guide."""

from itertools import pairwise

import numpy as np
import pytest

from eastfall.physics.kinds.sidepull import SidePull
from eastfall.physics.readings import Readings
from eastfall.physics.settings import Instrument
from eastfall.physics.survey import Survey

G = 9.8167
TOP, RAMP, RATE = 6.0, 0.5, 50.0  # cruising speed [m/s], m/s² of the winch, rows a second
SLOPE, SPAN, DEEP = 3e-3, 70.0, 90.0


def journey():
    """Give time, depth, speed and acceleration of a winch from rest to rest over 90 m."""
    ramp = TOP / RAMP
    cruise = (DEEP - TOP * ramp) / TOP
    time = np.arange(0.0, 2.0 * ramp + cruise + 15.0, 1.0 / RATE)
    pull = np.where(time < ramp, RAMP, 0.0) - np.where(
        (time >= ramp + cruise) & (time < 2 * ramp + cruise), RAMP, 0
    )
    speed = np.clip(np.minimum(time, 2.0 * ramp + cruise - time) * RAMP, 0.0, TOP)
    up, late = np.minimum(time, ramp), np.clip(time - ramp - cruise, 0.0, ramp)
    depth = 0.5 * RAMP * up**2 + TOP * np.clip(time - ramp, 0.0, cruise) + TOP * late - 0.5 * RAMP * late**2
    return time, depth, speed, pull


def guide(depth):
    """Give slope P' and curvature P'' of a guide that starts plumb and wanders east."""
    turn = 2.0 * np.pi / SPAN
    return SLOPE * np.sin(turn * depth), SLOPE * turn * np.cos(turn * depth)


def felt():
    """Give the journey, P' and what the pull adds to it: the felt vertical against the guide, less the guide's own."""
    time, depth, speed, pull = journey()
    slope, curvature = guide(depth)
    # The frame falls with g - r̈; r̈ = (v² P'' + a P', a): slope to it (P' g + v² P'')/(g - a).
    shown = (slope * G + speed**2 * curvature) / (G - pull)
    return time, depth, speed, slope, shown


@pytest.mark.independent
def test_the_running_sum_is_the_integral_of_what_the_equation_of_motion_adds():
    """Trapezoid of (P' g + v² P'')/(g - a) - P' over depth: the same to 6 % of the largest, at speed and at rest."""
    _, depth, speed, slope, shown = felt()
    added = np.concatenate(
        [[0.0], np.cumsum(0.5 * np.diff(depth) * ((shown - slope)[1:] + (shown - slope)[:-1]))]
    )
    gained = SidePull().update(speed**2 / G, np.stack([slope, np.zeros_like(slope)]))
    assert np.abs(added).max() > 5e-3
    assert abs(added[-1]) > 3e-3
    # a/g stands for a/(g - a): 5 % of what the ramps add.
    assert gained[0] == pytest.approx(added, abs=0.06 * np.abs(added).max())


def test_a_halt_after_bends_knows_what_they_left_in_the_sum(shaft):
    """90 m at 6 m/s down a guide out of plumb at its end: the halt is 3.6 mm off and says so, alone of all inputs."""
    time, depth, _, _, shown = felt()
    instrument = Instrument(u_tilt=0.0, u_zero=0.0, u_scale=0.0, u_azimuth=0.0, u_depth_fraction=0.0)
    survey = Survey(shaft(depth=DEEP, latitude=90.0, instrument=instrument), feed_watched=False)
    survey.feed(Readings.of(time=time, depth=depth, tilt_a=0.0, tilt_b=np.arcsin(shown)))
    survey.close(float(time[-1]))
    station = survey.result().stations[-1]
    assert station.still
    true = SLOPE * SPAN / (2.0 * np.pi) * (1.0 - np.cos(2.0 * np.pi * DEEP / SPAN))
    off = station.measured_east - true
    counted = station.parts[station.inputs.index("line over bends")][0]
    assert off == pytest.approx(-3.57e-3, abs=2e-5)
    assert 0.5 < counted / off < 2.0


def test_blocks_and_gaps_of_speed_change_nothing_to_the_last_bit():
    """Forty rows, some without a speed: whole, one by one, and in pieces with an empty one."""
    rng = np.random.default_rng(0)
    bend, slope = rng.random(40), rng.normal(size=(2, 40))
    bend[[0, 1, 20]] = np.nan
    whole = SidePull().update(bend, slope)
    for edges in (range(41), (0, 2, 2, 7, 21, 40)):
        one = SidePull()
        pieces = [one.update(bend[a:b], slope[:, a:b]) for a, b in pairwise(edges)]
        assert np.array_equal(np.concatenate(pieces, axis=1), whole)
