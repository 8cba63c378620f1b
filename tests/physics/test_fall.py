"""One body's fall: accuracy, limits, reference lines, warnings."""

from dataclasses import FrozenInstanceError, fields, replace
from math import pi

import numpy as np
import pytest
from scipy.integrate import quad, solve_ivp

from eastfall.physics import classical
from eastfall.physics.air import AirColumn, air_column
from eastfall.physics.earth import GRS80
from eastfall.physics.errors import ParameterError
from eastfall.physics.fall import Falling, Release, Trajectory, fall
from eastfall.physics.field import LocalField, local_field
from eastfall.physics.motion import UNCHANGED, Forces
from eastfall.physics.published.model_fields import constant_field, turning_sphere
from eastfall.physics.settings import Air, Body, Site

SITE = Site(latitude=np.radians(57.3), rock_density=((0.0, 2670.0), (410.0, 2810.0)))
FIELD = local_field(SITE)
STEEL = Body(mass=0.514, diameter=0.05)
GIVEN = replace(STEEL, drag_coefficient=0.45)
LIGHT = Body(mass=0.0027, diameter=0.04)
GUSTY = Air(cross_flow=((480.0, 500.0, 1.0, pi / 2), (600.0, 700.0, 0.3, pi)))
BENT = local_field(
    replace(SITE, deflections=((100.0, 5e-6, 2e-6), (400.0, 2e-5, 1e-6), (900.0, 2.5e-5, -4e-6)))
)


def _solved(
    field: LocalField, depths: list[float], body: Body | None, air: AirColumn | None, release: Release
) -> np.ndarray:
    """Time, east, north by Dormand and Prince's eighth-order method in time, stopped at every depth."""
    forces = Forces(field, body, air, release, UNCHANGED)

    def rates(_: float, y: np.ndarray) -> list[float]:
        north, east, down, v_north, v_east, v_down = (np.array([[one]]) for one in y)
        around = forces.surroundings(down)
        now = forces.acceleration(around, east, north, v_east=v_east, v_north=v_north, v_down=v_down)
        return [*y[3:], now.north.item(), now.east.item(), now.down.item()]

    rows, time = [], 0.0
    state = [
        release.north,
        release.east,
        release.depth,
        release.speed_north,
        release.speed_east,
        release.speed_down,
    ]
    for depth in depths:

        def passing(_: float, y: np.ndarray, depth: float = depth) -> float:
            return y[2] - depth

        passing.terminal, passing.direction = True, 1.0  # type: ignore[attr-defined]
        found = solve_ivp(
            rates,
            (time, time + 1e4),
            state,
            method="DOP853",
            rtol=1e-11,
            atol=1e-12,
            events=passing,
            max_step=2.0,
        )
        time, state = found.t_events[0][0], found.y_events[0][0]
        rows.append((time, state[1], state[0]))
    return np.array(rows).T


# Flow edges are depths of their own, so that the reference method does not step across them.
DEPTHS = [1.0, 30.0, 100.0, 400.0, 410.0, 480.0, 500.0, 600.0, 700.0, 900.0, 940.0]


@pytest.mark.independent
@pytest.mark.parametrize(
    ("field", "body", "air", "release"),
    [
        pytest.param(FIELD, None, None, Release(), id="vacuum"),
        pytest.param(FIELD, STEEL, Air(), Release(), id="steel sphere through the drag crisis"),
        pytest.param(FIELD, GIVEN, replace(GUSTY, vertical=-5.0), Release(), id="cross-flow and upcast"),
        pytest.param(
            FIELD, LIGHT, Air(vertical=3.0), Release(), id="light body in a downcast faster than itself"
        ),
        pytest.param(
            FIELD, STEEL, Air(), Release(speed_down=3.0, spin_north=10.0), id="thrown down with spin"
        ),
        pytest.param(
            FIELD, STEEL, Air(), Release(speed_down=-5.0, speed_east=0.1), id="thrown up through air"
        ),
        pytest.param(
            FIELD, None, None, Release(depth=0.5, north=0.2, speed_down=-40.0), id="thrown up in vacuum"
        ),
        pytest.param(BENT, STEEL, Air(), Release(), id="measured deflections"),
    ],
)
def test_path_agrees_with_dop853(
    field: LocalField, body: Body | None, air: Air | None, release: Release
) -> None:
    """At every depth east and north agree with an eighth-order integration in time within 10 nm."""
    column = None if air is None else air_column(air, field)
    expected = _solved(field, DEPTHS, body, column, release)
    there = fall(field, to_depth=940.0, body=body, air=column, release=release).at(DEPTHS)
    assert there.time == pytest.approx(expected[0], abs=2e-7)
    assert there.east == pytest.approx(expected[1], abs=1e-8)
    assert there.north == pytest.approx(expected[2], abs=1e-8)


@pytest.mark.invariant
@pytest.mark.parametrize("body", [None, STEEL, GIVEN])
def test_looked_up_offsets_are_those_of_a_fall_that_ends_there(body: Body | None) -> None:
    """Over 4 km every looked-up offset is within 1 µm of integrating to that depth."""
    air = air_column(GUSTY, FIELD)
    whole = fall(FIELD, to_depth=4000.0, body=body, air=air)
    for depth in (0.3, 7.0, 123.4, 499.0, 1500.0, 3999.0):
        there, ended = whole.at(depth), fall(FIELD, to_depth=depth, body=body, air=air).at(depth)
        assert float(there.east) == pytest.approx(float(ended.east), abs=1e-6)
        assert float(there.north) == pytest.approx(float(ended.north), abs=1e-6)


@pytest.mark.published
def test_falls_near_the_ground_give_the_first_order_formula() -> None:
    """⅓ ω cos φ √(8h³/g) is met to (ωt)² and the growth of g, at latitudes of both hemispheres and the equator."""
    for latitude in np.radians([-60.0, 0.0, 45.0, 80.0]):
        field = constant_field(float(latitude), 9.80620)
        there = fall(field, to_depth=100.0).at([1.0, 10.0, 100.0])
        assert there.east == pytest.approx(
            classical.eastward([1.0, 10.0, 100.0], latitude, 9.80620), rel=2e-7
        )


@pytest.mark.independent
def test_equatorial_fall_agrees_with_a_kepler_orbit() -> None:
    """On a point-mass Earth 1000 m at the equator agree with the orbit in the inertial frame within 10 nm."""
    time, east = classical.orbit_fall(1000.0, 6371e3, 3.986004418e14)
    there = fall(turning_sphere(0.0, 6371e3, 3.986004418e14), to_depth=1000.0).at(1000.0)
    assert float(there.time) == pytest.approx(time, abs=1e-9)
    assert float(there.east) == pytest.approx(east, abs=1e-8)
    assert float(there.north) == 0.0


@pytest.mark.published
@pytest.mark.parametrize("height", [10.0, 100.0, 400.0])
def test_equatorward_deflection_depends_on_the_reference_line(height: float) -> None:
    """C is 2/3 - K/6, 2/3 + K/3 and 2/3 + 5K/6 for straight vertical, field line and bob, on the ellipsoid."""
    field = local_field(Site(latitude=pi / 4, rock_density=((0.0, 0.0),)), ellipsoid=GRS80)
    ratio = classical.curvature_ratio(field.curvature, field.latitude, field.gravity)
    south = -float(fall(field, to_depth=height).at(height).north)
    lines = {
        "straight": 0.0,
        "field-line": 0.5 * field.curvature * height**2,
        "hung-line": field.curvature * height**2,
    }
    for line, coefficient in classical.equatorward_coefficients(ratio).items():
        expected = float(classical.equatorward(height, field.latitude, field.gravity, coefficient))
        # The coefficients are of lowest order in h/R.
        assert south + lines[line] == pytest.approx(expected, rel=1e-5 + 5.0 * height / 6.37e6, abs=0.0)


@pytest.mark.published
def test_curvature_ratio_of_the_ellipsoid_is_the_stated_one() -> None:
    """K is 4 on a sphere and 3.063 on GRS80 at 45° (calculation)."""
    field = local_field(Site(latitude=pi / 4), ellipsoid=GRS80)
    assert classical.curvature_ratio(field.curvature, pi / 4, field.gravity) == pytest.approx(3.063, abs=5e-4)
    sphere = turning_sphere(pi / 4, 6371e3, 3.986004418e14)
    assert classical.curvature_ratio(sphere.curvature, pi / 4, sphere.gravity) == pytest.approx(
        4.0, rel=1e-12
    )


@pytest.mark.published
@pytest.mark.parametrize("height", [5.0, 50.0])
def test_body_thrown_up_lands_west(height: float) -> None:
    """Thrown straight up and back it is (4/3) ω cos φ √(8h³/g) to the west: Goldstein, chapter 4."""
    field = constant_field(pi / 4, 9.80620)
    release = Release(speed_down=-float(np.sqrt(2.0 * field.gravity * height)))
    back = fall(field, to_depth=1.0, release=release).at(0.0)
    assert float(back.east) == pytest.approx(
        float(classical.thrown_up(height, pi / 4, field.gravity)), rel=1e-6
    )
    assert float(back.east) < 0.0


@pytest.mark.invariant
def test_hemispheres_mirror_each_other() -> None:
    """At the opposite latitude the body falls as far east and as far toward the other pole."""
    north = fall(local_field(Site(latitude=0.8)), to_depth=500.0).at(500.0)
    south = fall(local_field(Site(latitude=-0.8)), to_depth=500.0).at(500.0)
    assert float(south.east) == pytest.approx(float(north.east), rel=1e-14)
    assert float(south.north) == pytest.approx(-float(north.north), rel=1e-12, abs=0.0)


@pytest.mark.invariant
def test_heavier_bodies_approach_the_fall_in_vacuum() -> None:
    """The effect of air on time goes down tenfold when the body of that size is ten times as heavy."""
    air = air_column(Air(), FIELD)
    vacuum = float(fall(FIELD, to_depth=100.0).at(100.0).time)
    delays = [
        float(fall(FIELD, to_depth=100.0, body=replace(GIVEN, mass=mass), air=air).at(100.0).time) - vacuum
        for mass in (50.0, 500.0)
    ]
    assert delays[0] / delays[1] == pytest.approx(10.0, rel=0.01)


@pytest.mark.invariant
def test_no_air_is_the_same_as_air_of_zero_density() -> None:
    """Air of density zero neither brakes nor lifts: a body falls like a point in vacuum, to the last bit."""
    vacuum = fall(FIELD, to_depth=300.0)
    empty = fall(FIELD, to_depth=300.0, body=STEEL, air=air_column(Air(density=0.0), FIELD))
    assert np.array_equal(vacuum.east, empty.east)
    assert np.array_equal(vacuum.time, empty.time)


@pytest.mark.invariant
@pytest.mark.parametrize("speed", [-9e-159, -1e-30, -1e-10, -2e-9])
def test_the_least_of_throws_up_is_a_release_from_rest(speed: float) -> None:
    """However slow a throw is, the body turns and falls."""
    air = air_column(Air(), FIELD)
    thrown = fall(FIELD, to_depth=300.0, body=STEEL, air=air, release=Release(speed_down=speed))
    rest = fall(FIELD, to_depth=300.0, body=STEEL, air=air)
    assert float(thrown.at(300.0).time) == pytest.approx(float(rest.at(300.0).time), rel=1e-9)


@pytest.mark.invariant
@pytest.mark.parametrize("coefficient", [0.0, 1e-300, 1e-12])
def test_a_body_without_drag_falls_in_air_as_one_of_less_weight(coefficient: float) -> None:
    """With the coefficient at its least, buoyancy is what the air does: the limit of a vanishing one is met."""
    air = air_column(Air(), FIELD)

    def time(drag: float) -> float:
        body = replace(STEEL, drag_coefficient=drag)
        return float(fall(FIELD, to_depth=940.0, body=body, air=air).at(940.0).time)

    assert time(coefficient) == pytest.approx(time(1e-9), rel=1e-8)
    assert time(coefficient) > float(fall(FIELD, to_depth=940.0).at(940.0).time)


@pytest.mark.invariant
def test_light_body_falls_at_its_terminal_speed_against_the_air() -> None:
    """In a downcast a light body ends up faster by the speed of the air, buoyancy and drag in balance."""
    body = replace(LIGHT, drag_coefficient=0.45)
    still, moving = Air(temperature_gradient=0.0342), Air(temperature_gradient=0.0342, vertical=2.0)
    speeds = [
        float(fall(FIELD, to_depth=100.0, body=body, air=air_column(one, FIELD)).speed[-1])
        for one in (still, moving)
    ]
    weight = body.mass - 1.25 * pi / 6.0 * body.diameter**3
    expected = np.sqrt(
        2.0 * weight * float(FIELD.gravity_at(100.0)) / (1.25 * 0.45 * pi / 4.0 * body.diameter**2)
    )
    assert speeds[0] == pytest.approx(expected, rel=1e-5)
    assert speeds[1] - speeds[0] == pytest.approx(2.0, abs=1e-4)


@pytest.mark.invariant
def test_steady_crossflow_carries_a_light_body_along() -> None:
    """A body far past its terminal speed drifts sideways as fast as the air does."""
    air = air_column(Air(cross_flow=((0.0, 1000.0, 0.5, pi / 2),)), FIELD)
    there = fall(FIELD, to_depth=300.0, body=LIGHT, air=air).at(300.0)
    # Coriolis adds 2ω cos φ V/(g/V), a milimetre per second.
    assert float(there.speed_east) == pytest.approx(0.5, abs=2e-3)


@pytest.mark.invariant
def test_spin_deflects_by_the_rule_of_the_cross_product() -> None:
    """A sphere spinning about north and falling is pushed to the west, about east to the north (Ω × u)."""
    air = air_column(Air(), FIELD)
    paths = [
        fall(FIELD, to_depth=50.0, body=STEEL, air=air, release=one).at(50.0)
        for one in (Release(), Release(spin_north=5.0), Release(spin_east=5.0))
    ]
    assert float(paths[1].east - paths[0].east) < -0.01
    assert float(paths[2].north - paths[0].north) > 0.01


@pytest.mark.invariant
def test_release_of_the_body_is_used_unless_another_is_given() -> None:
    """The body's own release stands for itself, and a Release in its place replaces all of it."""
    body = replace(STEEL, release_east=0.1, release_speed_north=0.01)
    own = fall(FIELD, to_depth=20.0, body=body).at([0.0, 20.0])
    assert float(own.east[0]) == pytest.approx(0.1, abs=1e-15)
    assert float(own.north[1]) == pytest.approx(0.01 * float(own.time[1]), rel=1e-3)
    given = fall(FIELD, to_depth=20.0, body=body, release=Release(north=0.3)).at(0.0)
    assert [float(given.east), float(given.north)] == pytest.approx([0.0, 0.3], abs=1e-15)


@pytest.mark.invariant
def test_lookup_keeps_shape_and_gives_nan_outside() -> None:
    """Depths of any shape come back in it; NaN, above the release and below the end give NaN in every quantity."""
    path = fall(FIELD, to_depth=100.0, release=Release(depth=2.0))
    depth = np.array([[1.9, 2.0, np.nan], [50.0, 100.0, 100.1]])
    there = path.at(depth)
    for one in fields(Falling):
        values = getattr(there, one.name)
        assert values.shape == (2, 3)
        if one.name != "depth":
            assert np.isnan(values).tolist() == [[True, False, True], [False, False, True]]
    assert float(path.at(2.0).time) == pytest.approx(0.0, abs=1e-15)
    assert path.max_depth == 100.0


@pytest.mark.invariant
@pytest.mark.parametrize(
    "release", [Release(), Release(depth=3.0, speed_down=6.0), Release(speed_down=-6.0, speed_east=0.2)]
)
def test_the_samples_of_a_path_are_what_it_gives_at_their_depths(release: Release) -> None:
    """Dropped, thrown down and thrown up: each column of the samples is that of the look-up, to its rounding."""
    path = fall(FIELD, to_depth=200.0, body=STEEL, air=air_column(Air(), FIELD), release=release)
    there = path.at(path.depth)
    for name in ("time", "east", "north", "speed"):
        # At a release thrown up the parameter itself is a root of a difference of metres.
        np.testing.assert_allclose(
            getattr(path, name), getattr(there, name), rtol=1e-9, atol=1e-9, err_msg=name
        )


@pytest.mark.independent
def test_the_speed_of_a_body_thrown_sideways_follows_from_its_energy() -> None:
    """In vacuum v² = 3² + 4² + 2 ∫ g dz: the Coriolis acceleration does no work; gravity by quadrature."""
    path = fall(FIELD, to_depth=300.0, release=Release(speed_east=3.0, speed_north=-4.0))
    depth = np.array([0.0, 0.5, 40.0, 300.0])
    fallen = [quad(lambda z: float(FIELD.gravity_at(z)), 0.0, one)[0] for one in depth]
    # Level surfaces curve away under 3 m/s and 4 m/s by 0.3 mm in 300 m: 6e-7 of the energy.
    assert path.at(depth).speed == pytest.approx(np.sqrt(25.0 + 2.0 * np.array(fallen)), rel=1e-6)


@pytest.mark.invariant
def test_trajectory_is_read_only_and_rises_in_depth_and_time() -> None:
    """The samples run down from release to end, and neither they nor the record can be changed."""
    path = fall(FIELD, to_depth=4000.0, body=STEEL, air=air_column(Air(), FIELD))
    assert (path.depth[0], path.depth[-1]) == (0.0, 4000.0)
    assert np.all(np.diff(path.depth) > 0.0)
    assert np.all(np.diff(path.time) > 0.0)
    assert path.east.shape == path.north.shape == path.speed.shape == path.depth.shape
    with pytest.raises(ValueError, match="read-only"):
        path.east[0] = 1.0
    with pytest.raises(FrozenInstanceError):
        path.apex = 1.0  # type: ignore[misc]


def _warned(path: Trajectory, text: str) -> bool:
    return any(text in one for one in path.warnings)


@pytest.mark.invariant
def test_path_says_where_it_is_outside_the_model() -> None:
    """Drag crisis, end of the curve, speed of sound, swamping air and missing deflections are each put in words."""
    air = air_column(Air(), FIELD)
    assert fall(FIELD, to_depth=1000.0).warnings == ()
    assert fall(FIELD, to_depth=20.0, body=STEEL, air=air).warnings == ()
    assert _warned(fall(FIELD, to_depth=900.0, body=STEEL, air=air), "drag crisis")
    assert not _warned(fall(FIELD, to_depth=900.0, body=GIVEN, air=air), "drag crisis")
    assert _warned(
        fall(FIELD, to_depth=900.0, body=Body(mass=500.0, diameter=0.5), air=air), "end of the drag curve"
    )
    assert _warned(fall(FIELD, to_depth=1500.0, body=Body(mass=50.0, diameter=0.05), air=air), "of sound")
    blown = fall(FIELD, to_depth=900.0, body=STEEL, air=air_column(GUSTY, FIELD))
    assert not _warned(blown, "the landing tells the air")
    whole = Air(cross_flow=((0.0, 900.0, 1.0, 0.0),))
    assert _warned(
        fall(FIELD, to_depth=900.0, body=STEEL, air=air_column(whole, FIELD)), "the landing tells the air"
    )
    assert _warned(fall(BENT, to_depth=940.0), "measured down to 900 m")
    assert _warned(
        fall(FIELD, to_depth=10.0, body=STEEL, air=air, release=Release(spin_north=1.0)), "spinning body"
    )


@pytest.mark.invariant
@pytest.mark.parametrize(
    ("to_depth", "body", "air", "message"),
    [
        (-1.0, None, Air(), r"to_depth is -1\.0 m; expected a depth below the release at 0\.0 m"),
        (float("nan"), None, Air(), "to_depth is nan m"),
        (
            100.0,
            Body(mass=1e-6, diameter=0.05),
            Air(),
            r"mass is 1e-06 kg; expected a body heavier than the air",
        ),
        (
            100.0,
            LIGHT,
            Air(vertical=-20.0),
            r"vertical is -20\.0 m/s; expected an upcast too slow to carry the body",
        ),
        (100.0, Body(mass=0.0, diameter=0.05), Air(), "a mass and diameter above 0"),
    ],
)
def test_impossible_falls_are_refused(to_depth: float, body: Body | None, air: Air, message: str) -> None:
    """A depth above the release, a balloon and an upcast that carries the body raise with value, unit and range."""
    with pytest.raises(ParameterError, match=message):
        fall(FIELD, to_depth=to_depth, body=body, air=air_column(air, FIELD))
