"""Spread of the landing, wall contact, best release."""

from dataclasses import replace

import numpy as np
import pytest

from eastfall.physics.air import air_column
from eastfall.physics.errors import ParameterError
from eastfall.physics.fall import Release, fall
from eastfall.physics.field import local_field
from eastfall.physics.settings import Air, Body, Shaft, Site
from eastfall.physics.spread import (
    Landings,
    best_release,
    landing_spread,
    monte_carlo,
    smallest_circle,
    wall_contact,
)

FIELD = local_field(Site(latitude=np.radians(50.9)))
AIR = air_column(Air(), FIELD)
BODY = Body(mass=0.514, diameter=0.05)
DEPTHS = np.array([50.0, 158.5, 500.0])


@pytest.mark.published
def test_spread_in_vacuum_is_that_of_position_and_time() -> None:
    """Without air u² is u_release² + (u_speed t)² on both axes: the law of propagation, GUM eq. 10."""
    spread = landing_spread(FIELD, depths=DEPTHS, body=BODY)
    time = fall(FIELD, to_depth=500.0).at(DEPTHS).time
    expected = np.hypot(BODY.u_release, BODY.u_release_speed * time)
    # Coriolis turns the errors by ωt, and verticals converge: parts in 1e4 after 10 s.
    assert spread.u_east == pytest.approx(expected, rel=5e-4)
    assert spread.u_north == pytest.approx(expected, rel=5e-4)


@pytest.mark.independent
@pytest.mark.parametrize("u_spin", [0.0, 0.3])
def test_monte_carlo_agrees_with_linear_propagation(u_spin: float) -> None:
    """Over 20,000 drops in air both spreads agree within four sampling errors, 1/√(2n) each, and so do the means."""
    drops = 20_000
    linear = landing_spread(FIELD, depths=DEPTHS, body=BODY, air=AIR, u_spin=u_spin)
    found = monte_carlo(
        FIELD,
        depths=DEPTHS,
        body=BODY,
        air=AIR,
        drops=drops,
        u_spin=u_spin,
        generator=np.random.default_rng(1831),
    )
    drawn = found.spread()
    sampling = 4.0 / np.sqrt(2.0 * drops)
    assert drawn.u_east == pytest.approx(linear.u_east, rel=sampling)
    assert drawn.u_north == pytest.approx(linear.u_north, rel=sampling)
    undisturbed = fall(FIELD, to_depth=500.0, body=BODY, air=AIR).at(DEPTHS)
    assert np.all(np.abs(found.east.mean(axis=0) - undisturbed.east) < 4.0 * linear.u_east / np.sqrt(drops))
    assert np.all(
        np.abs(found.north.mean(axis=0) - undisturbed.north) < 4.0 * linear.u_north / np.sqrt(drops)
    )


@pytest.mark.invariant
def test_spin_alone_spreads_the_landing() -> None:
    """With perfect release but unknown spin the landing still spreads, across the fall on both axes alike."""
    perfect = replace(BODY, u_release=0.0, u_release_speed=0.0)
    spread = landing_spread(FIELD, depths=DEPTHS, body=perfect, air=AIR, u_spin=1.0)
    assert np.all(np.diff(spread.u_east) > 0.0)
    assert spread.u_east == pytest.approx(spread.u_north, rel=0.01)
    still = landing_spread(FIELD, depths=DEPTHS, body=perfect, air=AIR)
    assert np.all(still.covariance == 0.0)


@pytest.mark.invariant
def test_same_generator_gives_the_same_drops() -> None:
    """Randomness comes from the generator handed in alone."""
    first, again, other = (
        monte_carlo(FIELD, depths=[100.0], body=BODY, drops=10, generator=np.random.default_rng(seed))
        for seed in (5, 5, 6)
    )
    assert np.array_equal(first.east, again.east)
    assert not np.array_equal(first.east, other.east)
    with pytest.raises(ParameterError, match=r"drops is 1; expected 2 or more"):
        monte_carlo(FIELD, depths=[100.0], body=BODY, drops=1, generator=np.random.default_rng(0))


@pytest.mark.invariant
def test_covariance_of_drops_is_numpys() -> None:
    """The covariance at each depth is that of numpy.cov."""
    rng = np.random.default_rng(3)
    drops = Landings(
        depth=np.array([1.0, 2.0]), east=rng.normal(size=(50, 2)), north=rng.normal(size=(50, 2))
    )
    found = drops.spread().covariance
    for i in range(2):
        assert found[i] == pytest.approx(np.cov(drops.east[:, i], drops.north[:, i]), rel=1e-12)


@pytest.mark.invariant
@pytest.mark.parametrize("body_diameter", [0.0, 0.05])
def test_body_touches_the_wall_where_its_offset_uses_up_the_room(body_diameter: float) -> None:
    """At the contact depth centre distance plus radius is the shaft's radius, and less everywhere above."""
    path = fall(FIELD, to_depth=900.0)
    shaft = Shaft(depth=900.0, diameter=0.5, centre_east=0.02, centre_north=-0.01)
    depth = wall_contact(path, shaft, body_diameter)
    assert depth is not None
    there = path.at(depth)
    reach = np.hypot(there.east - 0.02, there.north + 0.01) + 0.5 * body_diameter
    assert float(reach) == pytest.approx(0.25, abs=1e-9)
    above = path.at(np.linspace(0.0, depth - 1e-3, 500))
    assert np.all(np.hypot(above.east - 0.02, above.north + 0.01) + 0.5 * body_diameter < 0.25)


@pytest.mark.invariant
def test_no_contact_is_told_from_contact_at_the_release() -> None:
    """None for a wide, an unknown and a too short shaft; 0 for a release inside the wall."""
    path = fall(FIELD, to_depth=900.0)
    assert wall_contact(path, Shaft(depth=900.0, diameter=6.0)) is None
    assert wall_contact(path, Shaft(depth=900.0)) is None
    assert wall_contact(path, Shaft(depth=100.0, diameter=0.5)) is None
    assert wall_contact(path, Shaft(depth=900.0, diameter=0.5, centre_east=1.0)) == 0.0
    with pytest.raises(ParameterError, match=r"body_diameter is -0\.1 m; expected 0 m or more"):
        wall_contact(path, Shaft(depth=900.0, diameter=0.5), -0.1)


@pytest.mark.invariant
def test_best_release_keeps_the_promised_clearance() -> None:
    """Dropped from there the least gap is the stated one, and 5 mm to any side it is smaller."""
    shaft = Shaft(depth=900.0, diameter=1.0, centre_east=0.1, centre_north=0.05)
    best = best_release(fall(FIELD, to_depth=900.0, body=BODY, air=AIR), shaft, BODY.diameter)

    def least_gap(east: float, north: float) -> float:
        release = Release(east=east, north=north)
        path = fall(FIELD, to_depth=900.0, body=BODY, air=AIR, release=release).at(
            np.linspace(0.0, 900.0, 400)
        )
        return float(np.min(0.475 - np.hypot(path.east - 0.1, path.north - 0.05)))

    # Verticals converge: 0.2 mm per metre of shift in a kilometre.
    assert least_gap(best.east, best.north) == pytest.approx(best.clearance, abs=1e-4)
    for east, north in ((0.005, 0.0), (-0.005, 0.0), (0.0, 0.005), (0.0, -0.005)):
        assert least_gap(best.east + east, best.north + north) < best.clearance - 1e-6
    assert best.east < shaft.centre_east
    assert best.depth in (0.0, 900.0)
    with pytest.raises(ParameterError, match="the diameter of the shaft"):
        best_release(fall(FIELD, to_depth=100.0), Shaft(depth=100.0))


@pytest.mark.independent
def test_smallest_circle_agrees_with_a_direct_search() -> None:
    """For random points the radius is that of scipy's minimisation of the largest distance, to 1e-6."""
    from scipy.optimize import minimize

    rng = np.random.default_rng(9)
    for points in (
        rng.normal(size=(40, 2)),
        rng.uniform(size=(7, 2)),
        np.array([[0.0, 0.0], [1.0, 0.0], [0.2, 0.1]]),
    ):
        centre, radius = smallest_circle(points)
        found = minimize(
            lambda at, points=points: np.hypot(*(points - at).T).max(),
            points.mean(axis=0),
            method="Nelder-Mead",
            options={"xatol": 1e-10, "fatol": 1e-12, "maxiter": 4000},
        )
        assert radius == pytest.approx(found.fun, rel=1e-6)
        assert radius <= found.fun * (1.0 + 1e-9)
        assert np.all(np.hypot(*(points - centre).T) <= radius * (1.0 + 1e-9))


@pytest.mark.invariant
def test_smallest_circle_of_points_in_a_line_spans_them() -> None:
    """Points in a line, repeated ones and a single one are no special case for the caller."""
    centre, radius = smallest_circle(np.array([[0.0, 0.0], [1.0, 1.0], [3.0, 3.0], [3.0, 3.0]]))
    assert centre == pytest.approx([1.5, 1.5])
    assert radius == pytest.approx(1.5 * np.sqrt(2.0))
    assert smallest_circle(np.array([[2.0, 1.0]]))[1] == 0.0
