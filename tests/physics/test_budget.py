"""Uncertainty put together, against the GUM and an independent library."""

import GTC
import numpy as np
import pytest

from eastfall.physics.budget import Budget, combined, covariance, joint


@pytest.mark.published
def test_root_sum_of_squares_of_the_gauge_block_example():
    """JCGM 100:2008, H.1: 25, 9.7, 2.9 and 16.6 nm combine to 32 nm (from memory, unconfirmed)."""
    assert combined([25e-9, 9.7e-9, 2.9e-9, 16.6e-9]) == pytest.approx(32e-9, abs=0.5e-9)


@pytest.mark.independent
def test_combination_agrees_with_gtc():
    """Offset north = depth · sin(tilt + zero) · scale, by GTC and by contributions from the same sensitivities."""
    depth, tilt = np.array([40.0, 400.0]), 2e-3
    parts = np.array(
        [depth * np.cos(tilt) * 1.7e-5, depth * np.cos(tilt) * 3.5e-5, depth * np.sin(tilt) * 1e-3]
    )
    for z, u in zip(depth, combined(parts), strict=True):
        zero, read, scale = GTC.ureal(0.0, 1.7e-5), GTC.ureal(tilt, 3.5e-5), GTC.ureal(1.0, 1e-3)
        assert u == pytest.approx((z * GTC.sin(read + zero) * scale).u, rel=1e-14)


@pytest.mark.independent
def test_covariance_of_shared_inputs_agrees_with_gtc():
    """One azimuth turns east and north together, at either of two lengths; GTC gives the same covariance."""
    lengths, turn = np.array([3.0, 7.0]), 0.6
    parts = np.array(
        [
            [np.sin(turn) * 0.01 * np.ones(2), np.cos(turn) * 0.01 * np.ones(2)],
            [lengths * np.cos(turn) * 0.02, -lengths * np.sin(turn) * 0.02],
        ]
    )
    for one, found in zip(lengths, covariance(parts), strict=True):
        length, azimuth = GTC.ureal(one, 0.01), GTC.ureal(turn, 0.02)
        east, north = length * GTC.sin(azimuth), length * GTC.cos(azimuth)
        shared = GTC.get_covariance(east, north)
        np.testing.assert_allclose(found, [[east.u**2, shared], [shared, north.u**2]], rtol=1e-13)


@pytest.mark.invariant
def test_the_covariance_of_both_coordinates_counts_each_input_by_its_correlation():
    """All of one cause is the covariance of shared inputs, none is nothing; one column is what it is beside others."""
    parts = np.random.default_rng(2).normal(size=(17, 2, 9))
    ones = np.ones((17, 9))
    assert joint(parts, ones) == pytest.approx(covariance(parts)[:, 0, 1], rel=1e-13)
    assert joint(parts, 0.0 * ones).tolist() == [0.0] * 9
    half = joint(parts[:1], 0.5 * ones[:1])
    assert half == pytest.approx(0.5 * parts[0, 0] * parts[0, 1], rel=1e-15)
    alone = [joint(parts[:, :, at : at + 1], ones[:, :1])[0] for at in range(9)]
    assert alone == joint(parts, ones).tolist()
    assert joint(np.empty((0, 2, 3)), np.empty((0, 3))).tolist() == [0.0] * 3


def test_nothing_contributes_nothing_and_missing_stays_missing():
    """No contributions are zero uncertainty, by depth as well; NaN is not hidden."""
    assert combined([]) == 0.0
    assert combined(np.empty((0, 2, 3))).tolist() == [[0.0] * 3] * 2
    assert np.isnan(combined([np.nan, 1.0]))


@pytest.mark.invariant
def test_a_budget_between_its_depths_is_in_proportion():
    """Parts are read linearly between the depths, signs kept, one row an input."""
    parts = np.array([[[0.0, 2.0], [0.0, -4.0]], [[1.0, 1.0], [0.0, 0.0]]])
    budget = Budget(depth=np.array([0.0, 10.0]), names=("zero", "reading"), parts=parts)
    assert budget.at(2.5).tolist() == [[[0.5], [-1.0]], [[1.0], [0.0]]]
    assert budget.at([0.0, 10.0]).tolist() == parts.tolist()
