"""Faces: sums by depth from a stream, against the same sums worked out at once."""

import numpy as np
import pytest
from truth_help import DEPTH, Errors, Guide, capture

from eastfall.physics.faces import FaceBins, face_of
from eastfall.physics.readings import CHANNELS
from eastfall.physics.settings import Instrument
from eastfall.physics.survey import Survey


@pytest.mark.parametrize(
    ("degrees", "side"),
    [
        (0.0, 0),
        (180.0, 1),
        (-180.0, 1),
        (360.0, 0),
        (540.0, 1),
        (5.0, 0),
        (175.0, 1),
        (3600.0, 0),
        (-7380.0, 1),
    ],
)
def test_a_face_is_nought_or_half_a_turn(degrees, side):
    """Whole and half turns, a little off, in either sense."""
    assert face_of(np.radians([degrees]))[0] == side


def test_a_quarter_turn_is_neither_face():
    """90° is no face, and no face is none."""
    assert np.isnan(face_of(np.array([np.pi / 2.0, np.nan]))).all()


@pytest.mark.independent
def test_sums_are_those_of_means_weighted_by_path():
    """A made-up tilt in two faces: face sums are those of numpy's averages, the zero is half their mean."""
    rng = np.random.default_rng(1)
    depth = np.sort(rng.uniform(0.0, 100.0, 4000))
    weight = rng.uniform(0.1, 0.3, depth.size)
    face = np.where(rng.random(depth.size) < 0.5, 0.0, np.pi)
    sign = np.where(face == 0.0, 1.0, -1.0)
    tilts = np.stack([2e-4 + sign * 1e-3, -1e-4 + sign * 5e-4]) + rng.normal(0.0, 1e-5, (2, depth.size))
    bins = FaceBins(10.0, 110.0)
    for part in np.array_split(np.arange(depth.size), 7):
        bins.add(depth[part], weight[part], tilts[:, part], face[part])
    sums = bins.sums(1e-5)
    for at, z in enumerate(sums.depth):
        here = np.rint(depth / 10.0) * 10.0 == z
        one, other = (
            np.average(tilts[0, here & (face == side)], weights=weight[here & (face == side)])
            for side in (0.0, np.pi)
        )
        assert sums.sum_a[at] == pytest.approx(one + other, abs=1e-15)
    assert sums.depth == tuple(np.arange(0.0, 101.0, 10.0))
    assert abs(sums.zero_a - 2e-4) <= 4.0 * sums.u_zero_a
    assert abs(sums.zero_b + 1e-4) <= 4.0 * sums.u_zero_b
    assert sums.suspect_depths == ()


def test_the_deepest_station_has_a_bin_of_its_own():
    """Every 10 m down to 100: readings at 90 and at 100 m are two depths, not one."""
    depth = np.repeat([90.0, 100.0], 2)
    bins = FaceBins(10.0, 100.0)
    bins.add(depth, np.ones(4), np.zeros((2, 4)), np.tile([0.0, np.pi], 2))
    assert bins.sums(1e-5).depth == (90.0, 100.0)


def test_a_sum_is_suspect_beyond_what_its_own_readings_explain():
    """Hundred readings of 10 µrad in a bin leave 1 of a mean and √2 of a sum: 3.5 of those are 4.95 µrad."""
    depth, face = np.repeat(np.arange(0.0, 60.0, 10.0), 200), np.tile([0.0, np.pi], 600)
    for off, told in ((4.9e-6, ()), (5.0e-6, (30.0,))):
        tilts = np.zeros((2, depth.size))
        tilts[0, (depth == 30.0) & (face == 0.0)] = off
        bins = FaceBins(10.0, 60.0)
        bins.add(depth, np.ones(depth.size), tilts, face)
        assert bins.sums(1e-5).suspect_depths == told


def surveyed(shaft, readings, **changes):
    """Give the result of a capture."""
    survey = Survey(shaft(depth=DEPTH, **changes), feed_watched=False)
    survey.feed(readings)
    survey.close(float("nan"))
    return survey.result()


def test_one_face_alone_has_no_sums(shaft):
    """Readings that all say face 0, or none: no sums, and an unpaired face is not a pair."""
    readings = capture(1)
    assert surveyed(shaft, readings).faces is None
    readings.data[CHANNELS.index("face")] = 0.0
    assert surveyed(shaft, readings).faces is None


@pytest.mark.invariant
def test_a_face_turns_the_a_axis_and_an_azimuth_that_is_read_says_so_itself(shaft):
    """The same ride told by a face column or by the azimuth read: the same residuals, to the noise of neither."""
    readings = capture(2, faces=True)
    face = readings.column("face").copy()
    by_azimuth = readings.data.copy()
    by_azimuth[CHANNELS.index("azimuth")] = face
    by_azimuth[CHANNELS.index("face")] = np.nan
    one = surveyed(shaft, readings).stations
    other = surveyed(shaft, type(readings)(by_azimuth)).stations
    for first, second in zip(one, other, strict=True):
        assert second.residual_east == pytest.approx(first.residual_east, abs=1e-12)
        assert second.u_east == pytest.approx(first.u_east, rel=1e-9, abs=1e-15)
    up = next(one for one in one if one.direction == "up" and one.depth == 60.0)
    true = Guide().offset(np.array([60.0]))[:, 0]
    assert abs(up.residual_east - true[0]) <= 3.0 * up.u_east


def test_a_zero_in_opposite_faces_is_known_to_grow_on_the_way_up(shaft):
    """The zero has carried the sum by its 120 m down and 120 m up: its part at the collar is 240 m of it."""
    instrument = Instrument(u_zero=1e-5)
    result = surveyed(shaft, capture(3, Errors(zero_a=1e-5), faces=True), instrument=instrument)
    last = result.stations[-1]
    assert (last.depth, last.direction) == (0.0, "up")
    part = last.parts[last.inputs.index("tilt, zero")]
    # The ride ends 5 mm short of the collar, which counts as having reached it.
    assert part == pytest.approx((2.4e-3, 2.4e-3), abs=0.005 * 1e-5 * 1.01)
    best = result.best[6]
    assert best.parts[best.inputs.index("tilt, zero")] == (0.0, 0.0)
