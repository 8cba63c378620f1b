"""Spikes of tilt: found, few rows lost at a true bend, and the same however the rows are cut."""

import itertools
from math import radians

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from eastfall.physics.readings import Readings
from eastfall.physics.spikes import TiltSpikes
from eastfall.physics.survey import Survey


def ride(count=400, seed=1):
    """Give readings of a guide that leans 0.1°, every 0.4 m, with noise of 0.002°."""
    rng = np.random.default_rng(seed)
    tilt = radians(0.1) + rng.normal(0.0, radians(0.002), (2, count))
    return Readings.of(
        time=0.2 * np.arange(count), depth=0.4 * np.arange(count), tilt_a=tilt[0], tilt_b=tilt[1]
    )


def test_single_spikes_of_three_to_twenty_degrees_are_found_and_nothing_else():
    """Fifteen knocked rows among four hundred: those fifteen."""
    readings = ride()
    at = np.random.default_rng(2).choice(np.arange(10, 390, 3), 15, replace=False)
    readings.data[3, at] += np.radians(np.linspace(3.0, 20.0, 15))
    flags = TiltSpikes(radians(1.0)).feed(readings)
    assert np.flatnonzero(flags).tolist() == sorted(at.tolist())


def test_a_calm_guide_has_no_spikes():
    """Noise and a slow lean are none."""
    assert TiltSpikes(radians(1.0)).feed(ride()) is None


def test_a_true_bend_costs_three_rows():
    """A guide that goes over to another lean by 2° at once: the first three rows behind the bend are left aside."""
    readings = ride()
    readings.data[3, 200:] += radians(2.0)
    assert np.flatnonzero(TiltSpikes(radians(1.0)).feed(readings)).tolist() == [200, 201, 202]


def test_readings_far_apart_say_nothing_of_each_other():
    """Stations every 10 m with tilts that differ by 5°: none is a spike."""
    tilt = np.radians(np.tile([0.0, 5.0], 20))
    readings = Readings.of(time=np.arange(40.0), depth=10.0 * np.arange(40), tilt_a=tilt, tilt_b=tilt)
    assert TiltSpikes(radians(1.0)).feed(readings) is None


def test_one_knocked_row_does_not_move_the_sum(shaft):
    """+5° in one row at 80 m: every station stays where it is without it, to three times the noise over a step."""
    clean, knocked = ride(), ride()
    knocked.data[3:5, 200] += radians(5.0)
    results = []
    for readings in (clean, knocked):
        survey = Survey(shaft())
        survey.feed(readings)
        survey.close(80.0)
        results.append(survey)
    for one, other in zip(*(survey.result().stations for survey in results), strict=True):
        assert other.residual_east == pytest.approx(one.residual_east, abs=3 * 0.4 * radians(0.002))
        assert other.residual_north == pytest.approx(one.residual_north, abs=3 * 0.4 * radians(0.002))
    assert any("stood apart" in note for note in results[1].standing().notes)


@pytest.mark.invariant
@given(cuts=st.sets(st.integers(1, 399)), at=st.sets(st.integers(0, 399), max_size=30))
def test_spikes_do_not_depend_on_how_the_rows_are_cut(cuts, at):
    """Whole or in pieces: the same rows."""
    readings = ride()
    readings.data[3, list(at)] += radians(4.0)
    readings.data[4, list(at)[:2]] = np.nan
    readings.data[2, list(at)[2:4]] = np.nan
    whole = TiltSpikes(radians(1.0)).feed(readings)
    pieces, spikes = [], TiltSpikes(radians(1.0))
    for begin, end in itertools.pairwise([0, *sorted(cuts), 400]):
        flags = spikes.feed(readings[begin:end])
        pieces.append(np.zeros(end - begin, bool) if flags is None else flags)
    np.testing.assert_array_equal(np.concatenate(pieces), np.zeros(400, bool) if whole is None else whole)
