"""Scales: round ticks, bounds that hold the data and seldom move."""

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from eastfall.tui.axes import Axis, around, label, round_step, symmetric

pytestmark = pytest.mark.invariant
some = st.lists(st.floats(-1e3, 1e3), min_size=0, max_size=20)


@pytest.mark.parametrize(("span", "most", "step"), [(300, 5, 100), (0.08, 4, 0.02), (7, 10, 1), (1, 4, 0.5)])
def test_steps_are_one_two_or_five_of_a_decade(span: float, most: int, step: float) -> None:
    """A span is cut into at most the number of parts asked for, by a round step."""
    assert round_step(span, most) == pytest.approx(step, rel=1e-12)


@pytest.mark.parametrize("span", [0.0, np.nan, np.inf])
def test_span_that_is_no_length_still_gives_a_step(span: float) -> None:
    """No data is no reason to fail."""
    assert round_step(span, 5) == 1.0


@given(some)
def test_symmetric_bounds_hold_all_values_about_zero(values: list[float]) -> None:
    """Every finite value is inside, and zero is in the middle."""
    low, high = symmetric(values, 0.5)
    assert low == -high
    assert all(low <= one <= high for one in values)
    assert high >= 0.5


@given(some)
def test_bounds_around_hold_all_values_and_zero(values: list[float]) -> None:
    """Every finite value and zero are inside."""
    low, high = around([*values, np.nan, np.inf], 0.5)
    assert all(low <= one <= high for one in [*values, 0.0])


def test_bounds_do_not_move_with_noise() -> None:
    """A change of one part in a thousand leaves the rounded bounds where they were."""
    assert symmetric([0.0203], 0.0) == symmetric([0.02032], 0.0)


def test_dot_positions_run_from_first_to_past_last() -> None:
    """The low end is dot 0, the high end the number of dots."""
    axis = Axis(low=-2.0, high=2.0, dots=80)
    assert axis.dot([-2.0, 0.0, 2.0]).tolist() == [0.0, 40.0, 80.0]


def test_ticks_hold_zero_and_stay_inside() -> None:
    """Ticks are round, inside the axis, and zero is one of them."""
    assert Axis(low=-0.04, high=0.04, dots=10).ticks(4) == pytest.approx([-0.04, -0.02, 0.0, 0.02, 0.04])


@pytest.mark.parametrize(
    ("value", "step", "signed", "shown"),
    [
        (20.0, 20.0, True, "+20"),
        (-0.5, 0.5, True, "-0.5"),
        (0.0, 5.0, True, "0"),
        (150.0, 50.0, False, "150"),
    ],
)
def test_labels_show_the_digits_of_the_step(value: float, step: float, signed: bool, shown: str) -> None:
    """A tick's label has as many decimals as its step, and a sign where direction matters."""
    assert label(value, step, signed=signed) == shown
