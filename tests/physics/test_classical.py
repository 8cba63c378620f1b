"""The closed forms against each other and against direct quadrature."""

from math import pi

import numpy as np
import pytest
from scipy.integrate import quad, solve_ivp

from eastfall.physics import classical
from eastfall.physics.earth import EARTH_ROTATION, normal_gravity, plumbline_curvature


@pytest.mark.published
@pytest.mark.parametrize(
    ("height", "latitude_deg", "gravity", "millimetres"),
    # Kibble & Berkshire 15.524, UCSD 110B 18.63, Laplace via Arago 21.98: digits reckoned from their formulas.
    [(100.0, 45.0, 9.80620, 15.524), (100.0, 32.0, 9.79500, 18.63), (100.0, 0.0, 9.78033, 21.98)],
)
def test_eastward_formula_gives_the_textbook_numbers(
    height: float, latitude_deg: float, gravity: float, millimetres: float
) -> None:
    """Textbook examples of the first-order formula are met to their digits."""
    found = 1e3 * float(classical.eastward(height, np.radians(latitude_deg), gravity))
    assert found == pytest.approx(millimetres, abs=5e-3)


@pytest.mark.independent
def test_eastward_formula_on_a_point_mass_keeps_its_known_distance_from_the_orbit() -> None:
    """R 6371 km, GM 3.986004418e14, 1000 m at the equator: 694.97050 mm (calculation), the orbit has 694.92692."""
    radius, rotation = 6371e3, 7.292115e-5
    gravity = 3.986004418e14 / radius**2 - rotation**2 * radius
    assert 1e3 * float(classical.eastward(1000.0, 0.0, gravity)) == pytest.approx(694.97050, abs=5e-6)


@pytest.mark.independent
def test_drag_formulas_agree_with_their_differential_equations() -> None:
    """h, t and E of constant drag satisfy v' = g - gv²/V² and u' = 2ωc v - g v u/V²."""
    gravity, terminal, latitude = 9.8062, 60.0, pi / 4
    coriolis = 2.0 * EARTH_ROTATION * np.cos(latitude)

    def rates(_: float, y: np.ndarray) -> list[float]:
        _, v, _, u = y
        return [v, gravity * (1.0 - v * v / terminal**2), u, coriolis * v - gravity * v * u / terminal**2]

    time = float(classical.drag_time(400.0, gravity, terminal))
    end = solve_ivp(rates, (0.0, time), [0.0] * 4, method="DOP853", rtol=1e-12, atol=1e-14).y[:, -1]
    assert end[0] == pytest.approx(400.0, rel=1e-11)
    assert end[2] == pytest.approx(
        float(classical.drag_eastward(400.0, latitude, gravity, terminal)), rel=1e-10
    )


@pytest.mark.invariant
def test_drag_formulas_go_over_into_the_vacuum_ones() -> None:
    """With terminal speed far above the fall's own, time and east are those without air."""
    assert float(classical.drag_time(100.0, 9.8, 1e5)) == pytest.approx(
        float(classical.fall_time(100.0, 9.8)), rel=1e-6
    )
    with_drag = float(classical.drag_eastward(100.0, 0.7, 9.8, 5e3))
    assert with_drag == pytest.approx(float(classical.eastward(100.0, 0.7, 9.8)), rel=1e-4)


@pytest.mark.invariant
def test_drag_time_does_not_overflow_for_long_falls() -> None:
    """Far past terminal speed the time grows by height over speed."""
    later, sooner = classical.drag_time(np.array([1e6, 1e6 - 90.0]), 9.8, 9.0)
    assert later - sooner == pytest.approx(10.0, rel=1e-9)


@pytest.mark.invariant
def test_olbers_formula_is_the_first_order_one_without_air() -> None:
    """With the time of a fall in vacuum it is ⅓ ω cos φ g t³ for ω = 2π/τ."""
    time = float(classical.fall_time(80.0, 9.8))
    expected = classical.eastward(80.0, 0.9, 9.8, 2.0 * pi / classical.SIDEREAL_DAY)
    assert classical.olbers(80.0, time, 0.9, 9.8) == pytest.approx(float(expected), rel=1e-12)


@pytest.mark.independent
def test_orbit_conserves_angular_momentum_over_the_fall() -> None:
    """∫ L/r² dt along the fall, r by quadrature over height, gives the orbit's time and offset."""
    radius, gm, height = 6371e3, 3.986004418e14, 1000.0
    momentum = EARTH_ROTATION * radius**2

    def inward(depth: float) -> float:
        """Radial speed by energy and angular momentum, differences taken before they lose digits."""
        r = radius - depth
        return np.sqrt(
            2.0 * gm * depth / (r * radius) - momentum**2 * (radius + r) * depth / (radius * r) ** 2
        )

    # depth = s² takes the square root out of the start.
    time = quad(lambda s: 2.0 * s / inward(s * s), 1e-9, np.sqrt(height), epsrel=1e-12)[0]
    turned = quad(
        lambda s: 2.0 * s / inward(s * s) * (momentum / (radius - s * s) ** 2 - EARTH_ROTATION),
        1e-9,
        np.sqrt(height),
        epsrel=1e-10,
    )[0]
    found_time, found_east = classical.orbit_fall(height, radius, gm)
    assert found_time == pytest.approx(time, abs=1e-8)
    assert found_east == pytest.approx((radius - height) * turned, rel=1e-7)
    assert 1e3 * found_east == pytest.approx(694.92692, abs=5e-6)


@pytest.mark.published
def test_equatorward_constants_are_the_printed_ones() -> None:
    """2/3 for constant g (Sivukhin); 4 = 2/3 + 5/6·4 for a sphere and a bob (Marion & Thornton 10-13)."""
    assert classical.equatorward_coefficients(0.0)["straight"] == pytest.approx(2.0 / 3.0, rel=1e-15)
    assert classical.equatorward_coefficients(4.0)["hung-line"] == pytest.approx(4.0, rel=1e-15)
    assert classical.equatorward_coefficients(4.0)["field-line"] == pytest.approx(2.0, rel=1e-15)


@pytest.mark.independent
@pytest.mark.parametrize("latitude", [0.3, -0.9, 1.3])
def test_the_equatorward_fall_in_a_constant_field_is_that_of_its_equation_of_motion(latitude: float) -> None:
    """C = 2/3 at any latitude: r̈ = g - 2ω × ṙ integrated, without the centrifugal force, over 200 m."""
    omega = EARTH_ROTATION * np.array([np.cos(latitude), 0.0, -np.sin(latitude)])  # north, east, down

    def motion(_: float, y: np.ndarray) -> np.ndarray:
        return np.concatenate([y[3:], np.array([0.0, 0.0, 9.8]) - 2.0 * np.cross(omega, y[3:])])

    def down(_: float, y: np.ndarray) -> float:
        return float(y[2]) - 200.0

    down.terminal = True
    found = solve_ivp(motion, (0.0, 10.0), np.zeros(6), "DOP853", events=down, rtol=1e-13, atol=1e-15)
    # South is positive there, north here.
    south = float(classical.equatorward(200.0, latitude, 9.8, 2.0 / 3.0))
    assert -float(found.y[0, -1]) == pytest.approx(south, rel=1e-5)


@pytest.mark.published
@pytest.mark.parametrize("latitude", [0.3, 0.6, -0.9, 1.3])
def test_the_plumb_line_bends_three_times_as_rotation_would_at_any_latitude(latitude: float) -> None:
    """0.17″/km · sin 2φ (Heiskanen & Moritz 1967, from memory, unconfirmed) is K = 3.04 ± 0.09 by its digits."""
    curvature = np.radians(0.17 / 3.6e6) * np.sin(2.0 * latitude)
    ratio = classical.curvature_ratio(curvature, latitude, 9.8)
    assert ratio == pytest.approx(3.04, abs=0.01)
    exact = classical.curvature_ratio(
        float(plumbline_curvature(latitude)), latitude, float(normal_gravity(latitude))
    )
    assert exact == pytest.approx(ratio, rel=0.005 / 0.17)
