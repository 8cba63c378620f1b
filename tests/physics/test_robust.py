"""Huber's mean: its efficiency as published, and what bad readings do to it."""

import numpy as np
import pytest
from scipy import stats
from scipy.optimize import brentq

from eastfall.physics.robust import MAD_TO_SIGMA, huber_mean


@pytest.mark.published
def test_efficiency_with_normal_errors_is_95_percent():
    """Tuned to 1.345 it has 95 % at the normal: Huber, P. J. (1981), Robust Statistics, 4.2 (from memory, unconfirmed).

    4000 samples of 101: the variance of a sample variance is 2/n of its square, so the ratio of two correlated ones is
    good to about 1 %.
    """
    rng = np.random.default_rng(1)
    samples = rng.normal(0.0, 1.0, (4000, 101))
    robust = np.array([huber_mean(one).mean for one in samples])
    assert samples.mean(axis=1).var() / robust.var() == pytest.approx(0.95, abs=0.02)


def test_stated_uncertainty_is_that_of_the_mean():
    """2000 samples of 51: the spread of (mean - truth)/u is 1, but for the scale's own scatter of about 7 %."""
    rng = np.random.default_rng(2)
    found = [huber_mean(rng.normal(3.0, 0.2, 51)) for _ in range(2000)]
    pull = np.array([(one.mean - 3.0) / one.u for one in found])
    assert pull.std() == pytest.approx(1.0, abs=0.1)
    assert found[0].readings == 51


def test_a_tenth_of_rubbish_moves_it_by_less_than_its_scatter():
    """Five readings of fifty a thousand times off: the plain mean is lost, this one is not."""
    values = np.random.default_rng(3).normal(0.0, 1.0, 50)
    values[::10] = 1000.0
    assert abs(huber_mean(values).mean) < 0.5 < values.mean()


@pytest.mark.parametrize(
    ("values", "mean", "scatter"),
    [
        ([], np.nan, np.nan),
        ([2.0], 2.0, np.nan),
        ([1.0, 1.0, 1.0, 5.0], 2.0, 2.0),
        ([4.0, np.nan], 4.0, np.nan),
    ],
)
def test_few_or_equal_readings(values, mean, scatter):
    """Nothing gives nothing, one gives itself without a scatter, and equal ones fall back to the plain mean."""
    found = huber_mean(values)
    np.testing.assert_equal((found.mean, found.scatter), (mean, scatter))


@pytest.mark.independent
@pytest.mark.parametrize("side", [1.0, -1.0])
@pytest.mark.parametrize("seed", range(3))
def test_the_mean_is_the_root_of_hubers_equation(seed, side):
    """Σ ψ((x - m)/s) = 0, ψ cut at 1.345, s the scaled median deviation: by scipy's root finder, skewed either way."""
    values = side * np.random.default_rng(seed).exponential(1.0, 41) ** 3
    scale = stats.median_abs_deviation(values, scale="normal")
    root = brentq(
        lambda m: np.clip((values - m) / scale, -1.345, 1.345).sum(), values.min(), values.max(), xtol=1e-13
    )
    found = huber_mean(values)
    assert found.scatter == pytest.approx(scale, rel=1e-12)
    # The iteration ends when it moves by less than a part in 1e9 of its reach.
    assert found.mean == pytest.approx(root, abs=1e-8 * scale)
    assert found.u == pytest.approx(scale / np.sqrt(0.95 * 41), rel=1e-12)


@pytest.mark.independent
def test_the_scale_is_that_of_the_normal_distribution():
    """1/Φ⁻¹(3/4), by scipy."""
    assert 1.0 / stats.norm.ppf(0.75) == pytest.approx(MAD_TO_SIGMA, rel=1e-15)
