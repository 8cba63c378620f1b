"""Spread of the landing."""

from dataclasses import replace

import numpy as np
import pytest

from eastfall.physics.air import air_column
from eastfall.physics.errors import ParameterError
from eastfall.physics.fall import fall
from eastfall.physics.field import local_field
from eastfall.physics.settings import Air, Body, Site
from eastfall.physics.spread import Landings, landing_spread, monte_carlo

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
