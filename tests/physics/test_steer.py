"""Steering: hand-worked directions, and the uncertainty of a direction by Monte Carlo."""

from math import degrees, inf, isnan

import numpy as np
import pytest

from eastfall.physics.steer import steer


@pytest.mark.parametrize(
    ("east", "north", "azimuth"),
    [(3e-3, 0.0, 270.0), (0.0, 3e-3, 180.0), (-3e-3, -3e-3, 45.0), (0.0, -1e-3, 0.0)],
)
def test_the_move_is_opposite_to_the_residual(east, north, azimuth):
    """A residual east is moved west, and so on round the compass."""
    found = steer(east, north, 1e-4, 1e-4)
    assert degrees(found.azimuth) == pytest.approx(azimuth, abs=1e-9)
    assert found.distance == pytest.approx(np.hypot(east, north), rel=1e-12)
    assert found.worth


@pytest.mark.independent
def test_the_uncertainty_of_the_direction_is_that_of_a_monte_carlo():
    """5 mm and 2 mm with 0.2 mm and 0.3 mm: the first-order u of direction and length to 2 % of 200 000 draws."""
    rng = np.random.default_rng(4)
    east, north = rng.normal(5e-3, 2e-4, 200_000), rng.normal(2e-3, 3e-4, 200_000)
    found = steer(5e-3, 2e-3, 2e-4, 3e-4)
    assert found.u_azimuth == pytest.approx(np.arctan2(east, north).std(), rel=0.02)
    assert found.u_distance == pytest.approx(np.hypot(east, north).std(), rel=0.02)


@pytest.mark.independent
def test_what_moves_both_coordinates_at_once_counts_in_direction_and_length():
    """5 mm and 2 mm with 0.2 mm and 0.3 mm, correlated by -0.7: the same yardstick."""
    rng = np.random.default_rng(4)
    shared = -0.7 * 2e-4 * 3e-4
    drawn = rng.multivariate_normal([5e-3, 2e-3], [[4e-8, shared], [shared, 9e-8]], 200_000).T
    found = steer(5e-3, 2e-3, 2e-4, 3e-4, shared)
    assert found.u_azimuth == pytest.approx(np.arctan2(*drawn).std(), rel=0.02)
    assert found.u_distance == pytest.approx(np.hypot(*drawn).std(), rel=0.02)


def test_less_than_the_uncertainty_is_left_alone():
    """1 mm known to 0.6 mm is not worth a move; nothing at all has no direction."""
    assert not steer(1e-3, 0.0, 6e-4, 6e-4).worth
    nothing = steer(0.0, 0.0, 6e-4, 6e-4)
    assert isnan(nothing.azimuth)
    assert nothing.u_azimuth == inf
