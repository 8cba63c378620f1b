"""What a station of a guided run says beside its offset: lean, clearance, rests and marks on the line."""

from dataclasses import replace

import numpy as np
import pytest
import truth_help
from survey_help import journey, run
from truth_help import DEPTH, capture

from eastfall.physics.readings import Readings
from eastfall.physics.settings import Depth, Guide, Instrument, Limits
from eastfall.physics.survey import Survey


def test_lean_between_stations_is_judged_with_its_own_uncertainty(shaft):
    """1 mm/m between stations 10 m apart: over 0.8, within 1.3, undecided at 1.0; the first of a pass has none."""
    readings = journey(depth=60.0, speed=1.0, lean=(6e-4, 8e-4), seed=13)
    for limit, word in ((0.0008, "over"), (0.0013, "within"), (0.001, "undecided")):
        survey, _ = run(shaft(depth=60.0, limits=Limits(lean=limit)), readings)
        first, *others = survey.result().stations[:7]
        assert first.lean is None
        assert first.lean_verdict is None
        assert {one.lean_verdict for one in others} == {word}
        for one in others:
            assert one.lean == pytest.approx(1e-3, abs=4.0 * one.u_lean)
            # A zero carries every metre alike, and its 0.001° is the larger part of what is not known.
            assert 1.7e-5 < one.u_lean < 4e-5


@pytest.mark.independent
def test_the_azimuth_and_the_scales_count_in_a_lean_as_in_what_was_gone_between_two_stations(shaft):
    """By hand: of a straight guide an azimuth known to 0.02 turns each metre of lean across it, and makes it no longer.

    A scale of 2 % on both axes, A along the lean, makes it 2 % longer or shorter.
    """
    still = {"u_tilt": 0.0, "u_zero": 0.0, "u_depth_fraction": 0.0}
    site = replace(shaft().site, u_latitude=0.0, u_elevation=0.0, u_gravity=0.0, u_deflection=0.0)
    toward = np.arctan2(6e-3, 8e-3)
    for stated, u in (
        ({"u_azimuth": 0.02, "u_scale": 0.0}, 0.0),
        ({"u_azimuth": 0.0, "u_scale": 0.02}, 2e-4),
    ):
        instrument = Instrument(a_azimuth=toward, **still, **stated)
        readings = journey(depth=60.0, speed=1.0, lean=(6e-3, 8e-3), azimuth=toward)
        survey, _ = run(shaft(depth=60.0, site=site, instrument=instrument), readings)
        # From 20 to 40 m, where the winch neither speeds up nor slows down; the lean of the moving line is left.
        assert survey.result().stations[2].u_lean == pytest.approx(u, abs=1e-6)


def test_lean_is_none_of_the_verdict_where_no_limit_is_given(shaft):
    """Lean and clearance are always told; their verdicts only where the site has a limit."""
    survey, _ = run(shaft(depth=60.0), journey(depth=60.0, speed=1.0, lean=(1e-3, 0.0)))
    second = survey.result().stations[1]
    assert second.lean == pytest.approx(1e-3, rel=1e-3)
    assert second.clearance == pytest.approx(3.0 - 0.01, abs=1e-4)
    assert (second.lean_verdict, second.clearance_verdict) == (None, None)


def test_clearance_has_a_guard_band_of_its_own(shaft):
    """3 m of radius less a lean of 3 mm/m, 2.85 m wanted: within above, undecided about, over below 50 m."""
    limits = Limits(wall_clearance=2.85, action=9.0, warning=9.0)
    survey, _ = run(shaft(depth=80.0, limits=limits), journey(depth=80.0, speed=1.0, lean=(3e-3, 0.0)))
    down = [one for one in survey.result().stations if one.direction == "down"]
    assert [one.clearance_verdict for one in down] == ["within"] * 5 + ["undecided"] + ["over"] * 3
    for one in down:
        assert one.clearance == pytest.approx(3.0 - 3e-3 * one.depth, abs=2e-4)
        assert one.u_clearance == pytest.approx(one.u_east, rel=1e-6)


def test_a_rest_renews_the_station_there_and_counts_the_seconds_down(shaft):
    """Twelve seconds at the bottom: "hold still" until the fifth, then one station at rest, its readings counted."""
    readings = capture(14, rest=12.0)
    survey = Survey(shaft(depth=DEPTH))
    stopped = int(np.argmax(readings.depth))
    survey.feed(readings[: stopped + 15])
    assert survey.standing().hold_still == pytest.approx(3.6, abs=0.8)
    survey.feed(readings[stopped + 15 :])
    assert survey.standing().hold_still is None
    still = [one for one in survey.result().stations if one.still]
    assert [(one.depth, one.number, one.readings) for one in still] == [(DEPTH, 12, 51)]
    slope = truth_help.Guide().slope(np.array([DEPTH]))[:, 0]
    assert (still[0].halt.east, still[0].halt.north) == pytest.approx(tuple(slope), abs=3e-5)
    assert still[0].halt.scatter_east == pytest.approx(3.5e-5, rel=0.4)


def test_marks_on_the_line_move_readings_to_their_true_depth(shaft):
    """A counter that shows 0.42 m too much at 100 m: put right by one mark, the stations are where they should be."""
    readings = capture(16)
    shown = Readings(readings.data.copy())
    shown.data[2] *= 1.0042
    right, _ = run(shaft(depth=DEPTH), readings)
    marked, _ = run(replace(shaft(depth=DEPTH), depth=Depth(marks=((100.0, 100.42),))), shown)
    for one, other in zip(right.result().stations, marked.result().stations, strict=True):
        assert other.depth == one.depth
        assert other.residual_east == pytest.approx(one.residual_east, abs=1e-9)


@pytest.mark.parametrize("blocks", [(), tuple(range(1, 31 * 16)), (5, 8, 9, 100)])
def test_both_faces_read_at_each_halt_free_the_sum_of_the_zero(shaft, blocks):
    """Eight readings a face at halts 10 m apart, zeros of 0.05° and -0.03°: 262 mm in one face, nothing in both.

    True tilt is (a0 - a180)/2; Mikkelsen, P. E. (2007), short course on inclinometer data.
    """
    halts, turned = np.repeat(np.arange(31), 16), np.tile(np.repeat([False, True], 8), 31)
    zero_a, zero_b, sign = np.radians(0.05), np.radians(-0.03), np.where(turned, -1.0, 1.0)
    readings = Readings.of(
        time=halts * 22.0 + np.tile(np.arange(16.0), 31),
        depth=halts * 10.0,
        tilt_a=zero_a + sign * 1e-3,
        tilt_b=zero_b - sign * 5e-4,
        face=np.where(turned, np.pi, 0.0),
    )
    survey, _ = run(shaft(latitude=0.0, guide=Guide(readings="still")), readings, blocks)
    result = survey.result()
    last = result.stations[-1]
    assert (last.depth, last.still) == (300.0, True)
    # The slope as the tilts give it: 1 mrad north and 0.5 mrad west.
    assert (last.residual_east, last.residual_north) == pytest.approx((-0.15, 0.3), abs=1e-6)
    assert (result.faces.zero_a, result.faces.zero_b) == pytest.approx((zero_a, zero_b), abs=1e-9)
    assert any("the faces show a zero on A of 0.0500" in one for one in result.notes)
