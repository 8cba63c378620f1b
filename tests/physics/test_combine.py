"""Passes and a known end put together: hand-worked cases, and the variance by Monte Carlo."""

from dataclasses import replace

import numpy as np
import pytest

from eastfall.physics.combine import APART, END, best_estimate, closure
from eastfall.physics.findings import Station
from eastfall.physics.settings import Guide, Instrument

DEPTHS = (0.0, 20.0, 40.0, 60.0, 80.0, 100.0)


def station(number, depth, direction, residual, random, zero, face=0.0):
    """Give a station of one pass with a residual east, a random and a zero part."""
    return Station(
        number=number,
        depth=depth,
        passing=0 if direction == "down" else 1,
        direction=direction,
        time=0.0,
        measured_east=residual - 0.01,
        measured_north=0.0,
        expected_east=-0.01,
        expected_north=0.0,
        u_east=np.hypot(random, zero),
        u_north=1e-4,
        warning=0.015,
        action=0.025,
        verdict="within",
        readings=10,
        still=False,
        inputs=("tilt, random", "tilt, zero", "latitude"),
        parts=((random, 0.0), (zero, 0.0), (3e-5, 1e-4)),
        face=face,
    )


def passes(down, up, *, random=4e-4, zero=1e-5, opposite=False):
    """Give stations of a pass down and one up, the random part growing as a walk."""
    found = []
    for at, z in enumerate(DEPTHS):
        found.append(station(at, z, "down", down[at], random * np.sqrt(z / 100.0), zero * z))
    for at, z in list(enumerate(DEPTHS))[-2::-1]:
        walked = random * np.sqrt((200.0 - z) / 100.0)
        lever = 200.0 - z if opposite else z
        found.append(station(len(found), z, "up", up[at], walked, zero * lever, np.pi if opposite else 0.0))
    return tuple(found)


GROWN = [1e-4 * z for z in DEPTHS]


def test_the_pass_up_is_tied_at_the_collar_and_the_mean_taken(shaft):
    """Down as it is, up 1 mm aside all along: the millimetre is misclosure, and the best estimate is the pass down."""
    up = [one + 1e-3 for one in GROWN]
    best, notes = best_estimate(passes(GROWN, up), shaft(depth=100.0))
    assert [one.depth for one in best] == list(DEPTHS)
    # The turning point is of both passes: the millimetre there is the whole of what they differ by.
    assert [one.east for one in best[:-1]] == pytest.approx(GROWN[:-1], abs=1e-15)
    assert [one.apart_east for one in best[:-1]] == pytest.approx([0.0] * 5, abs=1e-15)
    assert notes == ()


@pytest.mark.independent
@pytest.mark.parametrize("draws", [1000, pytest.param(16_000, marks=pytest.mark.soak)])
@pytest.mark.parametrize("opposite", [False, True])
def test_uncertainty_of_the_mean_is_that_of_a_monte_carlo(shaft, opposite, draws):
    """Walks down and up and a zero of either face, drawn often: the scatter of the best estimate is its stated u."""
    rng = np.random.default_rng(1)
    depth = np.array(DEPTHS)
    errors = []
    for _ in range(draws):
        steps = rng.normal(0.0, 4e-4 * np.sqrt(0.2), (2, 5))
        zero = rng.normal(0.0, 1e-5)
        down = np.concatenate([[0.0], np.cumsum(steps[0])]) + zero * depth
        gone_up = np.concatenate([[0.0], np.cumsum(steps[1])])[::-1]
        up = down[-1] + gone_up + zero * ((100.0 - depth) if opposite else -(100.0 - depth))
        best, _ = best_estimate(passes(down, up, opposite=opposite), shaft(depth=100.0))
        errors.append([one.east for one in best])
    stated, _ = best_estimate(passes([0.0] * 6, [0.0] * 6, opposite=opposite), shaft(depth=100.0))
    own = [
        float(
            np.sqrt(sum(one.parts[one.inputs.index(name)][0] ** 2 for name in ("tilt, random", "tilt, zero")))
        )
        for one in stated
    ]
    # n draws give a standard deviation to 1/√(2n), 1000 to 2.2 %; four times that.
    np.testing.assert_allclose(np.std(errors, axis=0)[1:], own[1:], rtol=4.0 / np.sqrt(2.0 * draws))


def test_a_zero_does_not_make_opposite_faces_disagree_but_a_step_does(shaft):
    """40 mm of misclosure in proportion to depth is a zero; 5 mm from 40 m on in one pass is a fault, and counted."""
    zero = [4e-4 * z for z in DEPTHS]
    up = [0.04 + 0.04 - one for one in zero]
    best, notes = best_estimate(passes(zero, up, opposite=True), shaft(depth=100.0))
    assert [one.east for one in best] == pytest.approx([0.0] * 6, abs=1e-12)
    assert notes == ()
    step = [0.0, 0.0, 5e-3, 5e-3, 5e-3, 5e-3]
    best, notes = best_estimate(passes(step, [0.0] * 6), shaft(depth=100.0))
    assert "disagree" in notes[0]
    middle = best[3]
    assert middle.parts[middle.inputs.index(APART)][0] == pytest.approx(2.5e-3)
    assert abs(middle.east - 2.5e-3) < 1e-12


def test_one_pass_without_a_known_end_has_no_best_estimate(shaft):
    """There is nothing to put together."""
    one = tuple(s for s in passes(GROWN, GROWN) if s.direction == "down")
    assert best_estimate(one, shaft(depth=100.0)) == ((), ())
    assert closure(one) is None


def test_a_known_end_takes_what_grows_with_depth_and_bridges_what_walks(shaft):
    """End at 4 mm instead of 10: linear; zero part gone, random part √(z(Z - z))/Z of a walk, the end's own by z/Z."""
    down = tuple(s for s in passes(GROWN, GROWN, zero=1e-4) if s.direction == "down")
    tied = shaft(depth=100.0, guide=Guide(end_east=4e-3, end_north=0.0, u_end=5e-4))
    best, notes = best_estimate(down, tied)
    assert [one.east for one in best] == pytest.approx([4e-5 * z for z in DEPTHS], abs=1e-15)
    for one in best:
        parts = dict(zip(one.inputs, one.parts, strict=True))
        t = one.depth / 100.0
        assert parts["tilt, zero"][0] == pytest.approx(0.0, abs=1e-15)
        assert parts["tilt, random"][0] == pytest.approx(4e-4 * np.sqrt(t * (1.0 - t)), abs=1e-12)
        assert parts[END] == pytest.approx((5e-4 * t, 5e-4 * t))
        # Whatever erred at the end is in the misclosure, an error of what is expected too.
        assert parts["latitude"] == pytest.approx((3e-5 * (1.0 - t), 1e-4 * (1.0 - t)), abs=1e-15)
    assert (best[-1].u_east, best[-1].u_north) == pytest.approx((5e-4, 5e-4), rel=1e-9)
    assert "6.0 mm east" in notes[0]
    assert all(one.tied and one.passes == 1 for one in best)
    calm = replace(tied, guide=replace(tied.guide, end_east=-0.09))
    assert "larger than three times" in best_estimate(down, calm)[1][1]


def guides(east, north, expected=(3e-5, -1e-4)):
    """Give the stations of two passes with residuals, a random part, and one cause that moves east and north."""
    found = []
    for one in passes(east, east):
        at = DEPTHS.index(one.depth)
        parts = (*one.parts[:2], tuple(p * one.depth / 100.0 for p in expected))
        moved = one.expected_north + north[at]
        together = {"correlations": (0.0, 0.0, 1.0), "covariance": parts[2][0] * parts[2][1]}
        found.append(replace(one, measured_north=moved, parts=parts, **together))
    return tuple(found)


def test_the_covariance_of_what_both_passes_share_stays_and_an_end_takes_what_grows_with_depth(shaft):
    """By hand: one cause of 30 µm east and -100 µm north at 100 m stays in the mean of two passes: -3000 µm² z²/Z².

    A known end takes it whole, as it grows in proportion to depth; its own two coordinates are independent.
    """
    plain = replace(shaft(depth=100.0), instrument=Instrument(u_scale=0.0, u_azimuth=0.0))
    best, _ = best_estimate(guides(GROWN, GROWN), plain)
    assert [one.covariance for one in best] == pytest.approx(
        [-3e-9 * (z / 100.0) ** 2 for z in DEPTHS], abs=1e-20
    )
    tied = replace(plain, guide=Guide(end_east=1e-3, end_north=0.0, u_end=5e-4))
    best, _ = best_estimate(guides(GROWN, GROWN), tied)
    assert [one.covariance for one in best] == pytest.approx([0.0] * 6, abs=1e-20)


def test_the_azimuth_counts_in_a_tied_estimate_with_what_of_it_is_no_straight_line(shaft):
    """A bow of 10 mm east and as much north between ends that are known: turned by u, east and north err oppositely."""
    bow = [4e-6 * z * (100.0 - z) for z in DEPTHS]
    tied = shaft(
        depth=100.0,
        instrument=Instrument(u_scale=0.0, u_azimuth=0.02),
        guide=Guide(end_east=0.0, end_north=0.0, u_end=0.0),
    )
    best, _ = best_estimate(guides(bow, bow, (0.0, 0.0)), tied)
    assert [one.covariance for one in best] == pytest.approx([-((0.02 * one) ** 2) for one in bow], abs=1e-20)


def test_passes_that_disagree_leave_the_truth_along_what_parts_them(shaft):
    """3 mm east and 4 mm north of fault in one pass: half of each to either side, as one cause."""
    plain = replace(shaft(depth=100.0), instrument=Instrument(u_scale=0.0, u_azimuth=0.0))
    stations = guides(GROWN, GROWN, (0.0, 0.0))
    off = [
        replace(one, measured_east=one.measured_east + 3e-3, measured_north=one.measured_north + 4e-3)
        if one.passing == 1 and one.depth == 60.0
        else one
        for one in stations
    ]
    best, notes = best_estimate(tuple(off), plain)
    assert "disagree" in notes[0]
    assert best[3].covariance == pytest.approx(1.5e-3 * 2e-3)


def test_closure_is_up_less_down_and_its_misclosure_what_the_line_does_not_explain():
    """1 mm more on the way up, with the same expected offset: a millimetre of misclosure."""
    found = closure(passes(GROWN, [one + 1e-3 for one in GROWN]))
    assert (found.depth, found.misclosure_east) == (0.0, pytest.approx(1e-3))
    assert found.misclosure_north == 0.0


def test_other_kinds_have_no_best_estimate(shaft):
    """Marks and levels are no passes."""
    given = replace(shaft("hung", depth=100.0), instrument=Instrument())
    assert best_estimate(passes(GROWN, GROWN), given) == ((), ())
