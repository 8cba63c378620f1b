"""Halts: found when the depth rests for the hold, not when it creeps, and the same however rows are cut."""

import itertools

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from eastfall.physics.halts import BAND, HaltFinder

HOLD = 5.0


def rows(depth, rate=10.0, seed=0):
    """Give time, depth and two noisy slopes."""
    noise = np.random.default_rng(seed).normal(0.0, 1e-4, (2, depth.size))
    return np.stack([np.arange(depth.size) / rate, depth, 1e-3 + noise[0], -2e-3 + noise[1]])


def found(table, cuts=()):
    """Feed in pieces; give each halt with the row of the whole at which it was complete."""
    finder, halts = HaltFinder(HOLD), []
    for begin, end in itertools.pairwise([0, *sorted(cuts), table.shape[1]]):
        halts += [(begin + row, rest) for row, rest in finder.feed(table[:, begin:end])]
    return halts, finder


def stops(*lengths, speed=1.0, rate=10.0):
    """Give depths of a probe that rests for so many seconds every 4 m."""
    parts, at = [], 0.0
    for length in lengths:
        parts.append(np.full(round(length * rate), at))
        parts.append(at + speed * np.arange(1, round(4.0 / speed * rate) + 1) / rate)
        at += 4.0
    return np.concatenate(parts)


def test_rests_longer_than_the_hold_are_halts_and_shorter_ones_are_not():
    """Rests of 8, 3, 5.5 and 60 s with a hold of 5 s: three halts, one each, with their slopes and depths."""
    halts, _ = found(rows(stops(8.0, 3.0, 6.5, 60.0)))
    assert [round(rest.depth, 3) for _, rest in halts] == [0.0, 8.0, 12.0]
    for _, rest in halts:
        assert rest.seconds == pytest.approx(HOLD)
        assert rest.count == 51
        assert abs(rest.east.mean - 1e-3) <= 4.0 * rest.east.u
        assert abs(rest.north.mean + 2e-3) <= 4.0 * rest.north.u


@pytest.mark.invariant
def test_a_probe_that_rises_from_a_halt_halts_again_as_one_that_sinks_does():
    """The same stops upward: the next halt is found there too, at as many seconds."""
    table = rows(stops(8.0, 8.0, 8.0))
    upward = table.copy()
    upward[1] = 50.0 - table[1]
    downs, ups = found(table)[0], found(upward)[0]
    assert [row for row, _ in ups] == [row for row, _ in downs]
    assert [50.0 - rest.depth for _, rest in ups] == pytest.approx([rest.depth for _, rest in downs])


@pytest.mark.parametrize("speed", [0.01, 0.05, 0.5, 5.0])
def test_a_creeping_line_never_halts(speed):
    """Any speed that leaves the band within the hold is movement."""
    assert speed * HOLD > BAND
    assert found(rows(speed * np.arange(600) / 10.0))[0] == []


def test_a_breathing_rope_is_still_a_halt():
    """5 mm up and down at rest: a halt."""
    depth = 40.0 + 0.005 * np.sin(np.arange(100))
    assert len(found(rows(depth))[0]) == 1


def test_a_tilt_that_has_not_settled_makes_the_halt_wait():
    """A probe that swings out for 4 s after it stops: the halt is complete later, without the swing."""
    table = rows(np.full(150, 20.0))
    table[2] += 0.01 * np.exp(-table[0] / 1.0)
    ((row, rest),) = found(table)[0]
    assert table[0, row] > HOLD
    assert rest.east.mean == pytest.approx(1e-3, abs=2e-4)


def test_seconds_to_go_count_down_to_nothing():
    """While it rests, the hold less the time rested; None once it is complete, and while moving."""
    table = rows(stops(8.0))
    finder, told = HaltFinder(HOLD), []
    for at in range(table.shape[1]):
        finder.feed(table[:, at : at + 1])
        told.append(finder.to_go(float(table[0, at])))
    assert told[20] == pytest.approx(3.0)
    assert told[40] == pytest.approx(1.0)
    assert told[55] is None
    assert told[100] is None


@pytest.mark.invariant
@settings(deadline=None, max_examples=60)
@given(
    lengths=st.lists(st.floats(1.0, 12.0), min_size=1, max_size=4),
    speed=st.sampled_from([0.03, 0.3, 2.0]),
    cuts=st.sets(st.integers(1, 300), max_size=20),
)
def test_blocks_do_not_matter(lengths, speed, cuts):
    """Halts, rows and means to the last bit."""
    table = rows(stops(*lengths, speed=speed))
    whole, one = found(table)
    pieces, other = found(table, [cut for cut in cuts if cut < table.shape[1]])
    assert [(row, rest.east, rest.north, rest.time) for row, rest in pieces] == [
        (row, rest.east, rest.north, rest.time) for row, rest in whole
    ]
    now = float(table[0, -1])
    assert one.to_go(now) == other.to_go(now)
