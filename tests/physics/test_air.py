"""The column of air in a shaft."""

from math import pi

import ambiance
import numpy as np
import pytest

from eastfall.physics.air import GAS_CONSTANT, AirColumn, air_column
from eastfall.physics.errors import ParameterError
from eastfall.physics.field import local_field
from eastfall.physics.settings import Air, Site

FIELD = local_field(Site(latitude=pi / 4, rock_density=((0.0, 0.0),)))


def _column(**changes: object) -> AirColumn:
    return air_column(Air(**changes), FIELD)


@pytest.mark.independent
def test_column_agrees_with_the_icao_atmosphere_below_sea_level() -> None:
    """Density and viscosity down to 2 km below sea level agree with ambiance to 3e-5."""
    depth = np.linspace(0.0, 2000.0, 21)
    standard = ambiance.Atmosphere(-depth)
    column = _column(density=1.225, temperature=288.15)
    # g at 45° is 5e-5 below the standard's 9.80665, and the pressure grows by a quarter.
    assert column.density(depth) == pytest.approx(standard.density, rel=3e-5)
    assert column.temperature(depth) == pytest.approx(standard.temperature, rel=3e-5)
    assert column.viscosity(depth) == pytest.approx(standard.dynamic_viscosity, rel=3e-5)
    assert column.sound_speed(depth) == pytest.approx(standard.speed_of_sound, rel=3e-5)
    assert column.pressure(depth) == pytest.approx(standard.pressure, rel=1e-4)


@pytest.mark.invariant
@pytest.mark.parametrize("gradient", [0.0065, 0.0, 1e-9, -0.003, 0.0342])
def test_column_is_in_hydrostatic_balance(gradient: float) -> None:
    """dp/dz = ρ g at every depth to 1e-6, whatever the temperature gradient, none included."""
    column = _column(temperature_gradient=gradient)
    depth = np.linspace(10.0, 4000.0, 50)
    slope = (column.pressure(depth + 1.0) - column.pressure(depth - 1.0)) / 2.0
    # What is left is the curvature of g over 4 km, 1e-6 of g, and the difference quotient.
    assert slope == pytest.approx(column.density(depth) * FIELD.gravity_at(depth), rel=1e-6)


@pytest.mark.invariant
def test_density_at_the_collar_is_the_stated_one() -> None:
    """The column starts at the density and temperature of the settings, by the gas law."""
    column = _column(density=1.3, temperature=275.0)
    assert column.density(0.0) == pytest.approx(1.3, rel=1e-15)
    assert column.pressure(0.0) == pytest.approx(1.3 * GAS_CONSTANT * 275.0, rel=1e-15)


@pytest.mark.invariant
def test_cross_flow_adds_up_toward_its_azimuth() -> None:
    """A flow toward 90° goes east, toward 180° south; where two rows overlap they add; `to` is outside."""
    column = _column(cross_flow=((100.0, 200.0, 1.0, pi / 2), (150.0, 300.0, 2.0, pi)))
    east, north = column.cross_flow(np.array([99.9, 100.0, 150.0, 200.0, 300.0, np.nan]))
    assert east == pytest.approx([0.0, 1.0, 1.0, 0.0, 0.0, np.nan], abs=1e-15, nan_ok=True)
    assert north == pytest.approx([0.0, 0.0, -2.0, -2.0, 0.0, np.nan], abs=1e-15, nan_ok=True)
    assert column.breaks == (100.0, 150.0, 200.0, 300.0)


@pytest.mark.invariant
def test_vacuum_has_no_density() -> None:
    """Density 0 at the collar is vacuum all the way."""
    column = _column(density=0.0)
    assert column.is_vacuum
    assert np.all(column.density(np.array([0.0, 1000.0])) == 0.0)


@pytest.mark.invariant
@pytest.mark.parametrize(
    ("changes", "message"),
    [
        ({"density": -1.0}, r"density is -1\.0 kg/m³; expected 0 \(vacuum\) or more"),
        ({"temperature": 20.0}, r"temperature is 20\.0 K; expected 100 to 1900 K"),
        ({"cross_flow": ((50.0, 50.0, 1.0, 0.0),)}, "from above to"),
    ],
)
def test_impossible_air_is_refused(changes: dict[str, object], message: str) -> None:
    """Negative density, a temperature in °C and an empty stretch of flow raise with value, unit and range."""
    with pytest.raises(ParameterError, match=message):
        _column(**changes)
