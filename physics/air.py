"""The air in a shaft as a still or flowing column of ideal gas: density, viscosity and flow by depth.

What it does to a body or a wire is in `drag`, `motion` and the line modules.
"""

from dataclasses import dataclass

import numpy as np
import numpy.typing as npt

from eastfall.physics.earth import Array
from eastfall.physics.errors import ParameterError
from eastfall.physics.field import LocalField
from eastfall.physics.settings import Air

GAS_CONSTANT = 287.05287
"""Specific gas constant of dry air [J/(kg K)]; ICAO Doc 7488/3 (1993)."""

ADIABATIC_INDEX = 1.4
"""Of air [1]; ICAO Doc 7488/3 (1993)."""


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class AirColumn:
    """Air in hydrostatic balance, its temperature linear in depth; build it with `air_column`.

    Every method takes depths [m] of any shape and gives that shape; NaN gives NaN.
    """

    settings: Air
    field: LocalField

    @property
    def is_vacuum(self) -> bool:
        """Whether there is no air at all."""
        return self.settings.is_vacuum

    @property
    def vertical(self) -> float:
        """Speed of the air itself [m/s], down positive."""
        return self.settings.vertical

    @property
    def breaks(self) -> tuple[float, ...]:
        """Depths where the cross-flow begins or ends [m], in rising order."""
        return tuple(sorted({edge for row in self.settings.cross_flow for edge in row[:2]}))

    def temperature(self, depth: npt.ArrayLike) -> Array:
        """T [K] = T₀ + β z."""
        z = np.asarray(depth, dtype=np.float64)
        value: Array = self.settings.temperature + self.settings.temperature_gradient * z
        return value

    def pressure(self, depth: npt.ArrayLike) -> Array:
        """Pressure of the column.

        Parameters
        ----------
        depth : array_like
            z [m].

        Returns
        -------
        array
            p [Pa], in the shape of `depth`; at the collar ρ₀ R T₀.

        Notes
        -----
        dp/dz = ρ g with p = ρ R T and g = g₀ + (g(z) - g₀) z'/z along the way:
        p = p₀ exp[(g₀ A + (g(z) - g₀) B) z/(R T₀)] with A = ln(1 + x)/x, B = (1 - A)/x, x = β z/T₀; for constant g that
        is p₀ (T/T₀)^(g/(R β)).

        References
        ----------
        ICAO Doc 7488/3 (1993), Manual of the ICAO Standard Atmosphere.
        """
        z = np.asarray(depth, dtype=np.float64)
        top = self.settings.density * GAS_CONSTANT * self.settings.temperature
        x = self.settings.temperature_gradient * z / self.settings.temperature
        level = np.divide(np.log1p(x), x, out=np.ones_like(x), where=x != 0.0)
        # Near x = 0 the difference 1 - A loses its digits; there B is its series.
        small = np.abs(x) < 1e-4
        growing = np.where(small, 0.5 - x / 3.0, (1.0 - level) / np.where(small, 1.0, x))
        pull = self.field.gravity * level + (self.field.gravity_at(z) - self.field.gravity) * growing
        value: Array = top * np.exp(pull * z / (GAS_CONSTANT * self.settings.temperature))
        return value

    def density(self, depth: npt.ArrayLike) -> Array:
        """ρ [kg/m³] = p/(R T); zero in vacuum."""
        value: Array = self.pressure(depth) / (GAS_CONSTANT * self.temperature(depth))
        return value

    def viscosity(self, depth: npt.ArrayLike) -> Array:
        """Dynamic viscosity by Sutherland's formula.

        Parameters
        ----------
        depth : array_like
            z [m].

        Returns
        -------
        array
            μ = β T^1.5/(T + S) [Pa s], β = 1.458e-6, S = 110.4 K; for 100 to 1900 K.

        References
        ----------
        ICAO Doc 7488/3 (1993); U.S. Standard Atmosphere (1976).
        """
        temperature = self.temperature(depth)
        value: Array = 1.458e-6 * temperature * np.sqrt(temperature) / (temperature + 110.4)
        return value

    def sound_speed(self, depth: npt.ArrayLike) -> Array:
        """√(γ R T) [m/s]."""
        value: Array = np.sqrt(ADIABATIC_INDEX * GAS_CONSTANT * self.temperature(depth))
        return value

    def cross_flow(self, depth: npt.ArrayLike) -> tuple[Array, Array]:
        """Horizontal velocity of the air.

        Parameters
        ----------
        depth : array_like
            z [m].

        Returns
        -------
        tuple of array
            (east, north) [m/s], in the shape of `depth`; the sum of the rows whose [from, to) holds z.
        """
        z = np.asarray(depth, dtype=np.float64)
        east, north = np.zeros_like(z), np.zeros_like(z)
        for top, bottom, speed, azimuth in self.settings.cross_flow:
            inside = (z >= top) & (z < bottom)
            east = east + np.where(inside, speed * np.sin(azimuth), 0.0)
            north = north + np.where(inside, speed * np.cos(azimuth), 0.0)
        missing = np.where(np.isnan(z), np.nan, 0.0)
        return east + missing, north + missing


def air_column(air: Air, field: LocalField) -> AirColumn:
    """Column of air under a collar.

    Parameters
    ----------
    air : settings.Air
        State at the collar, temperature gradient and flow.
    field : LocalField
        Its gravity compresses the column.

    Returns
    -------
    AirColumn

    Raises
    ------
    ParameterError
        If the density is negative or the temperature is outside 100 to 1900 K.
    """
    if air.density < 0.0:
        raise ParameterError("density", air.density, "kg/m³", "0 (vacuum) or more")
    if not 100.0 <= air.temperature <= 1900.0:
        raise ParameterError(
            "temperature", air.temperature, "K", "100 to 1900 K, the domain of Sutherland's formula"
        )
    return AirColumn(settings=air, field=field)
