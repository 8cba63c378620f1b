"""A moving line leans by what gravity is at each depth, not at the collar: against integrations written out here."""

from math import cos, radians

import numpy as np
import pytest
from scipy.integrate import quad, solve_ivp
from survey_help import run

from eastfall.physics.expected import expected_curve
from eastfall.physics.field import local_field
from eastfall.physics.readings import Readings
from eastfall.physics.settings import Air, Line, Run, Site

OMEGA = 7.292115e-5  # GRS80, Moritz (1980)
BIG_G = 6.67430e-11  # CODATA 2018
COS = cos(radians(57.3))
G = 9.8167
ROCK = ((0.0, 2670.0), (1400.0, 2950.0))
SITE = Site(name="Marram Pit", latitude=radians(57.3), gravity=G, rock_density=ROCK)
DEPTHS = np.array([250.0, 1000.0, 1400.0, 2600.0, 4000.0])


def independent(speed):
    """Give gravity by depth and ∫ 2ωv cos φ/g dz, by an eighth-order solver through Bruns's dg/dz, layer by layer."""
    radius = local_field(SITE).mean_radius
    state, solved = [G, 0.0], []
    for top, bottom, density in ((0.0, 1400.0, 2670.0), (1400.0, 4100.0, 2950.0)):

        def slope(z, y, density=density):
            growth = 2.0 * y[0] / (radius - z) + 2.0 * OMEGA**2 - 4.0 * np.pi * BIG_G * density
            return [growth, 2.0 * OMEGA * speed * COS / y[0]]

        solved.append(
            solve_ivp(slope, (top, bottom), state, "DOP853", dense_output=True, rtol=1e-13, atol=1e-14)
        )
        state = solved[-1].y[:, -1]
    return lambda z: np.where(np.asarray(z) <= 1400.0, solved[0].sol(z), solved[1].sol(z))


@pytest.mark.independent
def test_a_guide_run_at_ten_metres_a_second_shows_what_an_integration_through_the_rock_gives(shaft):
    """4 km through two kinds of rock: within 10 nm; gravity at the collar all the way gives 49 µm too much."""
    curve = expected_curve(shaft(depth=4000.0, site=SITE))
    rode = independent(10.0)(DEPTHS)[1]
    found = curve.expected(DEPTHS, 10.0) - curve.expected(DEPTHS)
    np.testing.assert_allclose(found[0], -rode, atol=1e-8)
    assert not found[1].any()
    at_collar = 2.0 * OMEGA * 10.0 * COS / G * 4000.0
    assert at_collar - rode[-1] == pytest.approx(4.9e-5, abs=5e-7)


@pytest.mark.independent
def test_a_ride_through_the_engine_expects_the_same(shaft):
    """A plumb straight guide ridden to 4 km at 10 m/s, tilts of it worked out here: no residual beyond 1 µm east."""
    time = np.arange(0.0, 399.0, 0.2)
    depth = 10.0 * time
    gravity = independent(10.0)(depth)[0]
    east = -2.0 * OMEGA * 10.0 * COS / gravity
    readings = Readings.of(time=time, depth=depth, tilt_a=np.zeros(time.size), tilt_b=east)
    _, rows = run(shaft(depth=4000.0, site=SITE, run=Run(kind="guided", reference="field-line")), readings)
    residual = rows[5] - rows[7]
    # In the first rows no speed is known yet.
    assert np.abs(residual[20:] - residual[20]).max() < 1e-6


@pytest.mark.independent
def test_a_bob_on_a_running_wire_rides_where_two_integrations_put_it(shaft):
    """1 mm of steel, 50 kg, vacuum, 1.5 m/s: to 10 nm at 1 and 4 km.

    x' = 2ωv cos φ (M + λ(L - z))/T, T(z) = M g(L) + ∫ λ g dz.
    """
    line = Line(mass_per_length=0.006165, bob_mass=50.0)
    curve = expected_curve(shaft("hung", depth=4000.0, site=SITE, line=line, air=Air(density=0.0)))
    gravity = independent(1.5)
    for length in (1000.0, 4000.0):
        below = lambda z, end=length: quad(  # noqa: E731
            lambda s: float(gravity(s)[0]), z, end, points=[1400.0] if z < 1400.0 < end else None
        )[0]

        def slope(z, end=length, weight=below):
            tension = 50.0 * float(gravity(end)[0]) + 0.006165 * weight(z)
            return 2.0 * OMEGA * 1.5 * COS * (50.0 + 0.006165 * (end - z)) / tension

        rides = quad(slope, 0.0, length, epsrel=1e-10)[0]
        found = curve.expected([length], 1.5) - curve.expected([length])
        assert found[0, 0] == pytest.approx(rides, abs=1e-8)
        assert found[1, 0] == 0.0


def test_a_bob_that_air_lifts_leans_the_more(shaft):
    """A weightless wire: x = 2ωv cos φ L/(g (1 - ρ/ρ_bob)); 1250 kg/m³ in air of 1.25 kg/m³ leans a thousandth more."""
    line = Line(mass_per_length=0.0, bob_density=1250.0)
    lifted, bare = (
        expected_curve(shaft("hung", depth=300.0, site=SITE, line=line, air=Air(density=rho)))
        for rho in (1.25, 0.0)
    )
    wet, dry = ((one.expected([10.0], 1.0) - one.expected([10.0]))[0, 0] for one in (lifted, bare))
    # The air is denser by a thousandth of itself 10 m down.
    assert wet / dry - 1.0 == pytest.approx(1e-3, rel=0.01)


def test_the_readings_of_a_running_line_are_held_against_the_same(shaft):
    """A bob read while it is lowered at 1.5 m/s: expected is the curve's own at that speed, row by row."""
    time = np.arange(0.0, 200.0, 0.2)
    readings = Readings.of(time=time, depth=2000.0 + 1.5 * time, east=0.0 * time, north=0.0 * time)
    assumptions = shaft("hung", depth=4000.0, site=SITE)
    survey, rows = run(assumptions, readings)
    wanted = survey.curve.expected(rows[1], 1.5)
    np.testing.assert_allclose(rows[7:9, 20:], wanted[:, 20:], atol=1e-9)


@pytest.mark.invariant
def test_air_across_a_line_moves_its_rest_and_not_how_far_it_rides(shaft):
    """A wire blown 14 mm east rides as far from there as a calm one does from where it hangs: the loads add up."""
    calm, blown = (
        expected_curve(shaft("hung", depth=1000.0, air=Air(cross_flow=flow)))
        for flow in ((), ((300.0, 320.0, 1.0, radians(90.0)),))
    )
    assert blown.expected([900.0])[0, 0] - calm.expected([900.0])[0, 0] > 0.01
    rides = [(one.expected([900.0], 2.0) - one.expected([900.0]))[0, 0] for one in (calm, blown)]
    assert rides[0] == pytest.approx(rides[1], rel=1e-9)
    assert rides[0] > 0.0


@pytest.mark.invariant
def test_a_falling_body_has_no_line(shaft):
    """The speed of a line changes nothing of what is expected in a drop."""
    curve = expected_curve(shaft("drop"))
    np.testing.assert_array_equal(curve.expected(DEPTHS[:1], 5.0), curve.expected(DEPTHS[:1]))
