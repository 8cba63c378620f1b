"""The loads on a hanging wire and its bob, and their integrals from the collar down, for many lengths at once.

What is asked of the line (where bobs hang, its shape) is `hung`.
"""

from collections.abc import Callable

import numpy as np
import numpy.typing as npt

from eastfall.physics.air import AirColumn
from eastfall.physics.drag import morrison
from eastfall.physics.earth import Array
from eastfall.physics.errors import ParameterError
from eastfall.physics.field import LocalField
from eastfall.physics.moving import lean
from eastfall.physics.settings import Line

_NODES, _WEIGHTS = (0.5 * one for one in np.polynomial.legendre.leggauss(5))
_NODES = _NODES + 0.5  # on 0 to 1
_PIECES = 8


def _antiderivative() -> Array:
    """Integrals from 0 to each node of the polynomials that are 1 at one node and 0 at the others, (5, 5)."""
    powers = np.arange(5)
    coefficients = np.linalg.inv(_NODES[:, None] ** powers)
    return (_NODES[:, None] ** (powers + 1) / (powers + 1)) @ coefficients


_TO_NODE = _antiderivative()


class Wire:
    """Loads of a wire, integrated once from the collar down; rows: weight, field E and N, air E and N [N]."""

    def __init__(self, field: LocalField, line: Line, air: AirColumn | None, deepest: float) -> None:
        self.field, self.line = field, line
        self.air = None if air is None or air.is_vacuum else air
        check_line(line, self.air)
        kinks = (*field.breaks, *(self.air.breaks if self.air else ()))
        inner = [one for one in kinks if 0.0 < one < deepest]
        self.edges = np.array(sorted({*np.linspace(0.0, max(deepest, 1.0), _PIECES + 1).tolist(), *inner}))
        step = np.diff(self.edges)
        self.nodes = self.edges[:-1, None] + step[:, None] * _NODES
        loads = self.per_metre(self.nodes)
        pieces = step * (loads @ _WEIGHTS)
        self.at_edges = np.concatenate([np.zeros((5, 1)), np.cumsum(pieces, axis=1)], axis=1)
        self.at_nodes = self.at_edges[:, :-1, None] + step[:, None] * (loads @ _TO_NODE.T)

    def per_metre(self, depth: Array) -> Array:
        """Return the loads on the wire [N/m], shape (5, *depth.shape)."""
        line, air = self.line, self.air
        section = 0.25 * np.pi * line.diameter**2
        out = np.zeros((5, *depth.shape))
        # A weightless wire is an idea, not a balloon: it has no buoyancy.
        floats = section * air.density(depth) if air and line.mass_per_length > 0.0 else 0.0
        self._weigh(out, depth, line.mass_per_length, line.mass_per_length - floats)
        if air and air.breaks:
            out[3], out[4] = _blow(air, depth, line.diameter, line.diameter, _wire_drag)
        return out

    def at_bob(self, depth: Array) -> Array:
        """Return the loads of a bob at the end [N], shape (5, n)."""
        line, air = self.line, self.air
        out = np.zeros((5, *depth.shape))
        volume = line.bob_mass / line.bob_density
        self._weigh(out, depth, line.bob_mass, line.bob_mass - (volume * air.density(depth) if air else 0.0))
        if air and air.breaks and line.bob_mass > 0.0:
            diameter = (6.0 * volume / np.pi) ** (1.0 / 3.0)
            out[3], out[4] = _blow(air, depth, diameter, 0.25 * np.pi * diameter**2, morrison)
        return out

    def _weigh(self, out: Array, depth: Array, mass: float, weighing: Array | float) -> None:
        gravity = self.field.gravity_at(depth)
        north, east = self.field.slope(depth)
        side = lean(self.line.line_speed, self.field.latitude, gravity) * gravity
        out[0] = weighing * gravity
        out[1] = out[0] * east + mass * side
        out[2] = out[0] * north

    def deflect(self, depth: Array, length: Array) -> tuple[Array, Array]:
        """Offsets at depths on lines of given lengths, and the loads at the collar.

        Returns
        -------
        offset : array, shape (4, n)
            Field east and north, air east and north [m].
        at_collar : array, shape (5, n)
            Tension [N], then the side loads in the same order [N].
        """
        to_bob, piece, partial, weights = self._down_to(length)
        at_collar = to_bob + self.at_bob(length)
        if depth is not length:
            _, piece, partial, weights = self._down_to(depth)
        above = np.arange(self.nodes.shape[0]) < piece[:, None]
        width = np.diff(self.edges)[:, None] * _WEIGHTS
        whole_weights = (above[:, :, None] * width).reshape(depth.size, -1)
        whole = self.at_nodes.reshape(5, 1, -1)
        offset = _slopes(at_collar, whole, whole_weights) + _slopes(at_collar, partial, weights)
        return offset, at_collar

    def _down_to(self, depth: Array) -> tuple[Array, npt.NDArray[np.intp], Array, Array]:
        """Integrals from the collar to each depth, its piece, and values and weights at nodes from there on."""
        last = self.edges.size - 2
        piece = np.clip(np.searchsorted(self.edges, depth, side="right") - 1, 0, last)
        step = depth - self.edges[piece]
        loads = self.per_metre(self.edges[piece][:, None] + step[:, None] * _NODES)
        start = self.at_edges[:, piece]
        nodes = start[:, :, None] + step[:, None] * (loads @ _TO_NODE.T)
        return start + step * (loads @ _WEIGHTS), piece, nodes, step[:, None] * _WEIGHTS


def _slopes(at_collar: Array, above: Array, weights: Array) -> Array:
    """∫ (H - S)/(T₀ - G) dz by the given nodes and weights; a weight of zero marks a node below the line's end."""
    tension = np.where(weights != 0.0, at_collar[0][:, None] - above[0], 1.0)
    share = weights / tension
    return np.stack([np.sum((at_collar[i][:, None] - above[i]) * share, axis=1) for i in range(1, 5)])


def check_line(line: Line, air: AirColumn | None) -> None:
    """Refuse a line without weight, or one that its air would carry."""
    for name, value in (("bob_mass", line.bob_mass), ("mass_per_length", line.mass_per_length)):
        if value < 0.0:
            raise ParameterError(name, value, "kg" if name == "bob_mass" else "kg/m", "0 or more")
    if line.bob_mass == 0.0 and line.mass_per_length == 0.0:
        raise ParameterError("bob_mass", line.bob_mass, "kg", "more than 0 kg on a weightless wire")
    if not line.diameter > 0.0:
        raise ParameterError("diameter", line.diameter, "m", "more than 0 m")
    lightest = 10.0 * air.settings.density if air else 0.0
    if not line.bob_density > lightest:
        raise ParameterError("bob_density", line.bob_density, "kg/m³", f"more than {lightest:g} kg/m³")
    if air and 0.0 < line.mass_per_length <= lightest * 0.25 * np.pi * line.diameter**2:
        raise ParameterError(
            "mass_per_length", line.mass_per_length, "kg/m", "far more than the air it displaces"
        )


def cylinder_drag(reynolds: npt.ArrayLike) -> Array:
    """Drag coefficient of a long smooth cylinder across a flow.

    Parameters
    ----------
    reynolds : array_like
        Re on the diameter [1], 1e-4 to 2e5; outside it gives NaN (a rough wire meets its drag crisis earlier).

    Returns
    -------
    array
        C_D on diameter times length [1].

    Notes
    -----
    C_D = 1.18 + 6.8/Re^0.89 + 1.96/Re^0.5 - 0.0004 Re/(1 + 3.64e-7 Re²).

    References
    ----------
    Sucker, D. & Brauer, H. (1975), Fluiddynamik bei quer angeströmten Zylindern, Wärme- und Stoffübertragung 8,
    149-158; also in White, F. M. (1991), Viscous Fluid Flow, 2nd ed. Neither was seen: the coefficients were recalled,
    and agree with those that three public programs have, one of which names White.
    """
    re = np.asarray(reynolds, dtype=np.float64)
    known = np.where((re >= 1e-4) & (re <= 2e5), re, np.nan)
    value: Array = (
        1.18 + 6.8 / known**0.89 + 1.96 / np.sqrt(known) - 4e-4 * known / (1.0 + 3.64e-7 * known**2)
    )
    return value


def _wire_drag(reynolds: Array) -> Array:
    if np.nanmax(reynolds) > 2e5:
        raise ParameterError(
            "cross_flow", float(np.nanmax(reynolds)), "", "a Reynolds number of the wire up to 2e5"
        )
    return cylinder_drag(np.maximum(reynolds, 1e-4))


def _blow(
    air: AirColumn, depth: Array, diameter: float, area: float, drag: Callable[[Array], Array]
) -> tuple[Array, Array]:
    """Give the force of the air on `area` [m² or m²/m], east and north; only where it flows is there work to do."""
    east, north = air.cross_flow(depth)
    speed = np.hypot(east, north)
    flows = speed > 0.0
    force = np.where(np.isnan(speed), np.nan, 0.0)
    if flows.any():
        there, wind = depth[flows], speed[flows]
        density = air.density(there)
        reynolds = density * wind * diameter / air.viscosity(there)
        force[flows] = 0.5 * density * wind * area * drag(reynolds)
    return force * east, force * north
