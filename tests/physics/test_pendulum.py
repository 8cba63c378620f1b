"""The fit of a swing: what averaging over stretches takes from it, and least squares by another library."""

from math import pi, sqrt

import numpy as np
import pytest
from scipy.optimize import least_squares

from eastfall.physics.pendulum import Samples, coarse, refine, search

TURN = 6.1e-5
PERIOD = 50.0
OMEGA = 2.0 * pi / PERIOD
GAMMA = 1.0 / 900.0
REST, FORWARD, BACKWARD = 0.012 - 0.007j, 0.030 + 0.010j, -0.008 + 0.020j


def swing(time, middle=0.0):
    """Give positions of a damped swing; A and B count from `middle`."""
    tau = time - middle
    plane = FORWARD * np.exp(1j * OMEGA * tau) + BACKWARD * np.exp(-1j * OMEGA * tau)
    return REST + np.exp(-(GAMMA + 1j * TURN) * tau) * plane


def samples_of(time, value, weight=None):
    """Give single readings as samples."""
    weight = np.ones(time.size) if weight is None else weight
    return Samples(time=time, spread=np.zeros(time.size), weight=weight, value=value)


@pytest.mark.invariant
@pytest.mark.parametrize("stretch", [1.0, 2.5, 5.0])
def test_a_swing_averaged_over_stretches_keeps_its_size_frequency_and_decay(stretch):
    """Twenty readings a second for 200 s from the middle on, averaged: A and B to what the second order leaves.

    A mean over T takes (ωT)²/24 of a swing, 1.6 % at 5 s; the second order leaves (ωT)⁴/1920, 8e-5 there.
    """
    fine = np.arange(-100.0, 100.0, 0.05)
    averaged = coarse(samples_of(fine, swing(fine)), round(200.0 / stretch))
    assert averaged.weight.min() > 10.0
    fit, _ = refine(averaged, TURN, 1.02 * OMEGA, 0.0)
    left = (OMEGA * stretch) ** 4 / 1920.0 + 1e-7
    back = np.exp((GAMMA + 1j * TURN) * fit.middle)
    assert fit.forward * back * np.exp(-1j * OMEGA * fit.middle) == pytest.approx(FORWARD, rel=5.0 * left)
    assert fit.backward * back * np.exp(1j * OMEGA * fit.middle) == pytest.approx(BACKWARD, rel=5.0 * left)
    assert fit.centre == pytest.approx(REST, abs=0.04 * left)
    assert fit.omega == pytest.approx(OMEGA, rel=left)
    assert fit.gamma == pytest.approx(GAMMA, abs=left / 20.0)


@pytest.mark.independent
@pytest.mark.parametrize("seed", [1, 2, 3])
def test_the_fit_is_the_least_squares_of_scipy_with_all_eight_numbers_free(seed):
    """Weights of one to four, noise of 0.3 mm, three swings: every number to a hundredth of its own uncertainty."""
    rng = np.random.default_rng(seed)
    time = np.arange(0.0, 150.0, 0.7)
    weight = rng.integers(1, 5, time.size).astype(float)
    noise = 3e-4 / np.sqrt(weight) * (rng.normal(size=time.size) + 1j * rng.normal(size=time.size))
    value = swing(time) + noise
    fit, _ = search(samples_of(time, value, weight), TURN, None)

    def left(p):
        tau = time - fit.middle
        turning = np.exp(-(p[3] + 1j * TURN) * tau)
        plane = (p[4] + 1j * p[5]) * np.exp(1j * p[2] * tau) + (p[6] + 1j * p[7]) * np.exp(-1j * p[2] * tau)
        return (np.sqrt(weight) * (value - p[0] - 1j * p[1] - turning * plane)).view(float)

    at = np.array([fit.centre, fit.forward, fit.backward]).view(float)
    start = np.array([at[0], at[1], fit.omega, fit.gamma, *at[2:]])
    found = least_squares(left, 1.001 * start, x_scale="jac", xtol=1e-14, ftol=1e-14, gtol=1e-14)
    spread = np.sqrt(np.diag(np.linalg.inv(found.jac.T @ found.jac))) * 3e-4
    assert np.abs((start - found.x) / spread).max() < 0.01
    assert fit.cost == pytest.approx(2.0 * found.cost, rel=1e-6)
    # ω and γ with everything else free: their part of the whole covariance.
    whole = np.linalg.inv(found.jac.T @ found.jac)[2:4, 2:4]
    np.testing.assert_allclose(fit.inverse, whole, rtol=1e-4, atol=1e-4 * sqrt(whole[0, 0] * whole[1, 1]))


@pytest.mark.invariant
@pytest.mark.parametrize("expected", [None, 0.6 * OMEGA, 1.6 * OMEGA])
@pytest.mark.parametrize("swings", [2.0, 7.0, 60.0])
@pytest.mark.parametrize("toward", [1.0, 1j])
def test_a_small_swing_far_off_is_found_whichever_way_it_goes(swings, toward, expected):
    """Toward east alone or north alone, 5 mm about a rest 3 m away, in noise of 0.3 mm; what is expected is far out."""
    rng = np.random.default_rng(7)
    time = np.arange(0.0, swings * PERIOD, 1.0)
    value = (
        3.0 - 2.0j + toward * 5e-3 * np.exp(-time / 2000.0) * np.cos(OMEGA * time) * np.exp(-1j * TURN * time)
    )
    value = value + 3e-4 * (rng.normal(size=time.size) + 1j * rng.normal(size=time.size))
    fit, settled = search(samples_of(time, value), TURN, expected)
    assert settled
    # The frequency of a steady swing in white noise is known to √24 σ/(A ω T √n) of itself; five of those.
    room = 5.0 * sqrt(24.0) * 0.06 / (2.0 * pi * swings * sqrt(time.size))
    assert fit.omega == pytest.approx(OMEGA, rel=2.0 * room)
    assert abs(fit.centre - (3.0 - 2.0j)) < 5.0 * 3e-4 * sqrt(8.0 / time.size)
