"""Passes: turns, stations crossed, and independence of the cutting."""

import itertools

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from eastfall.physics.passes import Passes, crossings


def walk(depth, cuts=(), every=10.0, last=100.0):
    """Give (pass, direction) of each row and (pass, station) crossed, for depths fed in pieces."""
    passes = Passes(0.2, 50.0)
    labels, crossed = [], []
    depth = np.asarray(depth, float)
    edges = [0, *sorted(one for one in cuts if 0 < one < depth.size), depth.size]
    for begin, end in itertools.pairwise(edges):
        for stretch in passes.stretches(depth[begin:end]):
            labels += [(stretch.passing, stretch.direction)] * (stretch.rows.stop - stretch.rows.start)
            crossed += [(stretch.passing, station) for station, _ in crossings(stretch, every, last)]
    return labels, crossed


def test_down_and_up_crosses_every_station_once_a_pass():
    """From 0 to 35 m and back: 0, 10, 20, 30 down, then 30, 20, 10, 0 up."""
    depth = [*np.arange(0.0, 35.5, 0.5), *np.arange(35.0, -0.5, -0.5)]
    labels, crossed = walk(depth)
    assert crossed == [(0, 0.0), (0, 10.0), (0, 20.0), (0, 30.0), (1, 30.0), (1, 20.0), (1, 10.0), (1, 0.0)]
    assert labels[0] == (0, 1)
    assert labels[-1] == (1, -1)


def test_a_jerking_rope_does_not_end_a_pass():
    """Coming back by less than the stated turn goes on in the same pass, and no station is crossed twice."""
    depth = [0.0, 9.95, 10.05, 9.95, 10.05, 9.9, 10.1, 20.0]
    labels, crossed = walk(depth)
    assert {one for one, _ in labels} == {0}
    assert crossed == [(0, 0.0), (0, 10.0), (0, 20.0)]


def test_a_run_that_begins_at_the_bottom_starts_upward():
    """The first pass of a run whose first reading is in the lower half is an up pass."""
    labels, crossed = walk([90.0, 85.0, 75.0])
    assert labels[0] == (0, -1)
    assert crossed == [(0, 90.0), (0, 80.0)]


def test_a_turn_in_one_long_step_still_crosses_the_stations_between():
    """Readings 30 m apart, stations every 10 m: 80 and 70 m are crossed upward between the readings at 90 and 60 m."""
    _, crossed = walk([0.0, 30.0, 60.0, 90.0, 60.0])
    assert crossed[-3:] == [(1, 80.0), (1, 70.0), (1, 60.0)]


def test_the_station_at_the_collar_is_a_plain_zero():
    """Coming up to the collar gives station 0.0, not minus zero."""
    _, crossed = walk([0.0, 15.0, 0.0])
    assert [str(station) for _, station in crossed] == ["0.0", "10.0", "10.0", "0.0"]


@pytest.mark.parametrize("every", [0.1, 0.2, 0.3, 0.7, 1.1, 2.2, 3.3])
def test_stations_at_a_spacing_that_no_binary_number_holds_are_crossed_where_they_are_read(every):
    """Read to a decimetre, each station is closed at the very row that reads it, down and up, by rows and at once."""
    down = [number / 10.0 for number in range(661)]
    depth = np.array([*down, *down[::-1]])
    stations = [number * round(10 * every) / 10.0 for number in range(660 // round(10 * every) + 1)]
    expected = [(0, one) for one in stations] + [(1, one) for one in stations[::-1] if one < depth.max()]
    for cuts in ((), range(depth.size)):
        _, crossed = walk(depth, cuts, every=every)
        assert crossed == expected
    for stretch in Passes(0.02, 50.0).stretches(depth):
        for station, row in crossings(stretch, every, 100.0):
            assert stretch.extreme[row] == station


@pytest.mark.invariant
@given(
    steps=st.lists(st.floats(-30.0, 30.0).map(lambda x: round(x, 3)), min_size=1, max_size=60),
    cuts=st.sets(st.integers(1, 59)),
)
def test_passes_do_not_depend_on_how_depths_are_cut_into_blocks(steps, cuts):
    """Whole or in pieces: the same pass of every row, the same stations."""
    depth = np.clip(np.cumsum(steps), 0.0, 100.0)
    assert walk(depth, cuts) == walk(depth)


def test_many_turns_stay_cheap():
    """A depth that jumps to and fro at every row (rubbish) is still worked through: one pass a row."""
    depth = np.tile([10.0, 90.0], 5000)
    labels, _ = walk(depth)
    assert labels[-1][0] == 9998
