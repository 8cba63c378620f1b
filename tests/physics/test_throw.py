"""Throws followed in time, against the closed forms of a constant field."""

from math import pi

import numpy as np
import pytest

from eastfall.physics.descent import State
from eastfall.physics.errors import ParameterError
from eastfall.physics.expected import expected_curve
from eastfall.physics.motion import UNCHANGED, Forces, Release
from eastfall.physics.published.model_fields import constant_field
from eastfall.physics.settings import Assumptions, Body, Run, Shaft, Site
from eastfall.physics.throw import Thrown, reach, rise

FORCES = Forces(constant_field(pi / 4, 9.8), None, None, Release(), UNCHANGED)
SPEEDS = np.array([-14.0, -0.3, 0.0, 2.0])


def _thrown(speeds: np.ndarray) -> Thrown:
    zero = np.zeros(len(speeds))
    state = State(zero, zero, zero, zero + 0.1, zero, 0.5 * speeds**2)
    return Thrown(state=state, depth=zero + 5.0, v_down=speeds)


@pytest.mark.published
def test_throw_rises_to_the_height_of_its_energy() -> None:
    """Bodies turn at v²/2g above the release after v/g; those not thrown up stay in the hand."""
    top = rise(FORCES, _thrown(SPEEDS))
    up = np.minimum(SPEEDS, 0.0)
    # Coriolis on the eastward 0.1 m/s lifts by 1e-6 of g.
    assert top.state.time == pytest.approx(-up / 9.8, abs=3e-6)
    assert top.depth == pytest.approx(5.0 - up**2 / 19.6, abs=3e-5)
    assert top.v_down == pytest.approx([0.0, 0.0, 0.0, 2.0], abs=1e-12)


@pytest.mark.published
@pytest.mark.parametrize("depth", [5.0, 6.0, 30.0])
def test_fall_reaches_a_depth_with_the_energy_of_the_way(depth: float) -> None:
    """From rest or thrown down, ½v² grows by g for every metre."""
    first = _thrown(SPEEDS[2:])
    there = reach(FORCES, first, depth)
    expected = 0.5 * SPEEDS[2:] ** 2 + 9.8 * (depth - 5.0)
    assert there.energy == pytest.approx(expected, rel=3e-6, abs=1e-12)
    # Coriolis adds at most the first-order deflection, 1.6e-5 m at 1 m.
    assert there.east == pytest.approx(0.1 * there.time, abs=1.6e-5 * (depth - 5.0) ** 1.5 + 1e-12)


@pytest.mark.invariant
def test_up_and_down_again_is_symmetric() -> None:
    """A body thrown up is back at the hand after twice the time of its rise, at the speed of the throw."""
    first = _thrown(SPEEDS[:2])
    top = rise(FORCES, first)
    back = reach(FORCES, top, 5.0)
    assert back.time == pytest.approx(2.0 * top.state.time, rel=1e-5)
    assert np.sqrt(2.0 * back.energy) == pytest.approx(-SPEEDS[:2], rel=1e-5)


@pytest.mark.regression
def test_a_throw_too_fast_for_the_air_is_refused_without_a_warning() -> None:
    """A light body of 0.85 m thrown up at 99 m/s: the iteration runs away, and that is told as what cannot be used."""
    site = Site(latitude=0.87)
    body = Body(mass=0.5, diameter=0.854, release_speed_down=-99.4)
    with pytest.raises(ParameterError, match="a slower throw through this air"):
        expected_curve(Assumptions(site=site, shaft=Shaft(depth=300.0), run=Run(kind="drop"), body=body))
