"""Passes and a known end below the collar and on both axes: cases worked by hand, with thresholds on either side."""

from dataclasses import replace
from math import hypot, pi, sqrt

import numpy as np
import pytest

from eastfall.physics.combine import APART, END, best_estimate, closure, face_notes
from eastfall.physics.findings import FaceSums, Station
from eastfall.physics.settings import DEGREE, Guide, Instrument

DEPTHS = (20.0, 60.0, 100.0, 120.0)
RANDOM, ZERO, DEPTH, SCALE = "tilt, random", "tilt, zero", "depth", "tilt, scale"


def station(depth, passing, residual, parts=None, *, face=None, expected=(0.0, 0.0)):
    """Give a station with a residual (east, north) and parts by name, each (east, north)."""
    parts = parts or {RANDOM: (1e-4, 1e-4)}
    return Station(
        number=0,
        depth=depth,
        passing=passing,
        direction="up" if passing % 2 else "down",
        time=0.0,
        measured_east=residual[0] + expected[0],
        measured_north=residual[1] + expected[1],
        expected_east=expected[0],
        expected_north=expected[1],
        u_east=0.0,
        u_north=0.0,
        warning=0.015,
        action=0.025,
        verdict="within",
        readings=10,
        still=False,
        inputs=tuple(parts),
        parts=tuple(parts.values()),
        face=face,
    )


def parts_of(one):
    """Give the parts of a best estimate by name."""
    return dict(zip(one.inputs, one.parts, strict=True))


def two_passes(down, up, **more):
    """Give stations down at `DEPTHS` and up again, residuals in millimetres."""
    first = [station(z, 0, (e * 1e-3, n * 1e-3), **more) for z, (e, n) in zip(DEPTHS, down, strict=True)]
    second = [station(z, 1, (e * 1e-3, n * 1e-3), **more) for z, (e, n) in zip(DEPTHS, up, strict=True)]
    return (*first, *second[::-1])


def test_closure_is_told_on_both_axes_where_the_sum_began_with_an_offset():
    """Down began at (4, -3) mm, (1, 2) of it expected; up ends at (9, 5), (3, 7) of it: closure (5, 8), (2, 5)."""
    down = [station(20.0, 0, (3e-3, -5e-3), expected=(1e-3, 2e-3)), station(60.0, 0, (0.0, 0.0))]
    up = [station(60.0, 1, (0.0, 0.0)), station(20.0, 1, (6e-3, -2e-3), expected=(3e-3, 7e-3))]
    found = closure((*down, *up))
    assert (found.depth, found.east, found.north) == (20.0, pytest.approx(5e-3), pytest.approx(8e-3))
    assert (found.expected_east, found.expected_north) == (pytest.approx(2e-3), pytest.approx(5e-3))
    assert (found.misclosure_east, found.misclosure_north) == (pytest.approx(3e-3), pytest.approx(3e-3))


def test_only_the_first_pass_down_and_the_pass_up_after_it_count(shaft):
    """A third and a fourth pass, a centimetre aside, change neither closure nor best estimate."""
    first = two_passes([(0, 0), (1, 2), (2, 4), (3, 5)], [(0, 0), (1, 2), (2, 4), (3, 5)])
    later = tuple(station(z, passing, (0.01, 0.01)) for passing in (2, 3) for z in DEPTHS)
    assert closure(first + later) == closure(first)
    assert best_estimate(first + later, shaft(depth=130.0)) == best_estimate(first, shaft(depth=130.0))


def test_a_pass_up_is_tied_where_both_began_and_its_own_deepest_station_counts(shaft):
    """Down (5, 1), .. (8, 7) mm; up (2, -3) mm aside, and another (1, 4) mm at the bottom: half of that is taken."""
    down = [(5, 1), (6, 3), (7, 5), (8, 7)]
    up = [(7, -2), (8, 0), (9, 2), (11, 8)]
    best, _ = best_estimate(two_passes(down, up), shaft(depth=130.0))
    assert [one.east for one in best] == pytest.approx([5e-3, 6e-3, 7e-3, 8.5e-3], abs=1e-15)
    assert [one.north for one in best] == pytest.approx([1e-3, 3e-3, 5e-3, 9e-3], abs=1e-15)
    assert (best[-1].apart_east, best[-1].apart_north) == (pytest.approx(1e-3), pytest.approx(4e-3))


def test_two_common_stations_are_enough_and_one_is_not(shaft):
    """Of two depths an estimate, of one none."""
    both = (station(20.0, 0, (0, 0)), station(60.0, 0, (1e-3, 0)), station(20.0, 1, (0, 0)))
    assert [one.depth for one in best_estimate(both, shaft(depth=130.0))[0]] == [20.0, 60.0]
    assert best_estimate(both[::2], shaft(depth=130.0)) == ((), ())


def test_what_each_pass_gathers_for_itself_is_halved_as_independent_and_the_rest_stays(shaft):
    """Down 0.3 mm; up 0.5 mm at the top and 0.3 at 60 m, so 0.4 between: ½√(0.3² + 0.4²) = 0.25 mm. Latitude stays."""
    own = {RANDOM: (3e-4, 6e-4), "latitude": (7e-5, 8e-5)}
    top = {RANDOM: (5e-4, 10e-4), "latitude": (7e-5, 8e-5)}
    given = (
        station(20.0, 0, (0, 0), own),
        station(60.0, 0, (0, 0), own),
        station(60.0, 1, (0, 0), own),
        station(20.0, 1, (0, 0), top),
    )
    best, _ = best_estimate(given, shaft(depth=130.0))
    assert parts_of(best[1])[RANDOM] == pytest.approx((2.5e-4, 5e-4), rel=1e-12)
    assert parts_of(best[1])["latitude"] == (7e-5, 8e-5)
    assert best[1].u_east == pytest.approx(hypot(2.5e-4, 7e-5), rel=1e-12)


@pytest.mark.parametrize(("apart", "told"), [(2.99, False), (3.01, True)])
@pytest.mark.parametrize("axis", [0, 1])
def test_passes_disagree_beyond_three_times_what_their_difference_may_err(shaft, axis, apart, told):
    """Own parts of 0.3 mm down and 0.4 up make 0.5 mm of a difference, with 10 µm of grain: 3 of those is the bound."""
    own, top = {RANDOM: (3e-4, 3e-4)}, {RANDOM: (5e-4, 5e-4)}
    bound = 2.0 * hypot(2.5e-4, 1e-5)
    aside = [0.0, 0.0]
    aside[axis] = -apart * bound
    given = (
        station(20.0, 0, (0, 0), own),
        station(60.0, 0, (0, 0), own),
        station(60.0, 1, aside, own),
        station(20.0, 1, (0, 0), top),
    )
    best, notes = best_estimate(given, shaft(depth=130.0))
    assert (APART in best[1].inputs) is told
    assert notes == (("down and up pass disagree at 1 of 2 stations, first at 60 m",) if told else ())
    if told:
        assert parts_of(best[1])[APART][axis] == pytest.approx(0.5 * apart * bound)
        assert parts_of(best[0])[APART] == (0.0, 0.0)


def test_in_opposite_faces_a_zero_is_freed_from_the_difference_below_where_it_began(shaft):
    """Up and down differ by 0.2 mm a metre below 20 m: all zero, no disagreement; scale goes by what has been gone.

    The guide begins at (10, -20) mm, where it is known to: there is nothing for scale or azimuth to act on.
    """
    zero = [0.1 * (z - 20.0) for z in DEPTHS]
    parts = {RANDOM: (1e-5, 1e-5), ZERO: (1e-3, 1e-3), SCALE: (9.0, 9.0)}
    stations = tuple(
        replace(one, face=pi if one.passing else 0.0)
        for one in two_passes(
            [(10 + x, -20 - 2 * x) for x in zero], [(10 - x, -20 + 2 * x) for x in zero], parts=parts
        )
    )
    given = shaft(
        depth=130.0,
        guide=Guide(start_east=0.010, start_north=-0.020),
        instrument=Instrument(u_scale=0.01, u_azimuth=0.0),
    )
    best, notes = best_estimate(stations, given)
    assert notes == ()
    for one in best:
        assert (one.east, one.north) == pytest.approx((0.010, -0.020), abs=1e-12)
        assert parts_of(one)[ZERO] == (0.0, 0.0)
        assert parts_of(one)[SCALE] == pytest.approx((0.0, 0.0), abs=1e-12)


def tied(shaft, end, *, parts=None, depths=DEPTHS, residual=None):
    """Give the best estimate of one pass tied to an end (east, north) in millimetres, and the notes."""
    residual = residual or (lambda z: (2e-4 * z, -1e-4 * z))
    stations = tuple(station(z, 0, residual(z), parts(z) if parts else None) for z in depths)
    guide = Guide(end_east=end[0] * 1e-3, end_north=end[1] * 1e-3, u_end=1e-3)
    return best_estimate(stations, shaft(depth=130.0, guide=guide, instrument=Instrument(u_scale=0.0)))


def test_a_misclosure_is_spread_from_where_the_sum_began_on_both_axes(shaft):
    """20 to 120 m, end (20, -10) instead of (24, -12) mm: -4 and 2 mm by (z - 20)/100, the end's own 1 mm alike."""
    best, notes = tied(shaft, (20.0, -10.0))
    for one in best:
        t = (one.depth - 20.0) / 100.0
        assert (one.east, one.north) == pytest.approx(
            (2e-4 * one.depth - 4e-3 * t, -1e-4 * one.depth + 2e-3 * t), abs=1e-15
        )
        assert parts_of(one)[END] == pytest.approx((1e-3 * t, 1e-3 * t), abs=1e-18)
    assert notes[0] == (
        "tied to the known end at 120 m: 4.0 mm east and -2.0 mm north of misclosure spread over depth"
    )


def test_two_stations_of_one_pass_can_be_tied(shaft):
    """The end is the second."""
    best, _ = tied(shaft, (20.0, -10.0), depths=(20.0, 120.0))
    assert (best[1].east, best[1].north) == pytest.approx((0.020, -0.010), abs=1e-15)


@pytest.mark.parametrize("axis", [0, 1])
@pytest.mark.parametrize("sign", [1.0, -1.0])
@pytest.mark.parametrize(("factor", "told"), [(2.99, False), (3.01, True)])
def test_a_misclosure_beyond_three_times_what_the_end_may_err_is_told(shaft, axis, sign, factor, told):
    """The last station is known to 0.75 mm and the end to 1 mm: 1.25 mm together."""
    grown = lambda z: {RANDOM: (7.5e-4 * sqrt(z / 120.0),) * 2}  # noqa: E731
    end = [24.0, -12.0]
    end[axis] -= sign * factor * 1.25
    _, notes = tied(shaft, end, parts=grown)
    assert (len(notes) == 2) is told


def test_parts_that_follow_the_slope_are_taken_as_alike_by_how_near_the_end_is(shaft):
    """3 mm at 60 m and 5 at the end, t = 0.4: √(3² - 2·0.4·3·(0.4·5) + (0.4·5)²) = √8.2 mm; nothing at the end."""
    size = {20.0: 1e-3, 60.0: 3e-3, 100.0: 4e-3, 120.0: 5e-3}
    best, _ = tied(shaft, (24.0, -12.0), parts=lambda z: {DEPTH: (size[z], 2.0 * size[z])})
    middle, last = parts_of(best[1])[DEPTH], parts_of(best[3])[DEPTH]
    assert middle == pytest.approx((sqrt(8.2) * 1e-3, 2.0 * sqrt(8.2) * 1e-3), rel=1e-12)
    assert last == pytest.approx((0.0, 0.0), abs=1e-12)


@pytest.mark.independent
def test_the_alike_of_slopes_is_the_variance_of_a_difference():
    """Two unit errors correlated by t: 3 ε₁ - 2 ε₂ scatters by √8.2, by simulation to half a per cent."""
    rng, t = np.random.default_rng(4), 0.4
    one, other = rng.normal(size=(2, 100_000))
    assert np.std(3.0 * one - 2.0 * (t * one + sqrt(1.0 - t**2) * other)) == pytest.approx(
        sqrt(8.2), rel=0.01
    )


def test_other_parts_keep_what_a_line_to_the_end_leaves_with_its_sign(shaft):
    """1 mm at 60 m and 5 at the end: 1 - 0.4·5 is a millimetre the other way."""
    size = {20.0: 0.0, 60.0: 1e-3, 100.0: 4e-3, 120.0: 5e-3}
    best, _ = tied(shaft, (24.0, -12.0), parts=lambda z: {"latitude": (size[z], 0.0)})
    assert parts_of(best[1])["latitude"] == (pytest.approx(-1e-3), 0.0)


def test_scale_acts_on_what_is_no_straight_line_to_the_end(shaft):
    """An arc of 6 mm between two ends that scale cannot move: a thousandth of the arc stays, and none of the line."""
    arc = {20.0: 0.0, 60.0: 6e-3, 100.0: 4e-3, 120.0: 0.0}
    stations = tuple(station(z, 0, (3e-3 + arc[z] + 1e-4 * z, 0.0)) for z in DEPTHS)
    guide = Guide(start_east=0.005, end_east=0.015, end_north=0.0, u_end=0.0)
    instrument = Instrument(u_scale=1e-3, u_azimuth=2e-3)
    best, _ = best_estimate(stations, shaft(depth=130.0, guide=guide, instrument=instrument))
    for one in best:
        parts = parts_of(one)
        assert parts[SCALE] == pytest.approx((1e-3 * arc[one.depth], 0.0), abs=1e-12)
        assert parts["azimuth"] == pytest.approx((0.0, -2e-3 * arc[one.depth]), abs=1e-12)


def faces(zero, u, suspect=0):
    """Give face sums with zeros and their uncertainty [rad], and so many suspect depths."""
    depth = tuple(float(z) for z in range(1, 21))
    return FaceSums(
        depth=depth,
        sum_a=(0.0,) * 20,
        sum_b=(0.0,) * 20,
        suspect=tuple(z <= suspect for z in depth),
        mean_a=0.0,
        mean_b=0.0,
        spread_a=0.0,
        spread_b=0.0,
        zero_a=zero[0],
        zero_b=zero[1],
        u_zero_a=u,
        u_zero_b=u,
        unpaired=0,
    )


@pytest.mark.parametrize(("factor", "told"), [(2.99, False), (3.01, True), (-3.01, True), (np.nan, False)])
def test_a_zero_that_faces_show_is_told_beyond_three_times_what_was_stated(factor, told):
    """Stated to 0.003°, shown to 0.004°: 0.005° together; on axis B."""
    zero = factor * 0.005 * DEGREE
    notes = face_notes(faces((0.0, zero), 0.004 * DEGREE), Instrument(u_zero=0.003 * DEGREE))
    assert (len(notes) == 1) is told
    if told:
        assert f"a zero on B of {factor * 0.005:.4f} ± 0.0080°" in notes[0]


@pytest.mark.parametrize(("suspect", "more"), [(8, ""), (9, " and 1 more"), (12, " and 4 more")])
def test_of_suspect_depths_eight_are_named_and_the_others_counted(suspect, more):
    """Eight fit."""
    (note,) = face_notes(faces((0.0, 0.0), 1.0, suspect), Instrument())
    assert note == f"face sums stand apart at 1, 2, 3, 4, 5, 6, 7, 8{more} m"
