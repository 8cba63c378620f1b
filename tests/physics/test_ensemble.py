"""Many falls at once against one fall each."""

import importlib.util
from dataclasses import fields, replace
from pathlib import Path

import numpy as np
import pytest

from eastfall.physics.air import air_column
from eastfall.physics.earth import GRAVITATIONAL_CONSTANT
from eastfall.physics.errors import ParameterError
from eastfall.physics.fall import Release, Variation, fall, fall_ensemble
from eastfall.physics.field import assemble_field, local_field
from eastfall.physics.settings import Air, Body, Site

SITE = Site(latitude=np.radians(57.3), rock_density=((0.0, 2670.0), (410.0, 2810.0)))
FIELD = local_field(SITE)
STEEL = Body(mass=0.514, diameter=0.05)
GIVEN = replace(STEEL, drag_coefficient=0.45)
WINDY = Air(cross_flow=((480.0, 500.0, 1.0, 1.0),))
DEPTHS = np.array([0.2, 10.0, 300.0, 490.0, 940.0])
START = Release(east=0.01, speed_north=0.002)


@pytest.mark.invariant
@pytest.mark.parametrize(
    ("change", "shifted"),
    [
        ({"east": 0.02}, {"east": 0.03}),
        ({"north": -0.02}, {"north": -0.02}),
        ({"speed_east": 0.02}, {"speed_east": 0.02}),
        ({"speed_north": -0.02}, {"speed_north": -0.018}),
        ({"speed_down": 0.5}, {"speed_down": 0.5}),
        ({"speed_down": -0.5}, {"speed_down": -0.5}),
        ({"spin_north": 0.5, "spin_down": 2.0}, {"spin_north": 0.5, "spin_down": 2.0}),
        ({"spin_east": -0.3}, {"spin_east": -0.3}),
    ],
)
def test_varied_release_gives_the_fall_from_there(
    change: dict[str, float], shifted: dict[str, float]
) -> None:
    """A member with a shifted release is where a fall released like that is, within 0.1 µm per 20 mm/s."""
    air = air_column(WINDY, FIELD)
    variation = Variation(**{name: np.array([0.0, value]) for name, value in change.items()})
    many = fall_ensemble(FIELD, depths=DEPTHS, variation=variation, body=STEEL, air=air, release=START)
    for row, release in enumerate((START, replace(START, **shifted))):
        one = fall(FIELD, to_depth=940.0, body=STEEL, air=air, release=release).at(DEPTHS)
        assert many.east[row] == pytest.approx(one.east, abs=2e-7)
        assert many.north[row] == pytest.approx(one.north, abs=2e-7)
        assert many.time[row] == pytest.approx(one.time, abs=1e-6)


@pytest.mark.invariant
@pytest.mark.parametrize(
    ("change", "air", "body"),
    [
        ({"air_density_factor": 1.05}, replace(WINDY, density=1.25 * 1.05), GIVEN),
        ({"air_vertical": -1.5}, replace(WINDY, vertical=-1.5), GIVEN),
        ({"cross_flow_factor": 1.3}, replace(WINDY, cross_flow=((480.0, 500.0, 1.3, 1.0),)), GIVEN),
        ({"drag_factor": 0.9}, WINDY, replace(GIVEN, drag_coefficient=0.45 * 0.9)),
    ],
)
def test_varied_air_gives_the_fall_in_that_air(change: dict[str, float], air: Air, body: Body) -> None:
    """A member in other air, or with other drag, is where a single fall in it is, within 1 µm."""
    many = fall_ensemble(
        FIELD, depths=DEPTHS, variation=Variation(**change), body=GIVEN, air=air_column(WINDY, FIELD)
    )
    one = fall(FIELD, to_depth=940.0, body=body, air=air_column(air, FIELD)).at(DEPTHS)
    assert many.east[0] == pytest.approx(one.east, abs=1e-6)
    assert many.north[0] == pytest.approx(one.north, abs=1e-6)


@pytest.mark.invariant
def test_varied_field_gives_the_fall_in_that_field() -> None:
    """Shifts of latitude, gravity, its gradient and the curvature act like a field built with them, within 1 µm."""
    parts = {
        "gravity": FIELD.gravity,
        "curvature": FIELD.curvature,
        "meridian_radius": FIELD.meridian_radius,
        "prime_vertical_radius": FIELD.prime_vertical_radius,
    }
    plain = assemble_field(latitude=1.0, **parts)
    cases = [
        (Variation(latitude=1e-3), assemble_field(latitude=1.001, **parts)),
        (
            Variation(gravity_factor=1.0001),
            assemble_field(latitude=1.0, **{**parts, "gravity": 1.0001 * plain.gravity}),
        ),
        (
            Variation(curvature_north=1e-9),
            assemble_field(latitude=1.0, **{**parts, "curvature": plain.curvature + 1e-9}),
        ),
        (
            Variation(gravity_gradient=-4.0 * np.pi * GRAVITATIONAL_CONSTANT * 150.0),
            assemble_field(latitude=1.0, rock_density=((0.0, 2820.0),), **parts),
        ),
    ]
    for variation, changed in cases:
        many = fall_ensemble(plain, depths=DEPTHS, variation=variation)
        one = fall(changed, to_depth=940.0).at(DEPTHS)
        nominal = fall(plain, to_depth=940.0).at(940.0)
        assert many.east[0] == pytest.approx(one.east, abs=1e-8)
        assert many.north[0] == pytest.approx(one.north, abs=1e-8)
        moved = abs(float(one.east[-1] - nominal.east)) + abs(float(one.north[-1] - nominal.north))
        assert moved > 10.0 * 1e-8


@pytest.mark.invariant
def test_curvature_toward_east_bends_the_fall_east() -> None:
    """A vertical bending by 1e-9 rad/m toward east moves a falling body by g κ t⁴/24 · g, the integral of g κ z."""
    many = fall_ensemble(FIELD, depths=[300.0], variation=Variation(curvature_east=np.array([0.0, 1e-9])))
    time = float(many.time[0, 0])
    expected = FIELD.gravity**2 * 1e-9 * time**4 / 24.0
    assert float(many.east[1, 0] - many.east[0, 0]) == pytest.approx(expected, rel=1e-3)


@pytest.mark.invariant
@pytest.mark.parametrize("depth", [0.1, 0.5, 0.6])
def test_shallow_falls_of_thrown_members_are_those_of_single_falls(depth: float) -> None:
    """Within the first metres, at their end and just below it, thrown members are where single falls are."""
    variation = Variation(speed_down=np.array([0.0, 0.3, -0.3]))
    many = fall_ensemble(FIELD, depths=[0.0, depth], variation=variation)
    for row, speed in enumerate((0.0, 0.3, -0.3)):
        one = fall(FIELD, to_depth=depth, release=Release(speed_down=speed)).at([0.0, depth])
        assert many.time[row] == pytest.approx(one.time, abs=1e-9)
        assert many.east[row] == pytest.approx(one.east, abs=1e-10)


@pytest.mark.invariant
def test_members_do_not_depend_on_their_company() -> None:
    """Every member of 1300 in several blocks is where it is when it falls alone, within 0.1 µm."""
    rng = np.random.default_rng(20)
    air = air_column(Air(), FIELD)
    shifts = {
        name: 0.002 * rng.standard_normal(1300) for name in ("east", "north", "speed_east", "speed_north")
    }
    many = fall_ensemble(FIELD, depths=[200.0, 500.0], variation=Variation(**shifts), body=STEEL, air=air)
    assert many.east.shape == (1300, 2)
    for row in (0, 511, 512, 1299):
        alone = Variation(**{name: values[row : row + 1] for name, values in shifts.items()})
        one = fall_ensemble(FIELD, depths=[200.0, 500.0], variation=alone, body=STEEL, air=air)
        assert many.east[row] == pytest.approx(one.east[0], abs=1e-7)
        assert many.north[row] == pytest.approx(one.north[0], abs=1e-7)


@pytest.mark.invariant
def test_unchanged_variation_is_the_nominal_fall() -> None:
    """With nothing changed the ensemble is the fall itself in every quantity."""
    air = air_column(WINDY, FIELD)
    many = fall_ensemble(FIELD, depths=DEPTHS, variation=Variation(), body=STEEL, air=air)
    one = fall(FIELD, to_depth=940.0, body=STEEL, air=air).at(DEPTHS)
    for name in (one.name for one in fields(one) if one.name != "depth"):
        assert getattr(many, name)[0] == pytest.approx(getattr(one, name), rel=1e-9, abs=1e-12)


@pytest.mark.invariant
def test_release_errors_are_told_from_changed_forces() -> None:
    """Only a variation of the release leaves the forces as they are."""
    assert Variation(east=np.array([0.0, 1.0]), speed_down=0.1).only_release
    assert not Variation(drag_factor=np.array([1.0, 1.1])).only_release
    assert not Variation(spin_north=0.1).only_release
    assert Variation(east=np.zeros(5), drag_factor=1.1).members == 5


@pytest.mark.invariant
def test_unusable_ensembles_are_refused() -> None:
    """Depths that do not rise, depths above the release and variations of two dimensions raise."""
    with pytest.raises(ParameterError, match="rising depths from the release at 0"):
        fall_ensemble(FIELD, depths=[10.0, 5.0], variation=Variation())
    with pytest.raises(ParameterError, match="rising depths from the release at 2"):
        fall_ensemble(FIELD, depths=[1.0], variation=Variation(), release=Release(depth=2.0))
    with pytest.raises(ParameterError, match="arrays of one dimension"):
        fall_ensemble(FIELD, depths=[1.0], variation=Variation(east=np.zeros((2, 2))))


@pytest.mark.independent
def test_drops_agree_with_scalar_forces_written_apart() -> None:
    """Twelve releases through the drag crisis agree within 1 µm with solve_ivp over forces in plain floats."""
    path = Path(__file__).parents[1] / "bench" / "bench_fall.py"
    spec = importlib.util.spec_from_file_location("bench_fall", path)
    assert spec is not None
    assert spec.loader is not None
    bench = importlib.util.module_from_spec(spec)
    spec.loader.exec_module(bench)
    releases = np.random.default_rng(7).standard_normal((4, 12)) * np.array([[5e-4], [5e-4], [2e-3], [2e-3]])
    variation = Variation(
        east=releases[0], north=releases[1], speed_east=releases[2], speed_north=releases[3]
    )
    many = fall_ensemble(
        bench.FIELD, depths=[bench.DEPTH], variation=variation, body=bench.BODY, air=bench.AIR
    )
    assert np.stack([many.east[:, 0], many.north[:, 0]]) == pytest.approx(
        bench.looped_drops(releases), abs=1e-6
    )
