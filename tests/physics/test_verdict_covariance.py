"""The verdict's uncertainty where one input moves east and north together: ±2u holds the truth 95 times in 100.

The yardstick is the propagation of distributions (JCGM 101:2008): an input is drawn from what is stated of it, what the
instrument then shows is made of that draw, and the length that the program finds is held against the true one.
"""

from dataclasses import replace
from math import cos, radians, sin

import numpy as np
import pytest

from eastfall.physics.expected import expected_curve
from eastfall.physics.fall import Variation, fall_ensemble
from eastfall.physics.models import Models
from eastfall.physics.readings import Readings
from eastfall.physics.settings import Air, Instrument
from eastfall.physics.survey import Survey
from eastfall.physics.verdict import horizontal

pytestmark = pytest.mark.independent

WAYS = (0.0, 45.0, -45.0, 90.0)
"""Toward what azimuth the residual lies [degrees]."""
NORMAL, DRAWS = 0.9545, 600
ROOM = 4.0 * (NORMAL * (1.0 - NORMAL) / DRAWS) ** 0.5
"""Four standard deviations of a share of so many draws: 3.4 %."""


def only(site):
    """Give a site of which everything is known."""
    names = ("u_latitude", "u_elevation", "u_gravity", "u_rock_density", "u_deflection")
    return replace(site, **dict.fromkeys(names, 0.0))


def toward(way, length):
    """Give an offset, east and north [m]."""
    return length * np.array([sin(radians(way)), cos(radians(way))])


def share_covered(found, true):
    """Give how often the length of a residual lies within 2u of the true one."""
    lengths = [
        [
            float(one)
            for one in horizontal(s.residual_east, s.residual_north, s.u_east, s.u_north, s.covariance)
        ]
        for s in found
    ]
    return np.mean([abs(length - true) <= 2.0 * u for length, u in lengths])


@pytest.fixture(scope="module")
def blown():
    """Give what a bob at 250 m shows in draws of a cross-flow, by the program's own model of a bob."""
    rng = np.random.default_rng(3)

    def drawn(assumptions):
        flow, u = assumptions.air.cross_flow, assumptions.air.u_cross_flow_fraction
        found = []
        for factor in 1.0 + u * rng.normal(size=DRAWS):
            rows = tuple((top, end, speed * factor, way) for top, end, speed, way in flow)
            air = replace(assumptions.air, cross_flow=rows)
            found.append(Models.of(replace(assumptions, air=air)).bob(np.array([250.0]))[:, 0])
        return np.array(found)

    return drawn


@pytest.mark.parametrize("wind", [0.0, 45.0])
def test_a_bob_blown_aside_is_covered_whichever_way_the_air_goes(shaft, blown, wind):
    """Air known to 4 % pushes along its own way: residuals along it, across it and between are held by 2u alike.

    Taken as uncorrelated, residuals along air toward 45° were held 85 times in 100, and those across it always.
    """
    air = Air(
        temperature=281.15,
        cross_flow=((0.0, 250.5, 0.5, radians(wind)),),
        u_cross_flow_fraction=0.04,
        u_density=0.0,
    )
    instrument = Instrument(u_offset=2e-4)
    base = shaft("hung", air=air, instrument=instrument)
    assumptions = replace(base, site=only(base.site))
    curve, bobs = expected_curve(assumptions), blown(assumptions)
    rng = np.random.default_rng(4)
    # Read by hand, a minute apart.
    readings = [bob[:, None] + rng.normal(0.0, 2e-4, (2, 3)) for bob in bobs]
    for way in WAYS:
        shift = toward(way, 0.08)
        stations = []
        for shown in readings:
            survey = Survey(assumptions, curve=curve, feed_watched=False)
            east, north = shown + shift[:, None]
            survey.feed(Readings.of(time=[0.0, 60.0, 120.0], depth=[250.0] * 3, east=east, north=north))
            stations.append(survey.standing())
        assert share_covered(stations, 0.08) == pytest.approx(NORMAL, abs=ROOM), way


def straight(way, lean, instrument, draw):
    """Give readings of a probe let down a straight guide, without a clock: the site's speed of the line stands in.

    Its axes have zeros, scales and an azimuth of their own: a draw of five from what is stated.
    """
    zero_a, zero_b, scale_a, scale_b, turn = draw
    depth = np.arange(0.0, 100.5, 2.0)
    slope_east, slope_north = toward(way, lean)
    azimuth = instrument.a_azimuth + turn * instrument.u_azimuth
    a = slope_north * cos(azimuth) + slope_east * sin(azimuth)
    b = slope_east * cos(azimuth) - slope_north * sin(azimuth)
    a = a * (1.0 + scale_a * instrument.u_scale) + zero_a * instrument.u_zero
    b = b * (1.0 + scale_b * instrument.u_scale) + zero_b * instrument.u_zero
    none = np.full(depth.size, np.nan)
    return Readings.of(
        time=none, depth=depth, tilt_a=np.full(depth.size, a), tilt_b=np.full(depth.size, b), host_time=depth
    )


@pytest.mark.parametrize(
    ("axis", "stated"),
    [
        pytest.param(0.0, {"u_azimuth": radians(2.0)}, id="azimuth"),
        pytest.param(45.0, {"u_scale": 0.02}, id="scales, A toward 45"),
        pytest.param(0.0, {"u_scale": 0.02}, id="scales, A toward north"),
        pytest.param(30.0, {"u_zero": radians(0.02)}, id="zeros"),
    ],
)
def test_a_guide_that_leans_is_covered_whichever_way_it_leans(shaft, axis, stated):
    """Scales, zeros and the azimuth of the axes, each alone beside a small zero, at four ways of lean by 2 mm/m.

    Taken as uncorrelated, the azimuth covered every draw of a lean toward 45°, and scales 87 to 89 in 100 of a lean
    along an axis that points there.
    """
    small = {
        "u_tilt": 0.0,
        "u_zero": radians(0.001),
        "u_scale": 0.0,
        "u_azimuth": 0.0,
        "u_depth_fraction": 0.0,
    }
    instrument = Instrument(a_azimuth=radians(axis), **(small | stated))
    assumptions = shaft(site=only(shaft().site), instrument=instrument)
    curve = expected_curve(assumptions)
    draws = np.random.default_rng(5).normal(size=(DRAWS, 5))
    plumb = None
    for way in WAYS:
        stations = []
        for draw in draws:
            survey = Survey(assumptions, curve=curve, feed_watched=False, u_of_rows=False)
            survey.feed(straight(way, 0.002, instrument, draw))
            stations.append(survey.standing())
        if plumb is None:
            # The guide as it seems is the true one less the lean of the moving line, which is known here.
            plumb = np.array([stations[0].expected_east, stations[0].expected_north])
        true = float(np.hypot(*(toward(way, 0.2) - plumb)))
        assert share_covered(stations, true) == pytest.approx(NORMAL, abs=ROOM), way


@pytest.mark.parametrize("wind", [45.0, 90.0])
def test_a_body_blown_aside_is_covered_whichever_way_the_air_goes(shaft, wind):
    """A fall of 250 m through air across known to 4 %, by the equation of motion for every draw."""
    air = Air(temperature=281.15, cross_flow=((0.0, 260.0, 0.1, radians(wind)),), u_cross_flow_fraction=0.04)
    base = shaft("drop", air=air, instrument=Instrument(u_offset=2e-4))
    site = only(base.site)
    body = replace(base.body, u_release=0.0, u_release_speed=0.0, u_drag_fraction=0.0)
    air = replace(air, u_density=0.0)
    assumptions = replace(base, site=site, body=body, air=air)
    curve = expected_curve(assumptions)
    rng = np.random.default_rng(6)
    factors = 1.0 + 0.04 * rng.normal(size=DRAWS)
    falls = fall_ensemble(
        curve.models.field,
        depths=[250.0],
        variation=Variation(cross_flow_factor=factors),
        body=body,
        air=curve.models.air,
    )
    marks = np.stack([falls.east[:, 0], falls.north[:, 0]], axis=1) + rng.normal(0.0, 2e-4, (DRAWS, 2))
    for way in WAYS:
        stations = []
        for east, north in marks + toward(way, 0.08):
            survey = Survey(assumptions, curve=curve, feed_watched=False)
            survey.feed(Readings.of(time=[0.0], depth=[250.0], east=[east], north=[north]))
            stations.extend(survey.result().stations)
        assert share_covered(stations, 0.08) == pytest.approx(NORMAL, abs=ROOM), way
