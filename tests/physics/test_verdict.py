"""Verdicts: the guard band and the length of a horizontal residual."""

import math

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from eastfall.physics.verdict import direction, horizontal, verdict, verdicts

published = pytest.mark.published


@published
@pytest.mark.parametrize(
    ("value", "word"),
    [(9.0, "undecided"), (9.2, "within"), (10.8, "within"), (10.81, "undecided"), (11.21, "over")],
)
def test_tolerance_ten_plus_minus_one_with_u_two_tenths_accepts_from_9_2_to_10_8(value, word):
    """Tolerance 10 ± 1, U = 0.2, w = U: acceptance from 9.2 to 10.8.

    Worked from the wording of ILAC-G8:09/2019, 4.2.2 (acceptance limit = tolerance limit - guard band); the limits are
    a calculation, not printed there.
    """
    # The nearest double of 10.8 - 10 + 0.2 lies 2e-16 above 1; the rule is not about that digit.
    assert verdict(abs(value - 10.0) - 1e-12, 0.1, 1.0) == word


@published
def test_false_acceptance_with_guard_band_u_stays_below_two_and_a_half_percent():
    """A value accepted on the edge of the guard band is over the limit with a probability of at most 2.5 %.

    ILAC-G8:09/2019, table 1, row w = U: "< 2.5 % PFA". Here by simulation with a fixed seed.
    """
    rng = np.random.default_rng(1)
    u, limit = 1.0, 15.0
    true = limit - 2.0 * u + rng.normal(0.0, u, 400_000)
    assert np.mean(true > limit) < 0.025


@pytest.mark.independent
def test_uncertainty_of_a_length_agrees_with_gtc():
    """√(e² + n²) of (30 ± 4, 40 ± 3) has the standard uncertainty that the GTC library propagates."""
    GTC = pytest.importorskip("GTC")
    east, north = GTC.ureal(30.0, 4.0), GTC.ureal(40.0, 3.0)
    reference = GTC.sqrt(east * east + north * north)
    length, u = horizontal(30.0, 40.0, 4.0, 3.0)
    assert length == pytest.approx(GTC.value(reference), rel=1e-14)
    assert u == pytest.approx(GTC.uncertainty(reference), rel=1e-12)


@pytest.mark.independent
@pytest.mark.parametrize("correlation", [-1.0, -0.6, 0.3, 1.0])
def test_uncertainty_of_a_length_with_covariance_agrees_with_gtc(correlation):
    """√(e² + n²) of (-30 ± 4, 40 ± 3) with correlated e and n, as the GTC library propagates it."""
    GTC = pytest.importorskip("GTC")
    east, north = GTC.ureal(-30.0, 4.0, independent=False), GTC.ureal(40.0, 3.0, independent=False)
    GTC.set_correlation(correlation, east, north)
    reference = GTC.sqrt(east * east + north * north)
    _, u = horizontal(-30.0, 40.0, 4.0, 3.0, correlation * 12.0)
    assert u == pytest.approx(GTC.uncertainty(reference), rel=1e-9, abs=1e-7)


@pytest.mark.invariant
@given(
    st.floats(-10, 10),
    st.floats(-10, 10),
    st.floats(0.1, 3),
    st.floats(0.1, 3),
    st.floats(-1, 1),
    st.floats(0, 6.3),
)
def test_the_uncertainty_of_a_length_does_not_depend_on_which_way_the_axes_point(
    east, north, u_east, u_north, correlation, turn
):
    """Offset and covariance turned together give the same; near the edge to its own uncertainty either may stand in."""
    matrix = np.array(
        [[u_east**2, correlation * u_east * u_north], [correlation * u_east * u_north, u_north**2]]
    )
    if abs(math.hypot(east, north) - np.linalg.eigvalsh(matrix)[1] ** 0.5) < 1e-9:
        return
    about = np.array([[math.cos(turn), math.sin(turn)], [-math.sin(turn), math.cos(turn)]])
    turned, offset = about @ matrix @ about.T, about @ [east, north]
    there = np.array(horizontal(*offset, *np.sqrt(np.diag(turned)), turned[0, 1]))
    here = np.array(horizontal(east, north, u_east, u_north, matrix[0, 1]))
    assert there == pytest.approx(here, rel=1e-9, abs=2e-7)
    toward = np.array(direction(east, north, u_east, u_north, float(matrix[0, 1])))
    assert toward @ matrix @ toward == pytest.approx(float(here[1]) ** 2, rel=1e-9, abs=1e-12)


def test_a_residual_smaller_than_its_uncertainty_takes_the_larger_axis():
    """At zero length the derivative means nothing: u is the larger of the two."""
    length, u = horizontal(0.0, 0.0, 2.0, 5.0)
    assert (float(length), float(u)) == (0.0, 5.0)


def test_nan_is_undecided():
    """Nothing is accepted, or refused, on a missing number."""
    assert verdicts([math.nan, 1.0, 1.0], [0.1, math.nan, 0.1], [2.0, 2.0, math.nan]) == ["undecided"] * 3


@pytest.mark.invariant
@given(st.floats(0, 1e3), st.floats(0, 1e2), st.floats(0, 1e3))
def test_within_needs_room_for_the_whole_guard_band(length, u, limit):
    """No "within" without the guard band inside the limit, no "over" without it outside."""
    word = verdict(length, u, limit)
    assert (word == "within") == (length + 2.0 * u <= limit)
    if word == "over":
        assert length - 2.0 * u > limit
