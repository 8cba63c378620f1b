"""Normal gravity, radii, plumb-line curvature and shells."""

from math import pi

import boule
import numpy as np
import pytest

from eastfall.physics.earth import (
    EARTH_ROTATION,
    GRAVITATIONAL_CONSTANT,
    GRS80,
    WGS84,
    Ellipsoid,
    Shell,
    free_air_gradient,
    meridian_radius,
    normal_gravity,
    plumbline_curvature,
    prime_vertical_radius,
    shell_gravity,
)
from eastfall.physics.errors import ParameterError
from eastfall.physics.published.model_fields import prem_shells

LATITUDES = np.radians(np.linspace(-90.0, 90.0, 37))


@pytest.mark.published
def test_wgs84_eccentricity_agrees_with_the_standard() -> None:
    """The flattening gives e² as printed: NGA.STND.0036 (2014), 6.69437999014e-3."""
    assert WGS84.eccentricity_squared == pytest.approx(6.69437999014e-3, abs=1e-14)
    assert GRS80.eccentricity_squared == pytest.approx(0.00669438002290, abs=5e-15)


@pytest.mark.independent
@pytest.mark.parametrize(("ours", "theirs"), [(WGS84, boule.WGS84), (GRS80, boule.GRS80)])
def test_the_four_constants_that_define_an_ellipsoid_are_those_boule_carries(
    ours: Ellipsoid, theirs: boule.Ellipsoid
) -> None:
    """Semimajor axis, flattening, GM and rotation, to the last digit."""
    assert (ours.semimajor_axis, ours.flattening) == (theirs.semimajor_axis, theirs.flattening)
    assert (ours.gm, ours.rotation) == (theirs.geocentric_grav_const, theirs.angular_velocity)


@pytest.mark.published
def test_gravity_ratio_agrees_with_grs80() -> None:
    """Helmert's m is 0.00344978600308: Moritz (1980)."""
    assert GRS80.gravity_ratio == pytest.approx(0.00344978600308, abs=5e-15)


@pytest.mark.independent
@pytest.mark.parametrize(("ours", "theirs"), [(WGS84, boule.WGS84), (GRS80, boule.GRS80)])
def test_normal_gravity_agrees_with_boule_on_the_ellipsoid(ours: Ellipsoid, theirs: boule.Ellipsoid) -> None:
    """Somigliana's formula agrees with boule's closed form to 1 µGal, what its printed constants carry."""
    expected = theirs.normal_gravity((None, np.degrees(LATITUDES), 0.0), si_units=True)
    assert normal_gravity(LATITUDES, 0.0, ours) == pytest.approx(expected, abs=1e-8)


@pytest.mark.independent
@pytest.mark.parametrize("height", [100.0, 1000.0, 5000.0])
def test_height_formula_agrees_with_boule_above_the_ellipsoid(height: float) -> None:
    """The second-order formula agrees with the closed form to what third order leaves: 4 g (h/a)³ and f² h/a."""
    expected = boule.GRS80.normal_gravity((None, np.degrees(LATITUDES), height), si_units=True)
    ratio = height / GRS80.semimajor_axis
    left_out = 9.8 * (
        4.0 * ratio**3 + 10.0 * GRS80.flattening**2 * ratio + 10.0 * GRS80.flattening * ratio**2
    )
    assert normal_gravity(LATITUDES, height, GRS80) == pytest.approx(expected, abs=left_out + 1e-8)


@pytest.mark.independent
def test_curvature_is_the_growth_of_gravity_along_the_ellipsoid() -> None:
    """κ is (1/γM) dγ/dφ, here by central differences of boule's gravity over the ellipsoid, a level surface."""
    phi, step = np.radians(np.array([-70.0, -20.0, 10.0, 45.0, 80.0])), 1e-3
    north, south = (
        boule.GRS80.normal_gravity((None, np.degrees(phi + one), 0.0), si_units=True) for one in (step, -step)
    )
    middle = boule.GRS80.normal_gravity((None, np.degrees(phi), 0.0), si_units=True)
    expected = (north - south) / (2.0 * step) / middle / meridian_radius(phi, GRS80)
    assert plumbline_curvature(phi, GRS80) == pytest.approx(expected, rel=1e-5, abs=0.0)


@pytest.mark.independent
def test_curvature_at_a_height_is_that_of_a_level_surface_there() -> None:
    """κ at 2 km follows from boule's gravity along a surface that falls poleward by h γ'/γ, to 1e-5 of itself."""
    phi, step, height = np.radians(np.array([-60.0, 30.0, 45.0])), 1e-3, 2000.0

    def on_level(at: np.ndarray) -> np.ndarray:
        base = boule.GRS80.normal_gravity((None, np.degrees(phi), 0.0), si_units=True)
        here = boule.GRS80.normal_gravity((None, np.degrees(at), 0.0), si_units=True)
        return boule.GRS80.normal_gravity((None, np.degrees(at), height * base / here), si_units=True)

    slope = (on_level(phi + step) - on_level(phi - step)) / (2.0 * step)
    expected = slope / on_level(phi) / (meridian_radius(phi, GRS80) + height)
    assert plumbline_curvature(phi, GRS80, height) == pytest.approx(expected, rel=1e-5, abs=0.0)


@pytest.mark.published
def test_curvature_follows_the_printed_value_over_latitude() -> None:
    """κ is 0.17″/km · sin 2φ within its printed digits: Heiskanen & Moritz (1967), from memory, unconfirmed."""
    expected = 0.17 * np.sin(2.0 * LATITUDES)
    assert np.degrees(plumbline_curvature(LATITUDES, GRS80)) * 3.6e6 == pytest.approx(expected, abs=0.005)


@pytest.mark.invariant
def test_curvature_turns_its_sign_at_the_equator() -> None:
    """The vertical bends toward the nearer pole, so κ is odd in latitude and zero at equator and poles."""
    assert plumbline_curvature(-LATITUDES) == pytest.approx(-plumbline_curvature(LATITUDES), abs=1e-25)
    assert plumbline_curvature(np.array([-pi / 2, 0.0, pi / 2])) == pytest.approx(0.0, abs=1e-24)
    assert plumbline_curvature(pi / 4) > 0.0


@pytest.mark.invariant
def test_free_air_gradient_is_the_slope_of_the_height_formula() -> None:
    """Bruns's gradient agrees with -dγ/dh of the height formula, within the flattening squared."""
    phi = np.radians(np.array([0.0, 45.0, 90.0]))
    by_bruns = free_air_gradient(
        normal_gravity(phi, 0.0, GRS80), meridian_radius(phi, GRS80), prime_vertical_radius(phi, GRS80)
    )
    by_height = (normal_gravity(phi, -1.0, GRS80) - normal_gravity(phi, 1.0, GRS80)) / 2.0
    assert by_bruns == pytest.approx(by_height, rel=10.0 * GRS80.flattening**2)


@pytest.mark.published
def test_free_air_gradient_is_the_usual_one() -> None:
    """F is 0.3086 mGal/m at 45°: Hofmann-Wellenhof & Moritz (2006), Physical Geodesy."""
    field = free_air_gradient(
        normal_gravity(pi / 4), meridian_radius(pi / 4), prime_vertical_radius(pi / 4), EARTH_ROTATION
    )
    assert 1e5 * field == pytest.approx(0.3086, abs=5e-5)


@pytest.mark.invariant
def test_radii_meet_at_the_pole() -> None:
    """M and N are both a²/b at the pole, and a(1 - e²) and a at the equator."""
    polar = GRS80.semimajor_axis / (1.0 - GRS80.flattening)
    assert meridian_radius(pi / 2, GRS80) == pytest.approx(polar, rel=1e-14)
    assert prime_vertical_radius(pi / 2, GRS80) == pytest.approx(polar, rel=1e-14)
    assert prime_vertical_radius(0.0, GRS80) == GRS80.semimajor_axis


@pytest.mark.invariant
def test_inside_a_hollow_shell_nothing_pulls() -> None:
    """Attraction is zero at every radius inside a hollow shell (Newton), and outside that of a point of its mass."""
    shell = Shell(inner=5e6, outer=6e6, coefficients=(4000.0,))
    assert np.all(shell_gravity(np.array([1.0, 1e6, 4.999e6, 5e6]), [shell]) == 0.0)
    mass = 4000.0 * 4.0 / 3.0 * pi * (6e6**3 - 5e6**3)
    assert shell_gravity(9e6, [shell]) == pytest.approx(GRAVITATIONAL_CONSTANT * mass / 9e6**2, rel=1e-14)


@pytest.mark.invariant
def test_gravity_of_the_layered_earth_hardly_changes_over_its_outer_half() -> None:
    """Between the surface and the core PREM's gravity stays within 10.0 ± 0.7 (common practice, no source)."""
    radius = np.linspace(3480e3, 6371e3, 200)
    assert np.all(np.abs(shell_gravity(radius, prem_shells()) - 10.0) < 0.75)


@pytest.mark.invariant
def test_splitting_a_shell_changes_nothing() -> None:
    """Two shells that share a border pull like the one they were cut from."""
    whole = Shell(inner=1e6, outer=6e6, coefficients=(5000.0, -1000.0), scale=6e6)
    parts = [
        Shell(inner=1e6, outer=3e6, coefficients=whole.coefficients, scale=6e6),
        Shell(inner=3e6, outer=6e6, coefficients=whole.coefficients, scale=6e6),
    ]
    radius = np.array([2e6, 3e6, 5e6, 7e6])
    assert shell_gravity(radius, parts) == pytest.approx(shell_gravity(radius, [whole]), rel=1e-14)


@pytest.mark.invariant
def test_bad_parameters_are_refused_with_their_range() -> None:
    """A latitude beyond the pole, a radius of zero and shells that overlap raise with value, unit and range."""
    with pytest.raises(ParameterError, match=r"latitude is 1\.6 rad; expected -pi/2 to pi/2"):
        normal_gravity(1.6)
    with pytest.raises(ParameterError, match=r"latitude is -1\.6 rad"):
        normal_gravity(-1.6)
    with pytest.raises(ParameterError, match=r"radius is 0\.0 m; expected more than 0 m"):
        shell_gravity(0.0, prem_shells())
    with pytest.raises(ParameterError, match="shells that do not overlap"):
        shell_gravity(
            1.0,
            [
                Shell(inner=0.0, outer=2.0, coefficients=(1.0,)),
                Shell(inner=1.0, outer=3.0, coefficients=(1.0,)),
            ],
        )
    with pytest.raises(ParameterError, match="0 <= inner < outer"):
        Shell(inner=2.0, outer=1.0, coefficients=(1.0,))


@pytest.mark.invariant
def test_nan_latitude_gives_nan() -> None:
    """Missing samples stay missing."""
    assert np.isnan(normal_gravity(np.array([np.nan, 0.0]))).tolist() == [True, False]
