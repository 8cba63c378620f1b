"""Speed of a moving line and the lean of its felt vertical."""

import copy
from math import pi, radians

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from eastfall.physics.errors import ParameterError
from eastfall.physics.moving import KNOT, LONGEST_GAP, LineSpeed, lean

START = 2.0  # s: two knots have closed by then at any of the rates below


def _speed(time, depth):
    return LineSpeed().update(time, depth)


@pytest.mark.independent
def test_lean_is_the_coriolis_acceleration_against_gravity():
    """10 m/s at 60° gives 74 µrad (reckoned apart from the program: 2 · 7.292115e-5 · 10 · 0.5/9.81)."""
    assert lean(10.0, radians(60.0), 9.81) == pytest.approx(7.4333486e-5, abs=5e-13)


@pytest.mark.invariant
def test_lean_turns_over_with_the_direction_and_vanishes_at_the_poles():
    """Up is the mirror of down, north the mirror of south, and a pole has no eastward lean."""
    assert lean(-3.0, 0.7, 9.8) == -lean(3.0, 0.7, 9.8)
    assert lean(3.0, -0.7, 9.8) == lean(3.0, 0.7, 9.8)
    assert abs(lean(3.0, pi / 2, 9.8)) < 1e-20


@pytest.mark.independent
def test_lean_agrees_with_the_motion_of_a_free_bob_in_an_inertial_frame():
    """A point held at constant radial speed over the turning equator needs the sideways push 2ωv."""
    omega, v, step, radius = 7.292115e-5, 10.0, 1e-2, 6.378e6
    t = np.array([-step, 0.0, step])
    place = (radius - v * t) * np.exp(1j * omega * t)  # in the inertial frame, east is +i at t = 0
    push = (place[0] - 2.0 * place[1] + place[2]) / step**2
    # Rounding of 6e6 m over (0.01 s)² leaves some 1e-5 m/s² of the second difference, the Coriolis part is 1.5e-3.
    assert -push.imag == pytest.approx(lean(v, 0.0, 9.78) * 9.78, abs=3e-5)


def test_lean_refuses_what_is_no_gravity_or_latitude():
    """Gravity below zero and latitudes beyond a pole raise with the range."""
    with pytest.raises(ParameterError, match=r"gravity is -9\.8 m/s²; expected more than 0"):
        lean(1.0, 0.0, -9.8)
    with pytest.raises(ParameterError, match=r"latitude is 2\.0 rad"):
        lean(1.0, 2.0, 9.8)
    with pytest.raises(ParameterError, match=r"latitude is -1\.6 rad"):
        lean(1.0, -1.6, 9.8)


@pytest.mark.invariant
@pytest.mark.parametrize("rate", [1.0, 3.0, 7.0, 10.0, 33.0, 50.0, 200.0])
def test_constant_speed_is_met_without_lag_from_the_third_knot_on(rate):
    """Whatever the rate, a line at constant speed shows that speed and no acceleration."""
    time = np.arange(int(40 * rate) + 20) / rate
    speed, acceleration = _speed(time, 30.0 + 2.5 * time)
    known = time > max(START, 3.0 / rate)
    # Depths of 130 m in float64 are good to 1.4e-14 m, and differences of them over 0.2 s to 1e-12 m/s.
    np.testing.assert_allclose(speed[known], 2.5, atol=1e-9)
    np.testing.assert_allclose(acceleration[known], 0.0, atol=1e-8)


@pytest.mark.invariant
@pytest.mark.parametrize("rate", [1.0, 7.0, 10.0, 50.0, 200.0])
def test_constant_acceleration_is_met_without_lag_at_the_newest_row(rate):
    """A parabola of depth gives its own slope and curvature at the last row."""
    time = np.arange(int(20 * rate) + 20) / rate
    speed, acceleration = _speed(time, 5.0 + 0.3 * time + 0.25 * time**2)
    assert speed[-1] == pytest.approx(0.3 + 0.5 * time[-1], abs=1e-8)
    assert acceleration[-1] == pytest.approx(0.5, abs=1e-8)


@pytest.mark.invariant
def test_irregular_times_do_not_bend_a_parabola():
    """Exponentially spaced rows at a constant acceleration give speed and acceleration exactly."""
    time = np.cumsum(np.random.default_rng(3).exponential(0.1, 4000))
    speed, acceleration = _speed(time, 5.0 + 0.3 * time + 0.01 * time**2)
    known = time > time[0] + 15.0
    np.testing.assert_allclose(speed[known], (0.3 + 0.02 * time)[known], atol=1e-7)
    np.testing.assert_allclose(acceleration[known], 0.02, atol=1e-6)


@pytest.mark.invariant
def test_rows_that_share_a_time_stamp_count_as_one_place_in_time():
    """Fifty rows a second, stamped by the whole second, still give the speed."""
    time = np.repeat(np.arange(60.0), 50)
    speed, _ = _speed(time, 2.0 * (np.arange(3000) / 50.0))
    np.testing.assert_allclose(speed[time > 5.0], 2.0, atol=1e-9)


def test_depth_in_centimetre_steps_leaves_the_stated_noise():
    """Depth rounded to 10 mm at 10 Hz gives a speed noise near the 8 mm/s of the docstring."""
    rng = np.random.default_rng(11)
    time = np.arange(200_000) / 10.0
    depth = np.round((0.731 * time + 0.003 * rng.random()) / 0.01) * 0.01
    speed, acceleration = _speed(time, depth)
    # Rounding errors of a steady line are a little regular, so the bound is one-sided: at most the stated noise
    # and a quarter, and not the zero of a line that was never rounded.
    assert 1e-4 < np.std(speed[100:] - 0.731) < 1.25 * 8e-3
    assert np.std(acceleration[100:]) < 1.25 * 8e-3


def test_white_depth_noise_gives_the_stated_factors():
    """One row a knot with unit noise: 0.80 σ/T for the speed and 0.16 σ/T² for the acceleration."""
    time = np.arange(200_000) * KNOT
    speed, acceleration = _speed(time, np.random.default_rng(5).normal(size=time.size))
    # Neighbours share eight knots, so some 20,000 independent values: the deviation is good to half a per cent.
    assert np.nanstd(speed) * KNOT == pytest.approx(0.795, rel=0.02)
    assert np.nanstd(acceleration) * KNOT**2 == pytest.approx(0.157, rel=0.02)


def test_the_first_knots_and_a_long_pause_leave_the_speed_unknown():
    """Before two knots have closed there is no speed, at the start and after a pause; across it nothing is guessed."""
    time = np.concatenate([np.arange(50) * 0.1, 5.0 + LONGEST_GAP + np.arange(50) * 0.1])
    speed, acceleration = _speed(time, 2.0 * time)
    assert np.isnan(speed[:3]).all()
    assert np.isnan(speed[50:53]).all()
    assert np.isnan(acceleration[50:53]).all()
    # From the second knot on, at 0.4 s, a steady line's speed is right at once, and taken for steady.
    for start in (0, 50):
        np.testing.assert_allclose(speed[start + 5 : start + 50], 2.0, atol=1e-9)
        np.testing.assert_allclose(acceleration[start + 5 : start + 50], 0.0, atol=1e-8)


@pytest.mark.invariant
def test_a_pause_inside_a_later_block_starts_afresh_as_in_one_block():
    """Nine knots are known when a block brings more of them, a pause and a line that has slowed down meanwhile."""
    time = np.concatenate([np.arange(80) * 0.1, 40.0 + np.arange(50) * 0.1])
    depth = np.where(time < 30.0, 2.0 * time, 30.0 + 0.1 * time)
    whole, tracker = np.stack(_speed(time, depth)), LineSpeed()
    parts = [np.stack(tracker.update(time[part], depth[part])) for part in (slice(40), slice(40, None))]
    np.testing.assert_array_equal(np.concatenate(parts, axis=1), whole)
    np.testing.assert_allclose(whole[0, 86:], 0.1, atol=1e-9)


def test_missing_and_backward_rows_are_left_out():
    """NaN in time or depth and a time that steps back give NaN there and change nothing else."""
    time = np.arange(300) / 10.0
    depth = 1.5 * time
    whole = _speed(time, depth)
    at = [40, 41, 120, 250]
    times, depths = (
        np.insert(time, at, [np.nan, 4.0, 2.0, np.inf]),
        np.insert(depth, at, [1.0, np.nan, 9.0, 3.0]),
    )
    speed, acceleration = _speed(times, depths)
    bad = np.isnan(times) | np.isnan(depths) | np.isin(np.arange(304), [122, 253])
    assert np.isnan(speed[bad]).all()
    np.testing.assert_array_equal(speed[~bad], whole[0])
    np.testing.assert_array_equal(acceleration[~bad], whole[1])


def test_a_backward_row_alone_in_its_block_is_left_out_too():
    """Nothing is missing and one time steps back: NaN there, and the rest as if it had not come."""
    time = np.arange(100) / 10.0
    whole = _speed(time, 1.5 * time)[0]
    speed = _speed(np.insert(time, 60, 4.0), np.insert(1.5 * time, 60, 80.0))[0]
    assert np.isnan(speed[60])
    np.testing.assert_array_equal(np.delete(speed, 60), whole)


@pytest.mark.invariant
def test_a_row_depends_only_on_rows_up_to_it():
    """Changing the future does not change the past."""
    time = np.arange(500) / 20.0
    depth = np.sin(time)
    other = np.where(time > 12.0, 7.0, depth)
    np.testing.assert_array_equal(_speed(time, depth)[0][:240], _speed(time, other)[0][:240])


rows = st.lists(
    st.tuples(
        st.one_of(st.just(0.0), st.floats(0.0, 0.5), st.floats(0.0, 30.0), st.just(-1.0), st.just(np.nan)),
        st.one_of(st.floats(-50.0, 50.0), st.just(np.nan)),
    ),
    min_size=1,
    max_size=120,
)


@pytest.mark.invariant
@given(rows=rows, cuts=st.lists(st.integers(0, 120), max_size=12), start=st.sampled_from([0.0, 1.7e9]))
def test_results_do_not_depend_on_the_cutting_to_the_last_bit(rows, cuts, start):
    """Whole, or in any blocks, empty ones too, the same bits come out."""
    steps, depth = np.array(rows).T
    time = start + np.cumsum(np.nan_to_num(steps))
    time[np.isnan(steps)] = np.nan
    whole = np.stack(_speed(time, depth))
    tracker = LineSpeed()
    blocks = np.split(np.arange(depth.size), sorted(min(c, depth.size) for c in cuts))
    parts = [np.stack(tracker.update(time[part], depth[part])) for part in blocks]
    np.testing.assert_array_equal(np.concatenate(parts, axis=1), whole)


@pytest.mark.invariant
@pytest.mark.parametrize("block", [1, 7, 1000])
def test_a_long_log_gives_the_same_bits_in_blocks(block):
    """Forty thousand rows (more than are handled at a time), whole or in blocks, agree to the last bit."""
    rng = np.random.default_rng(8)
    time = np.cumsum(rng.exponential(0.02, 40_000 if block > 1 else 2_000))
    depth = np.round(50.0 * np.sin(time / 40.0), 2)
    whole = np.stack(_speed(time, depth))
    tracker = LineSpeed()
    parts = [
        np.stack(tracker.update(time[i : i + block], depth[i : i + block]))
        for i in range(0, time.size, block)
    ]
    np.testing.assert_array_equal(np.concatenate(parts, axis=1), whole)


@pytest.mark.invariant
def test_a_copy_goes_its_own_way():
    """A deep copy continues as the original would, and leaves it alone."""
    time = np.arange(100) / 10.0
    tracker = LineSpeed()
    tracker.update(time[:50], time[:50])
    twin = copy.deepcopy(tracker)
    twin.update(time[50:], 9.0 * time[50:])
    np.testing.assert_array_equal(tracker.update(time[50:], time[50:])[0], _speed(time, time)[0][50:])


def test_different_lengths_are_refused():
    """Time and depth of different lengths raise."""
    with pytest.raises(ParameterError, match="the shape of time"):
        _speed(np.zeros(3), np.zeros(2))


@pytest.mark.independent
@pytest.mark.parametrize(("rate", "within"), [(1.0, 3e-4), (10.0, 5e-5), (200.0, 5e-5)])
def test_the_lean_of_a_whole_journey_sums_to_the_offset_of_its_true_speed(rate, within):
    """300 s with soft starts and stops at 4 m/s: 37 mm of lean, met to a tenth of what a survey resolves (1 mm)."""
    time = np.arange(0.0, 300.0, 1.0 / rate)
    ramp = np.minimum(time, 300.0 - time) * 0.4
    true = np.clip(ramp, 0.0, 4.0)
    depth = np.concatenate([[0.0], np.cumsum(0.5 * (true[1:] + true[:-1]) / rate)])
    speed, _ = _speed(time, np.round(depth, 2))
    off = lean(np.nan_to_num(speed) - true, 1.0, 9.82)
    summed = np.cumsum(0.5 * (off[1:] + off[:-1]) * np.diff(depth))
    # At 1 Hz a knot is one row, and the corners of the speed are seen nine seconds long.
    assert np.abs(summed).max() < within
