"""The equation of motion against the vector formula, term by term."""

from dataclasses import replace
from math import pi

import numpy as np
import pytest

from eastfall.physics.air import air_column
from eastfall.physics.drag import morrison
from eastfall.physics.earth import EARTH_ROTATION
from eastfall.physics.field import local_field
from eastfall.physics.motion import UNCHANGED, Forces, Release
from eastfall.physics.settings import Air, Body, Site

FIELD = local_field(
    Site(latitude=0.9, rock_density=((0.0, 2670.0),), deflections=((50.0, 1e-4, -2e-4), (800.0, 3e-3, 1e-3)))
)
AIR = air_column(Air(cross_flow=((0.0, 500.0, 3.0, 1.2),), vertical=-2.0), FIELD)
RNG = np.random.default_rng(12)
# Offsets of kilometres, so that every term of the linear field is far above rounding.
EAST, NORTH = RNG.uniform(-1e4, 1e4, (2, 6, 3))
V_EAST, V_NORTH, V_DOWN = RNG.uniform(-20.0, 40.0, (3, 6, 3))
DEPTH = np.linspace(10.0, 700.0, 6)[:, None]


@pytest.mark.independent
@pytest.mark.parametrize("coefficient", [0.45, "sphere"])
def test_acceleration_is_the_vector_sum_of_its_forces(coefficient: float | str) -> None:
    """Gravity less buoyancy, -2ω×v, drag along u and lift along Ω×u add up, by cross products in north, east, down."""
    body = Body(mass=0.3, diameter=0.2, drag_coefficient=coefficient)
    release = Release(spin_north=3.0, spin_east=-2.0, spin_down=5.0)
    forces = Forces(FIELD, body, AIR, release, UNCHANGED)
    around = forces.surroundings(DEPTH)
    now = forces.acceleration(around, EAST, NORTH, v_east=V_EAST, v_north=V_NORTH, v_down=V_DOWN)

    gravity = np.stack(np.broadcast_arrays(*FIELD.acceleration(NORTH, EAST, DEPTH)), axis=-1)
    velocity = np.stack([V_NORTH, V_EAST, V_DOWN], axis=-1)
    omega = EARTH_ROTATION * np.array([np.cos(0.9), 0.0, -np.sin(0.9)])
    flow_east, flow_north = AIR.cross_flow(DEPTH)
    still = np.zeros_like(EAST)
    wind = np.stack([flow_north + still, flow_east + still, AIR.vertical + still], axis=-1)
    u = velocity - wind
    speed = np.linalg.norm(u, axis=-1, keepdims=True)
    density = AIR.density(DEPTH)[..., None]
    drag = (
        morrison(density * speed * 0.2 / AIR.viscosity(DEPTH)[..., None]) if coefficient == "sphere" else 0.45
    )
    brake = 0.5 * density * drag * pi * 0.01 / 0.3 * speed * u
    lift = pi * 0.1**3 * density / 0.3 * np.cross(np.array([3.0, -2.0, 5.0]), u)
    weight = 1.0 - density * pi * 0.2**3 / 6.0 / 0.3
    expected = gravity * weight - 2.0 * np.cross(omega, velocity) - brake + lift

    assert now.north == pytest.approx(expected[..., 0], rel=1e-10, abs=1e-12)
    assert now.east == pytest.approx(expected[..., 1], rel=1e-10, abs=1e-12)
    assert now.down == pytest.approx(expected[..., 2], rel=1e-10, abs=1e-12)


@pytest.mark.invariant
def test_slower_than_air_is_carried_along() -> None:
    """Drag acts along the velocity against the air: a body at rest in a flow is pushed with it."""
    forces = Forces(FIELD, Body(mass=0.3, diameter=0.2), AIR, Release(), UNCHANGED)
    still = np.zeros((1, 1))
    around = forces.surroundings(np.array([[10.0]]))
    blown = forces.acceleration(around, still, still, v_east=still, v_north=still, v_down=still)
    calm = forces.acceleration(
        around._replace(air_east=None, air_north=None, air_down=None),
        still,
        still,
        v_east=still,
        v_north=still,
        v_down=still,
    )
    push = (blown.north - calm.north).item(), (blown.east - calm.east).item(), (blown.down - calm.down).item()
    flow = 3.0 * np.cos(1.2), 3.0 * np.sin(1.2), -2.0
    assert np.array(push) / np.linalg.norm(push) == pytest.approx(
        np.array(flow) / np.linalg.norm(flow), rel=1e-12
    )


@pytest.mark.invariant
def test_point_mass_feels_no_air() -> None:
    """Without a body there is neither drag nor buoyancy, whatever the air."""
    with_air, without = (Forces(FIELD, None, one, Release(), UNCHANGED) for one in (AIR, None))
    rows = [
        one.acceleration(one.surroundings(DEPTH), EAST, NORTH, v_east=V_EAST, v_north=V_NORTH, v_down=V_DOWN)
        for one in (with_air, without)
    ]
    assert np.array_equal(rows[0].down, rows[1].down)
    assert rows[0].drag_rate == 0.0
    vacuum = air_column(replace(AIR.settings, density=0.0), FIELD)
    assert Forces(FIELD, Body(mass=1.0, diameter=0.1), vacuum, Release(), UNCHANGED).air is None
