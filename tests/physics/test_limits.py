"""Limits by depth."""

import numpy as np

from eastfall.physics.limits import limits_at
from eastfall.physics.settings import Limits


def test_the_larger_of_action_limit_and_depth_over_ratio_holds():
    """25 mm and depth/2000: 25 mm down to 50 m, 470 mm at 940 m, with the warning in proportion."""
    warning, action = limits_at(
        Limits(warning=0.015, action=0.025, ratio=2000.0), np.array([10.0, 50.0, 940.0])
    )
    np.testing.assert_allclose(action, [0.025, 0.025, 0.470], rtol=1e-15)
    np.testing.assert_allclose(warning, [0.015, 0.015, 0.282], rtol=1e-15)


def test_without_a_ratio_the_action_limit_holds_at_every_depth():
    """At the collar, above it and at the bottom alike."""
    warning, action = limits_at(Limits(warning=0.015, action=0.025), np.array([-1.0, 0.0, 940.0]))
    assert action.tolist() == [0.025] * 3
    np.testing.assert_allclose(warning, [0.015] * 3, rtol=1e-15)


def test_a_table_is_linear_between_its_depths_and_level_beyond():
    """10/20 mm at 0 m and 30/60 mm at 100 m give 20/40 mm at 50 m, and hold beyond the ends."""
    table = ((0.0, 0.010, 0.020), (100.0, 0.030, 0.060))
    warning, action = limits_at(Limits(table=table), np.array([-1.0, 50.0, 500.0]))
    np.testing.assert_allclose(warning, [0.010, 0.020, 0.030], rtol=1e-15)
    np.testing.assert_allclose(action, [0.020, 0.040, 0.060], rtol=1e-15)


def test_nan_depth_has_no_limit():
    """A missing depth has a missing limit."""
    warning, action = limits_at(Limits(), np.array([np.nan]))
    assert np.isnan(warning[0])
    assert np.isnan(action[0])
