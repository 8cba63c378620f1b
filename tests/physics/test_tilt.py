"""Tilts to offsets: directions, station formulas, running sum."""

from math import pi, radians

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from eastfall.physics.errors import ParameterError
from eastfall.physics.tilt import (
    OffsetSum,
    direction,
    increments,
    spread_misclosure,
)


@pytest.mark.invariant
def test_axis_a_points_along_its_azimuth_and_b_to_its_right():
    """With A to the north a tilt of A goes north and one of B east; with A to the east, east and south."""
    np.testing.assert_allclose(increments(0.01, 0.0, 0.0), (0.0, np.sin(0.01)), atol=1e-17)
    np.testing.assert_allclose(increments(0.0, 0.01, 0.0), (np.sin(0.01), 0.0), atol=1e-17)
    np.testing.assert_allclose(increments(0.01, 0.0, pi / 2), (np.sin(0.01), 0.0), atol=1e-17)
    np.testing.assert_allclose(increments(0.0, 0.01, pi / 2), (0.0, -np.sin(0.01)), atol=1e-17)


@pytest.mark.invariant
@given(a=st.floats(-1.0, 1.0), b=st.floats(-1.0, 1.0), azimuth=st.floats(-10.0, 10.0))
def test_turning_the_instrument_keeps_the_length(a, b, azimuth):
    """The horizontal step is as long as its two axes say, whatever the azimuth."""
    assert np.hypot(*increments(a, b, azimuth)) == pytest.approx(np.hypot(np.sin(a), np.sin(b)), abs=1e-15)


def test_missing_tilt_gives_missing_steps():
    """NaN in one axis gives NaN in both directions."""
    assert np.isnan(increments(np.nan, 0.0, 0.3)).all()


@pytest.mark.independent
def test_minimum_curvature_follows_a_circle_exactly():
    """Stations on a circular arc in one plane lie where the circle's own equation puts them."""
    radius, toward = 700.0, radians(33.0)
    inclination = np.linspace(0.0, 1.2, 7)
    east, north = direction(inclination, toward)
    found = OffsetSum(method="minimum-curvature").update(radius * inclination, north, east)
    away = radius * (1.0 - np.cos(inclination))
    np.testing.assert_allclose(found[0], away * np.sin(toward), atol=1e-10)
    np.testing.assert_allclose(found[1], away * np.cos(toward), atol=1e-10)


@pytest.mark.invariant
def test_both_methods_agree_on_a_straight_line_and_part_by_the_second_order():
    """Parallel stations give one step; for an angle β the average is shorter by β²/12."""
    ends = {}
    for method in ("average", "minimum-curvature"):
        straight = OffsetSum(method=method).update([0.0, 30.0], [0.2, 0.2], [0.1, 0.1])
        np.testing.assert_allclose((straight[0][-1], straight[1][-1]), (3.0, 6.0), rtol=1e-15)
        bent = OffsetSum(method=method).update([0.0, 1.0], [0.0, 0.0], [0.0, np.sin(1e-3)])
        ends[method] = bent[0][-1]
    # 1e-12 are the β⁴/120 and the rounding of a difference of 1e-7.
    ratio = ends["minimum-curvature"] / ends["average"]
    assert ratio - 1.0 == pytest.approx(1e-3**2 / 12.0, abs=1e-12)


def test_directions_longer_than_one_and_odd_shapes_are_refused():
    """Slopes that together exceed a unit vector, and arrays of different shapes, raise."""
    with pytest.raises(ParameterError, match="together at most 1 m/m"):
        OffsetSum(method="minimum-curvature").update([0.0, 1.0], [0.9, 0.0], [0.9, 0.0])
    with pytest.raises(ParameterError, match="expected three of one shape"):
        OffsetSum().update([0.0, 1.0], [0.0], [0.0, 0.0])


@pytest.mark.invariant
def test_misclosure_is_spread_in_proportion_to_depth():
    """A constant zero error, which grows with depth, is taken out to the last digit."""
    depth = np.array([0.0, 10.0, 40.0, 100.0])
    east, north = 0.002 + 1e-5 * depth, -0.001 + 3e-5 * depth
    fixed = spread_misclosure(depth, east, north, 0.002, -0.001)
    np.testing.assert_allclose(fixed[0], 0.002, atol=1e-17)
    np.testing.assert_allclose(fixed[1], -0.001, atol=1e-17)
    with pytest.raises(ParameterError, match="another depth than the first"):
        spread_misclosure([5.0, 5.0], [0.0, 1.0], [0.0, 0.0], 0.0, 0.0)


@pytest.mark.independent
def test_running_sum_is_the_trapezoid_rule():
    """Offsets by rows agree with NumPy's own trapezoid rule, from a given start."""
    depth = np.linspace(0.0, 50.0, 101)
    slope = 1e-3 * np.cos(depth / 9.0)
    east, north, _ = OffsetSum(0.01, -0.02).update(depth, 2.0 * slope, slope)
    assert east[-1] == pytest.approx(0.01 + np.trapezoid(slope, depth), abs=1e-15)
    assert north[-1] == pytest.approx(-0.02 + 2.0 * np.trapezoid(slope, depth), abs=1e-15)


@pytest.mark.independent
def test_weights_give_the_spread_of_the_offset_over_many_noisy_runs():
    """Root weight sum times the noise of one slope is the standard deviation of the last offset."""
    rng = np.random.default_rng(2)
    depth = np.cumsum(rng.uniform(0.0, 0.4, 60))
    ends = [OffsetSum().update(depth, rng.normal(0.0, 1e-4, 60), np.zeros(60))[1][-1] for _ in range(2000)]
    weight = OffsetSum().update(depth, np.zeros(60), np.zeros(60))[2]
    # 2000 runs: the deviation of a sample deviation is 1/√4000 = 1.6 %, four times that is allowed.
    assert np.std(ends) == pytest.approx(1e-4 * np.sqrt(weight[-1]), rel=0.064)
    assert weight[0] == 0.0


@pytest.mark.independent
def test_the_weight_sum_of_every_row_is_that_of_a_run_that_ends_there():
    """Row by row the sum equals Σ w² worked out from scratch, also past a turn."""
    depth = np.array([0.0, 1.0, 3.0, 3.0, 6.0, 4.0, 1.0])
    _, _, weight = OffsetSum().update(depth, np.zeros(7), np.zeros(7))
    for n in range(1, 8):
        step = np.concatenate([[0.0], np.diff(depth[:n]), [0.0]])
        assert weight[n - 1] == pytest.approx(np.sum((0.5 * (step[:-1] + step[1:])) ** 2), abs=1e-15)


def test_missing_rows_are_bridged():
    """Rows without a tilt or depth give NaN, and the sum goes on as if they were not there."""
    depth, slope = np.arange(8.0), np.linspace(0.0, 1e-3, 8)
    kept = np.array([0, 1, 4, 5, 7])
    holed = slope.copy()
    holed[[2, 3]] = np.nan
    deep = depth.copy()
    deep[6] = np.nan
    got = np.stack(OffsetSum().update(deep, holed, holed))
    want = np.stack(OffsetSum().update(depth[kept], slope[kept], slope[kept]))
    assert np.isnan(got[:, [2, 3, 6]]).all()
    np.testing.assert_array_equal(got[:, kept], want)


@pytest.mark.invariant
@given(
    rows=st.lists(
        st.tuples(
            st.one_of(st.floats(-100.0, 100.0), st.just(np.nan)),
            st.one_of(st.floats(-0.5, 0.5), st.just(np.nan)),
            st.floats(-0.5, 0.5),
        ),
        min_size=1,
        max_size=40,
    ),
    cuts=st.lists(st.integers(0, 40), max_size=8),
    method=st.sampled_from(["average", "minimum-curvature"]),
)
def test_the_sum_does_not_depend_on_the_cutting_to_the_last_bit(rows, cuts, method):
    """Whole, or in any blocks, the same bits come out."""
    table = np.array(rows).T
    whole = np.stack(OffsetSum(0.1, 0.2, method).update(*table))
    running = OffsetSum(0.1, 0.2, method)
    blocks = np.split(table, sorted(min(c, table.shape[1]) for c in cuts), axis=1)
    parts = [np.stack(running.update(*part)) for part in blocks]
    np.testing.assert_array_equal(np.concatenate(parts, axis=1), whole)


def test_an_unknown_method_is_refused():
    """A method of another name raises with the names that exist."""
    with pytest.raises(ParameterError, match="average or minimum-curvature"):
        OffsetSum(method="tangential")
