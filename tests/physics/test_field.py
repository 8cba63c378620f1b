"""The local field around a collar."""

from dataclasses import FrozenInstanceError
from itertools import pairwise
from math import pi

import numpy as np
import pytest

from eastfall.physics.earth import (
    EARTH_ROTATION,
    GRAVITATIONAL_CONSTANT,
    GRS80,
    Shell,
    free_air_gradient,
    normal_gravity,
    plumbline_curvature,
    shell_gravity,
)
from eastfall.physics.errors import ParameterError
from eastfall.physics.field import LocalField, assemble_field, local_field
from eastfall.physics.settings import Site

LAYERS = ((0.0, 2670.0), (410.0, 2810.0), (900.0, 0.0), (950.0, 3300.0))
DEFLECTIONS = ((100.0, 5e-6, -2e-6), (400.0, 2e-5, 1e-6), (700.0, 1.5e-5, 4e-6))


def _field(**changes: object) -> LocalField:
    return local_field(Site(**{"latitude": pi / 4, **changes}), ellipsoid=GRS80)


@pytest.mark.independent
def test_layered_gravity_agrees_with_the_shell_integrator() -> None:
    """Below the collar g is that of a sphere of shells plus the centrifugal part, to 1e-12 of g over 4 km."""
    radius = 6.37e6
    edges = [0.0, 410.0, 900.0, 950.0, 4000.0]
    shells = [
        Shell(inner=radius - bottom, outer=radius - top, coefficients=(density,))
        for (top, density), bottom in zip(LAYERS, edges[1:], strict=True)
        if density > 0.0
    ]
    core = Shell(inner=0.0, outer=radius - 4000.0, coefficients=(5500.0,))
    # On a sphere Bruns's 2ω² is that of a centrifugal acceleration of -⅔ω²r, mean over all directions.
    turning = 2.0 / 3.0 * EARTH_ROTATION**2
    depth = np.linspace(0.0, 3999.0, 500)
    expected = shell_gravity(radius - depth, [*shells, core]) - turning * (radius - depth)
    field = assemble_field(
        latitude=0.7,
        gravity=float(expected[0]),
        curvature=0.0,
        meridian_radius=radius,
        prime_vertical_radius=radius,
        rock_density=LAYERS,
    )
    assert field.gravity_at(depth) == pytest.approx(expected, rel=1e-12)


@pytest.mark.invariant
def test_gradient_jumps_by_the_density_at_every_layer() -> None:
    """dg/dz is F - 4πGρ, so that it jumps by -4πGΔρ where the density jumps, while g itself does not."""
    field = _field(rock_density=LAYERS)
    for (_, above), (top, below) in pairwise(LAYERS):
        before, at, after = field.gravity_at(np.array([top - 1.0, top, top + 1.0]))
        jump = (after - at) - (at - before)
        assert jump == pytest.approx(-4.0 * pi * GRAVITATIONAL_CONSTANT * (below - above), abs=1e-11)
        assert field.gravity_at(top - 1e-6) == pytest.approx(float(at), abs=1e-11)


@pytest.mark.independent
def test_open_air_below_a_tower_is_normal_gravity_at_its_height() -> None:
    """From a collar 300 m up, through air of density zero, g grows as the height formula says, to f² of the growth."""
    depth = np.linspace(0.0, 300.0, 31)
    field = _field(elevation=300.0, rock_density=((0.0, 0.0),))
    expected = normal_gravity(pi / 4, 300.0 - depth, GRS80)
    growth = float(expected[-1] - expected[0])
    assert field.gravity_at(depth) == pytest.approx(expected, abs=2.0 * GRS80.flattening**2 * growth)


@pytest.mark.invariant
def test_above_the_collar_is_open_air() -> None:
    """Above the first layer g falls by the free-air gradient, whatever the rock below."""
    field = _field(rock_density=((10.0, 2670.0),))
    steps = field.gravity_at(np.array([-1.0, 0.0, 9.0, 10.0]))
    gradient = free_air_gradient(field.gravity, field.meridian_radius, field.prime_vertical_radius)
    assert steps[1] - steps[0] == pytest.approx(gradient, rel=1e-5)
    assert steps[3] - steps[2] == pytest.approx(gradient, rel=1e-5)
    assert field.gravity_at(0.0) == pytest.approx(field.gravity, rel=1e-15)


@pytest.mark.invariant
def test_measured_gravity_overrides_the_normal_value() -> None:
    """A measured g at the collar shifts g at depth with it, to first order by the same amount."""
    normal, measured = _field(), _field(gravity=9.8210)
    assert measured.gravity_at(0.0) == pytest.approx(9.8210, abs=1e-15)
    shift = measured.gravity_at(1000.0) - normal.gravity_at(1000.0)
    assert shift == pytest.approx(9.8210 - normal.gravity, rel=4e-4)


@pytest.mark.published
def test_field_line_bends_poleward_by_the_stated_amount() -> None:
    """½κz² is 0.415 mm north at 1 km and 45°, south at -45°: from κ 0.1713″/km (calculation from GRS80)."""
    expected = 0.5 * np.radians(0.1713 / 3.6e6) * 1000.0**2
    north, east = _field().field_line(1000.0)
    assert (north, east) == (pytest.approx(expected, abs=3e-7), 0.0)
    assert _field(latitude=-pi / 4).field_line(1000.0)[0] == pytest.approx(-expected, abs=3e-7)


@pytest.mark.invariant
@pytest.mark.parametrize("deflections", [(), DEFLECTIONS])
def test_field_line_is_the_integral_of_the_slope(deflections: tuple[tuple[float, float, float], ...]) -> None:
    """A trapezoid sum of the slope over 1 m steps gives the field line to 1 nm, kinks included."""
    field = _field(deflections=deflections)
    depth = np.arange(0.0, 1001.0)
    for slope, line in zip(field.slope(depth), field.field_line(depth), strict=True):
        summed = np.concatenate([[0.0], np.cumsum(0.5 * (slope[1:] + slope[:-1]))])
        assert line == pytest.approx(summed, abs=1e-9)


@pytest.mark.invariant
def test_measured_deflections_replace_the_normal_curvature() -> None:
    """The slope passes through the measured values, is linear between, and goes on with κ below the last."""
    field = _field(deflections=DEFLECTIONS)
    for depth, north, east in DEFLECTIONS:
        assert [float(one) for one in field.slope(depth)] == pytest.approx([north, east], abs=1e-18)
    assert field.slope(50.0)[0] == pytest.approx(2.5e-6, rel=1e-12, abs=0.0)
    assert field.slope(1700.0)[0] == pytest.approx(1.5e-5 + 1000.0 * field.curvature, rel=1e-12, abs=0.0)
    assert field.measured_to == 700.0


@pytest.mark.invariant
@pytest.mark.parametrize("deflections", [(), DEFLECTIONS])
def test_acceleration_has_a_symmetric_gradient(deflections: tuple[tuple[float, float, float], ...]) -> None:
    """∂g_N/∂z = ∂g_z/∂N and ∂g_E/∂z = ∂g_z/∂E: gravity has a potential."""
    field = _field(deflections=deflections)
    lower, upper = field.acceleration(0.0, 0.0, 301.0), field.acceleration(0.0, 0.0, 299.0)
    aside = [field.acceleration(1.0, 0.0, 300.0), field.acceleration(0.0, 1.0, 300.0)]
    middle = field.acceleration(0.0, 0.0, 300.0)
    for axis in (0, 1):
        along_depth = (lower[axis] - upper[axis]) / 2.0
        assert along_depth == pytest.approx(float(aside[axis][2] - middle[2]), rel=1e-3, abs=1e-14)


@pytest.mark.invariant
def test_trace_of_the_gradient_is_that_of_poisson() -> None:
    """The diagonal sums to 2ω² - 4πGρ (Poisson's equation on a turning Earth), at the collar."""
    field = _field()
    middle = field.acceleration(0.0, 0.0, 0.0)
    total = (
        field.acceleration(1.0, 0.0, 0.0)[0]
        + field.acceleration(0.0, 1.0, 0.0)[1]
        + (field.acceleration(0.0, 0.0, 1.0)[2] - middle[2])
    )
    expected = 2.0 * EARTH_ROTATION**2 - 4.0 * pi * GRAVITATIONAL_CONSTANT * 2670.0
    assert total == pytest.approx(expected, rel=1e-5, abs=0.0)


@pytest.mark.invariant
def test_methods_broadcast_and_keep_nan() -> None:
    """Any shape comes back as it went in, and a missing depth gives a missing value."""
    field = _field(rock_density=LAYERS, deflections=DEFLECTIONS)
    depth = np.array([[0.0, np.nan, 500.0], [2000.0, 10.0, 950.0]])
    for values in (field.gravity_at(depth), *field.slope(depth), *field.field_line(depth)):
        assert values.shape == (2, 3)
        assert np.array_equal(np.isnan(values), np.isnan(depth))
    assert field.acceleration(np.zeros((4, 1)), 0.0, np.zeros(3))[0].shape == (4, 3)


@pytest.mark.invariant
def test_field_is_read_only() -> None:
    """Neither a field of the record nor the content of its arrays can be changed."""
    field = _field()
    with pytest.raises(FrozenInstanceError):
        field.gravity = 9.9  # type: ignore[misc]
    with pytest.raises(ValueError, match="read-only"):
        field.layer_terms[0, 0] = 1.0


@pytest.mark.invariant
def test_curvature_is_that_of_the_collars_latitude_and_height() -> None:
    """κ and the plumb line's latitude come from the ellipsoid at the collar's elevation."""
    field = _field(elevation=1200.0)
    assert field.curvature == float(plumbline_curvature(pi / 4, GRS80, 1200.0))
    assert field.plumb_latitude == pytest.approx(pi / 4 + 1200.0 * field.curvature, abs=1e-15)
    assert field.latitude == pi / 4


@pytest.mark.invariant
@pytest.mark.parametrize(
    ("changes", "message"),
    [
        ({"rock_density": ((0.0, -1.0),)}, r"rock_density is -1\.0 kg/m³; expected 0 or more"),
        ({"deflections": ((0.0, 1e-6, 0.0),)}, "zero at the collar"),
        ({"deflections": ((-5.0, 1e-6, 0.0),)}, "rising from the collar down"),
    ],
)
def test_unusable_layers_and_deflections_are_refused(changes: dict[str, object], message: str) -> None:
    """A negative density, a deflection at the collar and one above it raise with what was expected."""
    with pytest.raises(ParameterError, match=message):
        _field(**changes)
