"""Several links on one clock: interpolation by hand, gaps, and independence of blocks and of the links' order."""

from itertools import pairwise

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from eastfall.io.join import GAP, Join
from eastfall.io.sitefile import LinkSettings
from eastfall.physics.errors import ParameterError
from eastfall.physics.readings import Readings

WINCH = LinkSettings(url="winch", columns=("depth_m",), latency=0.25)
PROBE = LinkSettings(url="probe", columns=("time_s", "tilt_a_deg", "tilt_b_deg"), latency=0.5)
WARMTH = LinkSettings(url="warmth", columns=("temperature_c", "azimuth_deg", "face_deg"))


def depths(*pairs: tuple[float, float]) -> Readings:
    """Return winch readings of (host time, depth)."""
    times, values = zip(*pairs, strict=True)
    return Readings.of(time=times, depth=values)


def tilts(*times: float) -> Readings:
    """Return probe readings at host times; tilt A is a hundredth of the time."""
    return Readings.of(time=np.array(times) + 7000.0, host_time=times, tilt_a=np.array(times) / 100.0)


def test_depth_is_taken_at_the_instant_of_the_tilt() -> None:
    """A tilt that arrived at 10.0 s, 0.5 s late, was taken at 9.5 s: depth between samples of 9.25 s and 9.75 s."""
    join = Join([WINCH, PROBE])
    assert len(join.push(1, tilts(10.0)).readings) == 0
    assert join.pending == 1
    joined = join.push(0, depths((9.5, 100.0), (10.0, 104.0)))
    assert joined.readings.depth.tolist() == [102.0]
    assert joined.readings.time.tolist() == [7010.0]
    assert joined.readings.host_time.tolist() == [10.0]
    assert joined.readings.column("tilt_a").tolist() == [0.1]


def test_a_gap_in_the_depth_is_a_fault_and_no_guess() -> None:
    """A tilt between depth samples further apart than the gap is missing its depth; those around it are not."""
    join = Join([WINCH, PROBE])
    join.push(0, depths((0.25, 1.0), (1.25, 2.0), (1.25 + GAP + 0.5, 9.0), (5.25, 10.0)))
    joined = join.push(1, tilts(1.0, 2.5, 5.0))
    assert joined.readings.host_time.tolist() == [1.0, 5.0]
    assert (joined.missing, joined.rejected.tolist()) == (1, [2.5])


def test_a_tilt_before_the_first_depth_is_missing_its_depth() -> None:
    """Nothing is extrapolated."""
    join = Join([WINCH, PROBE])
    join.push(1, tilts(0.6))
    joined = join.push(0, depths((1.0, 5.0)))
    assert (len(joined.readings), joined.missing) == (0, 1)
    assert join.close().rejected.tolist() == [0.6]


def test_a_depth_at_the_very_instant_needs_no_other() -> None:
    """A sample that falls on the tilt's instant is taken as it is, even after a gap."""
    join = Join([WINCH, PROBE])
    joined = join.push(1, tilts(10.5))
    joined = join.push(0, depths((10.25, 33.0)))
    assert joined.readings.depth.tolist() == [33.0]


def test_a_silent_partner_is_given_up_when_nothing_near_enough_can_come() -> None:
    """Waiting ends when the gap and the partner's latency have passed, not before; the end of the run ends it too."""
    join = Join([WINCH, PROBE])
    join.push(0, depths((0.3, 1.0)))
    join.push(1, tilts(1.0, 9.0))
    assert join.tick(0.5 + GAP + 0.25).missing == 0
    assert join.tick(0.51 + GAP + 0.25).rejected.tolist() == [1.0]
    assert join.close().rejected.tolist() == [9.0]


def test_other_channels_may_be_missing() -> None:
    """Without a temperature the reading goes on without it, and is counted."""
    join = Join([WINCH, PROBE, WARMTH])
    join.push(0, depths((0.25, 1.0), (1.25, 2.0)))
    join.push(1, tilts(1.0))
    found = join.close()
    assert found.readings.depth.tolist() == [1.5]
    assert np.isnan(found.readings.column("temperature")).all()
    assert (found.bare, found.missing) == (1, 0)


def test_azimuth_goes_the_short_way_round_and_a_face_is_held() -> None:
    """Between 350° and 10° lies 0°, and there is nothing between two faces."""
    join = Join([WINCH, PROBE, WARMTH])
    join.push(0, depths((0.25, 1.0), (1.25, 2.0)))
    turns = np.deg2rad([350.0, 10.0])
    join.push(2, Readings.of(time=[0.0, 1.0], azimuth=turns, face=[0.0, np.pi], temperature=[280.0, 290.0]))
    found = join.push(1, tilts(1.0)).readings
    assert np.sin(found.column("azimuth")[0]) == pytest.approx(0.0, abs=1e-15)
    assert found.column("face")[0] == 0.0
    assert found.column("temperature")[0] == 285.0


def test_one_link_is_handed_through() -> None:
    """With a single link nothing waits and nothing is changed."""
    whole = LinkSettings(url="-")
    block = Readings.of(time=[1.0], depth=[2.0], tilt_a=[0.0])
    joined = Join([whole]).push(0, block, np.array([7.0]))
    assert joined.readings is block
    assert joined.rejected.tolist() == [7.0]


def test_a_bad_line_waits_until_no_reading_from_before_it_can_follow() -> None:
    """A bad winch line of 2.0 s goes on behind the tilt of 1.9 s, whose depth comes only after it."""
    join = Join([WINCH, PROBE])
    join.push(0, depths((0.5, 1.0)))
    assert join.push(0, Readings.none(), np.array([2.0])).rejected.size == 0
    join.push(1, tilts(1.0, 1.9))
    assert join.tick(2.1).rejected.size == 0
    joined = join.push(0, depths((2.4, 5.0)))
    assert (joined.readings.host_time.tolist(), joined.rejected.tolist()) == ([1.0, 1.9], [2.0])
    join.push(0, depths((3.5, 6.0)), np.array([3.0]))
    assert join.tick(3.0).rejected.size == 0
    assert join.tick(3.1).rejected.tolist() == [3.0]


@pytest.mark.parametrize(
    ("links", "words"),
    [
        ([WINCH, WINCH], "exactly one link"),
        ([PROBE, PROBE], "exactly one link"),
        ([WINCH, WINCH, PROBE], "depth on more than one link"),
    ],
)
def test_links_that_contradict_each_other_are_refused(links: list[LinkSettings], words: str) -> None:
    """Two leaders, none, or two sources of one channel are no question of luck."""
    with pytest.raises(ParameterError, match=words):
        Join(links)


def _merge_order(
    draw: list[bool], first: list[Readings], second: list[Readings]
) -> list[tuple[int, Readings]]:
    queues, order = {0: list(first), 1: list(second)}, []
    for pick in [*draw, *([True] * len(first)), *([False] * len(second))]:
        link = int(not pick)
        if queues[link]:
            order.append((link, queues[link].pop(0)))
    return order


@pytest.mark.invariant
@settings(max_examples=100)
@given(
    winch=st.lists(st.integers(0, 30), min_size=1, max_size=15),
    probe=st.lists(st.integers(0, 30), min_size=1, max_size=15),
    cuts=st.tuples(st.lists(st.integers(1, 14), max_size=4), st.lists(st.integers(1, 14), max_size=4)),
    order=st.lists(st.booleans(), max_size=12),
)
def test_what_is_joined_does_not_depend_on_blocks_or_order(
    winch: list[int], probe: list[int], cuts: tuple[list[int], list[int]], order: list[bool]
) -> None:
    """Readings and missing ones are the same however each link is cut and however the links' blocks interleave."""
    samples = depths(*((0.2 * t, float(i)) for i, t in enumerate(sorted(winch))))
    led = tilts(*(0.2 * t for t in sorted(probe)))
    results = []
    for pieces, mixed in ((([], []), [True]), (cuts, order), (cuts, [])):
        parts = [_cut(block, places) for block, places in zip((samples, led), pieces, strict=True)]
        join = Join([WINCH, PROBE])
        found = [join.push(*one) for one in _merge_order(mixed, parts[0], parts[1])]
        found.append(join.close())
        joined = Readings.joined([one.readings for one in found])
        missing = [time for one in found for time in one.rejected.tolist()]
        assert len(joined) + len(missing) == len(led)
        results.append((joined.data.tobytes(), missing))
    assert results[0] == results[1] == results[2]


def _cut(block: Readings, places: list[int]) -> list[Readings]:
    edges = sorted({0, len(block), *(one % (len(block) + 1) for one in places)})
    return [block[a:b] for a, b in pairwise(edges)]
