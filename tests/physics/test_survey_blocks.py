"""Findings do not depend on how the rows are cut into blocks."""

import numpy as np
import pytest
from hypothesis import HealthCheck, given, settings
from hypothesis import strategies as st
from survey_help import journey, run, swinging
from truth_help import DEPTH, capture

from eastfall.physics.findings import ROW_FIELDS
from eastfall.physics.readings import Readings
from eastfall.physics.settings import Guide, Instrument
from eastfall.physics.survey import JUMP, Survey


def marks():
    """Give landing marks at three levels in turn."""
    rng = np.random.default_rng(9)
    count = 60
    east, north = rng.normal(0.02, 0.004, (2, count))
    return Readings.of(
        time=np.arange(count) * 20.0, depth=np.tile([30.0, 60.0, 80.0], 20), east=east, north=north
    )


EVERY_KIND = {
    "guided": journey(depth=90.0, seed=4, lean=(3e-4, 0.0)),
    "hung": swinging(),
    "drop": marks(),
}


@pytest.mark.invariant
@settings(deadline=None, max_examples=20, suppress_health_check=[HealthCheck.function_scoped_fixture])
@given(cuts=st.sets(st.integers(1, 1999), max_size=12), kind=st.sampled_from(["guided", "hung", "drop"]))
def test_findings_do_not_depend_on_how_the_rows_are_cut_into_blocks(shaft, cuts, kind):
    """Rows, stations, alarms, closure and rest point are the same to the last bit, whole or in pieces."""
    assumptions, readings = shaft(kind, depth=90.0), EVERY_KIND[kind]
    whole, rows = run(assumptions, readings)
    pieces, other = run(assumptions, readings, [one for one in cuts if one < len(readings)])
    np.testing.assert_array_equal(other, rows)
    assert pieces.result() == whole.result()


def troubled():
    """Give a ride in two faces with rests, spikes, a jump, a frozen stretch, lost rows and rows without tilt."""
    readings = capture(5, faces=True, rest=14.0)
    data = readings.data
    data[0:2, 900:] += 3.0
    data[2, 150:153] += 40.0
    data[2, 1100:] += 2.5
    data[3:5, 300:340] = data[3:5, 299:300]
    data[3, 420:440] = np.nan
    data[3, 700] = 1.4
    return Readings(np.delete(data, np.r_[480:520, 1000], axis=1))


TROUBLED = troubled()


@pytest.mark.invariant
@settings(deadline=None, max_examples=25, suppress_health_check=[HealthCheck.function_scoped_fixture])
@given(cuts=st.sets(st.integers(1, len(TROUBLED) - 1), max_size=14), taken=st.sampled_from(["all", "still"]))
def test_faults_halts_faces_and_jumps_do_not_depend_on_blocks_either(shaft, cuts, taken):
    """A ride with every trouble there is: rows, stations, alarms, faces, best estimate and notes to the last bit."""
    assumptions = shaft(depth=DEPTH, guide=Guide(readings=taken), instrument=Instrument(range=1.2))
    whole, rows = run(assumptions, TROUBLED)
    pieces, other = run(assumptions, TROUBLED, cuts)
    np.testing.assert_array_equal(other, rows)
    assert repr(pieces.result()) == repr(whole.result())
    assert pieces.unused == whole.unused
    if taken == "all":
        assert {one.name for one in whole.result().alarms} == {JUMP, "tilt frozen", "tilt at end of range"}
        assert whole.unused["depth spike"] == 3


@pytest.mark.invariant
@pytest.mark.parametrize("taken", ["all", "still"])
def test_leaving_out_the_uncertainty_of_rows_changes_neither_stations_nor_alarms_nor_the_answer(shaft, taken):
    """Without it only the two columns of the rows are missing."""
    assumptions = shaft(depth=DEPTH, guide=Guide(readings=taken), instrument=Instrument(range=1.2))
    whole, rows = run(assumptions, TROUBLED)
    quick = Survey(assumptions, u_of_rows=False)
    found = quick.feed(TROUBLED)
    quick.close(float(TROUBLED.host_time[-1]))
    assert repr(quick.result()) == repr(whole.result())
    assert quick.standing() == whole.standing()
    u = [ROW_FIELDS.index("u_east"), ROW_FIELDS.index("u_north")]
    assert np.isnan(found.rows.data[u]).all()
    assert np.isfinite(rows[u]).all()
    np.testing.assert_array_equal(np.delete(found.rows.data, u, axis=0), np.delete(rows, u, axis=0))
