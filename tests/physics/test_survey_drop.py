"""Falling bodies through the engine: marks, levels, and the textbook's landing."""

import numpy as np
import pytest
from survey_help import COS, OMEGA, G, run

from eastfall.physics.readings import Readings
from eastfall.physics.settings import Body


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
