"""Depth: corrections against hand-worked values, spikes and jumps against journeys that have them."""

import itertools
from collections import Counter
from dataclasses import replace

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from eastfall.physics.depth import LASTS, SPIKE, DepthWatch, TrueDepth
from eastfall.physics.readings import Readings
from eastfall.physics.settings import Air, Depth, Line

G = 9.8167


def corrected(shaft, shown, **depth):
    """Give true depths of shown ones under a [depth] section."""
    return (
        TrueDepth(shaft(depth=300.0), G).of(np.asarray(shown, float))
        if not depth
        else _of(shaft, shown, depth)
    )


def _of(shaft, shown, depth):
    return TrueDepth(replace(shaft(depth=300.0), depth=Depth(**depth)), G).of(np.asarray(shown, float))


def test_depths_without_a_correction_are_left_as_they_are(shaft):
    """The same array, not a copy: the main path pays nothing."""
    shown = np.array([0.0, 12.5, np.nan])
    assert TrueDepth(shaft(), G).of(shown) is shown


def test_scale_and_offset_of_the_counter(shaft):
    """1.002 true metres in a metre shown and 0.3 m at zero: 100 shown is 100.5."""
    np.testing.assert_allclose(
        corrected(shaft, [0.0, 100.0], scale=1.002, offset=0.3), [0.3, 100.5], rtol=1e-15
    )


def test_marks_are_met_and_straight_between(shaft):
    """The mark at 100 m seen at 100.42 and that at 200 m at 200.9: met, straight between, scale going on below."""
    marks = ((100.0, 100.42), (200.0, 200.9))
    found = corrected(shaft, [0.0, 50.21, 100.42, 150.66, 200.9, 250.0], marks=marks)
    below = 200.0 + (250.0 - 200.9) * 100.0 / 100.48
    np.testing.assert_allclose(found, [0.0, 50.0, 100.0, 150.0, 200.0, below], rtol=1e-14)
    one = TrueDepth(replace(shaft(depth=300.0), depth=Depth(marks=marks)), G)
    assert one.beyond_marks(199.0) == ""
    assert "200 m" in one.beyond_marks(201.0)


def test_one_mark_at_the_collar_is_an_offset(shaft):
    """True 0 m shown as 0.25 m and nothing else: 0.25 m less everywhere."""
    np.testing.assert_allclose(corrected(shaft, [0.25, 10.25], marks=((0.0, 0.25),)), [0.0, 10.0], atol=1e-12)


@pytest.mark.independent
def test_an_unloaded_cable_is_longer_by_load_own_weight_and_warmth(shaft):
    """50 kg on 1000 m of 1 mm steel, 200 GPa: 3.125 m of load, 0.193 m of own weight, and warmth; MgL/(AE) by hand."""
    line = Line(bob_mass=50.0, mass_per_length=0.006165, diameter=0.001, young=200e9)
    given_ = replace(
        shaft(depth=1100.0, line=line, air=Air(temperature_gradient=0.01)), depth=Depth(cable="unloaded")
    )
    (found,) = TrueDepth(given_, G).of(np.array([1000.0]))
    stiffness = np.pi / 4.0 * 1e-6 * 200e9
    load, own = 50.0 * G * 1000.0 / stiffness, 0.006165 * G * 1e6 / (2.0 * stiffness)
    assert found == pytest.approx(1000.0 + load + own + 1.2e-5 * 1000.0 * 5.0, rel=1e-12)


def ride(speed=2.0, rate=20.0, to=100.0):
    """Give rows of a steady ride downward."""
    time = np.arange(0.0, to / speed, 1.0 / rate)
    return Readings.of(time=time, depth=speed * time)


def watched(readings, cuts=(), limits=None):
    """Feed readings in pieces; give kept depths, jumps and the count of spikes."""
    unused: Counter[str] = Counter()
    watch = DepthWatch(limits or Depth(), unused)
    found = []
    for begin, end in itertools.pairwise([0, *sorted(cuts), len(readings)]):
        found += watch.pieces(readings[begin:end])
    found += watch.close()
    kept = np.concatenate([one.readings.depth for one in found])
    return kept, [one.jump for one in found if one.jump], unused[SPIKE]


def test_rows_after_an_end_are_taken_like_any_other():
    """A log of someone's own making may go on behind its end, in the middle of rows that agreed with nothing."""
    unused: Counter[str] = Counter()
    watch = DepthWatch(Depth(), unused)
    depth = np.array([0.0, 300.0, -300.0, 600.0, -600.0, 900.0])
    rows = Readings.of(time=0.05 * np.arange(depth.size), depth=depth)
    found = [*watch.pieces(rows[:4]), *watch.close(), *watch.pieces(rows[4:5]), *watch.pieces(rows[5:])]
    found += watch.close()
    assert sum(len(one.readings) for one in found) + unused[SPIKE] == depth.size


@pytest.mark.parametrize("rows", [1, 2, 4])
@pytest.mark.parametrize("size", [-60.0, 2.0, 500.0])
def test_a_spike_is_left_aside_and_counted(rows, size):
    """Up to four rows that stand apart and come back: gone, counted, and the others untouched."""
    readings = ride()
    readings.data[2, 500 : 500 + rows] += size
    kept, jumps, spikes = watched(readings)
    assert (jumps, spikes) == ([], rows)
    np.testing.assert_array_equal(kept, np.delete(readings.depth, range(500, 500 + rows)))


@pytest.mark.parametrize("size", [-20.0, 1.5, 5.0])
def test_a_jump_that_lasts_is_told_once_with_its_ends(size):
    """The counter slips by a few metres for good: one jump, dated at its first row, no row lost."""
    readings = ride()
    readings.data[2, 600:] += size
    kept, jumps, spikes = watched(readings)
    assert spikes == 0
    assert kept.size == len(readings)
    (jump,) = jumps
    assert jump == pytest.approx((30.0, 59.9, 60.0 + size, 30.0))


@pytest.mark.parametrize("speed", [0.05, 2.0, 18.0])
def test_a_line_that_starts_stops_and_reverses_never_jumps(speed):
    """Ramps of 1 m/s², a reversal, lost rows and a pause of a minute at any common speed: nothing is out of line."""
    time = np.arange(0.0, 200.0, 0.1)
    wanted = speed * np.interp(time, [0.0, 20.0, 80.0, 100.0, 140.0, 170.0, 190.0], [0, 1, 1, 0, 0, -1, 0])
    depth = np.cumsum(wanted) * 0.1
    time = np.where(time > 100.0, time + 60.0, time)
    readings = Readings.of(time=time, depth=np.round(depth, 2))
    kept_rows = np.delete(np.arange(time.size), np.r_[400:440, 701, 703, 900:915])
    kept, jumps, spikes = watched(readings[kept_rows])
    assert (jumps, spikes, kept.size) == ([], 0, kept_rows.size)


@pytest.mark.parametrize("rate", [10.0, 20.0, 50.0, 100.0])
@pytest.mark.parametrize("speed", [0.5, 8.0, 18.0])
@pytest.mark.parametrize("pause", [0.25, 0.5, 1.0, 4.0, 30.0])
def test_a_steady_line_out_of_which_rows_are_lost_does_not_jump(rate, speed, pause):
    """The depth goes on as fast as before, whatever is lost between and however closely rows stood."""
    readings = ride(speed=speed, rate=rate, to=45.0 * speed)
    left = readings[(readings.time < 10.0) | (readings.time >= 10.0 + pause)]
    kept, jumps, spikes = watched(left)
    assert (jumps, spikes, kept.size) == ([], 0, len(left))


@pytest.mark.parametrize("cuts", [(), (300,), tuple(range(1, 310))])
@pytest.mark.parametrize(
    ("limits", "speed", "bound"),
    [
        # A second after a step of 0.75 m in 0.05 s: twice that speed, and 3 m/s² on top.
        (Depth(max_speed=500.0, max_acceleration=3.0), 15.0, 2.0 * 15.0 + 3.0 + 0.5),
        (Depth(max_speed=500.0, max_acceleration=3.0), 1.0, 2.0 * 1.0 + 3.0 + 0.5),
        # As fast as a line may run, a tenth of a second granted.
        (Depth(max_speed=10.0, max_acceleration=200.0), 8.0, 10.0 * 1.1 + 0.5),
    ],
)
def test_a_step_is_out_of_line_beyond_speed_and_acceleration_in_it(limits, speed, bound, cuts):
    """One row after a second without any: just short of the bound it counts, just beyond it waits for others."""
    readings = ride(speed=speed, rate=20.0, to=15.0 * speed)[:300]
    end = readings.time[-1], readings.depth[-1]
    for factor, out in ((0.999, 0), (1.001, 1)):
        for way in (1.0, -1.0):
            step = Readings.of(time=[end[0] + 1.0], depth=[end[1] + way * factor * bound])
            whole = Readings.joined([readings, step])
            kept, jumps, spikes = watched(whole, cuts, limits)
            assert (jumps, spikes, kept.size) == ([], out, 301 - out)


@pytest.mark.parametrize("cuts", [(), (300,), (301,), tuple(range(1, 310))])
@pytest.mark.parametrize(("before", "out"), [(0.0, 0), (0.02, 1)])
def test_rows_of_one_stamp_are_held_against_the_last_one_before_it(before, out, cuts):
    """Two rows of one stamp: from the row 0.05 s before, at 10 m/s and half a metre, 1 m is in line, 1.01 m is out."""
    limits = Depth(max_speed=10.0, max_acceleration=0.1)
    readings = ride(speed=1.0, rate=20.0, to=15.0)[:299]
    last_time, last = readings.time[-1] + 0.05, readings.depth[-1]
    burst = Readings.of(time=[last_time] * 2, depth=[last + 0.05, last + 0.99 + before])
    kept, jumps, spikes = watched(Readings.joined([readings, burst]), cuts, limits)
    assert (jumps, spikes, kept.size) == ([], out, 301 - out)


@pytest.mark.parametrize("late", [0.03, 0.1])
@pytest.mark.parametrize("speed", [2.0, 8.0, 12.0])
def test_rows_stamped_as_they_arrive_over_an_uneven_link_are_in_line(speed, late):
    """Delays of 30 or 100 ms in the mean, spread as those of a busy network are: no jump but the one that is there."""
    rng = np.random.default_rng(4)
    readings = ride(speed=speed, rate=10.0, to=900.0)
    readings.data[0] = np.maximum.accumulate(readings.time + rng.exponential(late, len(readings)))
    kept, jumps, spikes = watched(readings)
    assert (jumps, spikes, kept.size) == ([], 0, len(readings))
    readings.data[2, 400:] += 12.0
    _, (jump,), spikes = watched(readings)
    assert jump.after - jump.before == pytest.approx(12.0 + speed / 10.0)
    assert spikes == 0


def test_rows_that_arrive_in_a_burst_with_one_stamp_are_no_jump():
    """Three seconds at 10 m/s arrive at once: every row bears the same host time, and nothing is out of line."""
    readings = ride(speed=10.0, rate=10.0, to=200.0)
    readings.data[0, 100:130] = readings.data[0, 129]
    _, jumps, spikes = watched(readings)
    assert (jumps, spikes) == ([], 0)


@pytest.mark.invariant
@settings(deadline=None, max_examples=60)
@given(
    cuts=st.sets(st.integers(1, 299), max_size=20),
    faults=st.lists(
        st.tuples(st.integers(0, 299), st.integers(1, 9), st.sampled_from([-40.0, 0.7, 3.0, 900.0])),
        max_size=8,
    ),
    same=st.sets(st.integers(1, 299), max_size=30),
)
def test_blocks_do_not_matter_and_every_row_is_kept_or_counted(cuts, faults, same):
    """Spikes, jumps and equal stamps anywhere, cut anywhere: the same rows, the same jumps, and none unaccounted."""
    readings = ride(to=30.0)
    for begin, rows, size in faults:
        readings.data[2, begin : begin + rows] += size
    for row in sorted(same):
        readings.data[0, row] = readings.data[0, row - 1]
    whole, jumps, spikes = watched(readings)
    kept, other_jumps, other_spikes = watched(readings, cuts)
    np.testing.assert_array_equal(kept, whole)
    assert (other_jumps, other_spikes) == (jumps, spikes)
    assert whole.size + spikes == len(readings)
    assert LASTS > 1


@pytest.mark.parametrize("rows", [2, 4, 5, 12])
@pytest.mark.parametrize("cuts", [(), (1, 2, 3, 4)])
def test_a_capture_by_hand_with_a_made_up_clock_loses_nothing(rows, cuts):
    """A reading every 10 m, a tenth of a second apart: no line moves so, the times are made up, and all rows count."""
    readings = Readings.of(time=0.1 * np.arange(rows), depth=10.0 * np.arange(rows))
    kept, jumps, spikes = watched(readings, [cut for cut in cuts if cut < rows])
    np.testing.assert_array_equal(kept, readings.depth)
    assert (jumps, spikes) == ([], 0)


def test_rubbish_in_the_first_row_is_told_as_a_jump_and_not_summed_from():
    """A first depth of 700 m, then the ride from the collar: one jump, no row of the ride lost."""
    readings = ride()
    readings.data[2, 0] = 700.0
    kept, jumps, spikes = watched(readings)
    assert (kept.size, spikes) == (len(readings), 0)
    assert [(one.before, one.after) for one in jumps] == [(700.0, pytest.approx(0.1))]


def test_rows_without_a_time_are_not_judged():
    """A capture without a clock: whatever the depths, all rows pass."""
    readings = Readings.of(depth=[0.0, 50.0, 3.0, 90.0])
    kept, jumps, spikes = watched(readings)
    assert (kept.size, jumps, spikes) == (4, [], 0)
