"""Instrument corrections and pairs of faces."""

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from eastfall.physics.calibration import corrected, pair_faces, shown
from eastfall.physics.errors import ParameterError
from eastfall.physics.settings import DEGREE, Instrument

PROBE = Instrument(
    zero_a=0.01 * DEGREE,
    zero_b=-0.02 * DEGREE,
    scale_a=1.003,
    scale_b=0.998,
    cross_ab=0.004,
    cross_ba=-0.002,
    zero_a_per_c=1e-6,
    zero_b_per_c=-2e-6,
    scale_per_c=1e-4,
)


@pytest.mark.invariant
def test_a_perfect_instrument_shows_the_truth():
    """Without constants nothing is changed, and no temperature is needed."""
    np.testing.assert_array_equal(
        corrected([0.1, -0.2], [0.3, 0.0], None, Instrument()), [[0.1, -0.2], [0.3, 0.0]]
    )


@pytest.mark.invariant
@given(a=st.floats(-0.5, 0.5), b=st.floats(-0.5, 0.5), kelvin=st.floats(250.0, 330.0))
def test_correcting_undoes_what_the_instrument_shows(a, b, kelvin):
    """Shown and corrected, a tilt is back to within rounding, with every constant in play."""
    back = corrected(*shown(a, b, kelvin, PROBE), kelvin, PROBE)
    np.testing.assert_allclose(back, (a, b), atol=4e-16)


def test_each_constant_acts_as_its_name_says():
    """Zero adds, scale multiplies, the cross term brings in the other axis, warmth shifts the zero."""
    assert shown(0.1, 0.0, None, Instrument(zero_a=0.01))[0] == pytest.approx(0.11)
    assert shown(0.1, 0.0, None, Instrument(scale_a=1.01))[0] == pytest.approx(0.101)
    assert shown(0.0, 0.1, None, Instrument(cross_ab=0.02))[0] == pytest.approx(0.002)
    assert shown(0.0, 0.1, None, Instrument(cross_ab=0.02))[1] == pytest.approx(0.1)
    warm = Instrument(zero_b_per_c=1e-5, reference_temperature=290.0)
    assert shown(0.0, 0.1, 300.0, warm)[1] == pytest.approx(0.1 + 1e-4)


def test_all_constants_together_make_the_worked_numbers():
    """10 K above 290: A 0.01 + 10·1e-5 + 1.02·1.03·0.1 + 0.004·0.2; B -0.02 - 10·2e-5 + 0.97·1.03·0.2 - 0.005·0.1."""
    probe = Instrument(
        zero_a=0.01,
        zero_b=-0.02,
        zero_a_per_c=1e-5,
        zero_b_per_c=-2e-5,
        scale_a=1.02,
        scale_b=0.97,
        scale_per_c=3e-3,
        cross_ab=0.004,
        cross_ba=-0.005,
        reference_temperature=290.0,
    )
    found = shown(0.1, 0.2, 300.0, probe)
    assert found == (pytest.approx(0.11596, abs=1e-15), pytest.approx(0.17912, abs=1e-15))


def test_a_missing_temperature_matters_only_to_an_instrument_that_needs_it():
    """NaN kelvin gives NaN with a temperature coefficient and is of no consequence without."""
    assert np.isnan(corrected(0.1, 0.1, np.nan, PROBE)).all()
    assert not np.isnan(corrected(0.1, 0.1, np.nan, Instrument(zero_a=0.01))).any()
    assert np.isnan(corrected(np.nan, 0.1, None, Instrument())[0])


def test_a_hopeless_instrument_is_refused():
    """Cross terms as large as the scales cannot be undone."""
    with pytest.raises(ParameterError, match="well above the cross terms"):
        corrected(0.0, 0.0, None, Instrument(cross_ab=1.0, cross_ba=1.0))


@pytest.mark.published
def test_face_pair_of_the_short_course():
    """Mikkelsen (2007): 359 and -339 in 1/20000 over 24 in: sum 20, difference 698, deviation 0.4188 in."""
    pair = pair_faces([10.0], [359.0 / 20000.0], [10.0], [-339.0 / 20000.0])
    assert pair.face_sum[0] * 20000.0 == pytest.approx(20.0, abs=1e-9)
    assert pair.tilt[0] * 2.0 * 20000.0 == pytest.approx(698.0, abs=1e-9)
    assert pair.tilt[0] * 24.0 == pytest.approx(0.4188, abs=5e-5)


def _faces(rng, n=200, zero=0.01 * DEGREE, noise=0.002 * DEGREE):
    depth = np.linspace(0.0, 400.0, n)
    tilt = 1e-3 * np.sin(depth / 50.0)
    first = tilt + zero + rng.normal(0.0, noise, n)
    second = -tilt + zero + rng.normal(0.0, noise, n)
    return depth, tilt, first, second


@pytest.mark.independent
def test_the_zero_is_found_within_its_stated_uncertainty():
    """Over 400 surveys the 95 % interval of the zero holds the true one in 95 % of them."""
    rng = np.random.default_rng(4)
    inside = 0
    for _ in range(400):
        depth, _, first, second = _faces(rng)
        pair = pair_faces(depth, first, depth, second)
        inside += abs(pair.zero - 0.01 * DEGREE) <= 1.96 * pair.u_zero
    # Binomial with p = 0.95: deviation 0.0109, three of it.
    assert abs(inside / 400 - 0.95) <= 3.0 * 0.0109


def test_spoiled_depths_are_suspect_and_leave_the_zero_alone():
    """Ten readings off by 0.05° among 200 are all marked, hardly any other, and the zero stays."""
    rng = np.random.default_rng(6)
    depth, tilt, first, second = _faces(rng)
    spoiled = np.zeros(200, dtype=bool)
    spoiled[5:200:20] = True
    first[spoiled] += 0.05 * DEGREE
    pair = pair_faces(depth, first, depth + 0.01, second, u_tilt=0.002 * DEGREE)
    assert pair.suspect[spoiled].all()
    # Beyond 3.5 deviations lies one in 2000 good readings.
    assert np.count_nonzero(pair.suspect[~spoiled]) <= 2
    assert pair.zero == pytest.approx(0.01 * DEGREE, abs=4.0 * 0.002 * DEGREE / np.sqrt(400.0))
    assert np.std((pair.tilt - tilt)[~spoiled]) == pytest.approx(0.002 * DEGREE / np.sqrt(2.0), rel=0.2)


def test_pairs_need_each_others_nearest_depth():
    """Readings without a near partner, and missing ones, are left out and counted; order does not matter."""
    pair = pair_faces(
        [3.0, 1.0, 2.0, 9.0, 5.0],
        [3.0, 1.0, 2.0, 9.0, np.nan],
        [2.02, 1.0, 2.99, 7.0],
        [-2.0, -1.0, -3.0, 0.0],
    )
    np.testing.assert_allclose(pair.depth, [1.0, 2.01, 2.995])
    np.testing.assert_allclose(pair.tilt, [1.0, 2.0, 3.0])
    assert pair.unpaired == 2
    assert not pair.suspect.any()


def test_no_pairs_leave_no_zero():
    """Faces at different depths give an empty table and NaN, not a guess."""
    pair = pair_faces([1.0], [0.1], [2.0], [-0.1])
    assert pair.depth.size == 0
    assert np.isnan([pair.zero, pair.u_zero, pair.mean, pair.spread]).all()
    with pytest.raises(ParameterError, match="within is -1"):
        pair_faces([1.0], [0.1], [2.0], [-0.1], within=-1.0)
    with pytest.raises(ParameterError, match="the shape of its depths"):
        pair_faces([1.0, 2.0], [0.1], [2.0], [-0.1])
