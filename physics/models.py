"""The models of a site put together: its field and air, what hangs and falls in them, and how far a table reaches.

Each is a module of its own: `field`, `air`, `hung`, `fall`, `moving`. What a plumb shaft shows by them is `expected`.
"""

from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from eastfall.physics.air import AirColumn, air_column
from eastfall.physics.errors import ParameterError
from eastfall.physics.fall import Trajectory, fall
from eastfall.physics.field import LocalField, local_field
from eastfall.physics.hung import hang
from eastfall.physics.moving import lean
from eastfall.physics.settings import Assumptions

Pair = NDArray[np.float64]
"""East in row 0, north in row 1, shape (2, n) [m]."""

_COLDEST, _HOTTEST = 173.15, 473.15
"""Of air in a shaft [K]; far inside the domain of its viscosity, 100 to 1900 K."""


def reach(assumptions: Assumptions) -> float:
    """Return the depth to which a curve is tabulated [m]: a little past the stated depth, for a stretched line."""
    return 1.02 * assumptions.shaft.depth + 2.0


def graded(to_depth: float, points: int) -> NDArray[np.float64]:
    """Return depths from 0 to `to_depth` [m], shape (points,), spaced in proportion to the square root of depth."""
    return to_depth * np.linspace(0.0, 1.0, points) ** 2


def tabulated(assumptions: Assumptions, points: int) -> NDArray[np.float64]:
    """Return the depths of a table: graded to `reach`, and both sides of every edge of a cross-flow.

    A bob that comes out of a flow is pushed no longer: its rest jumps there, and a line drawn across the jump would
    give readings near it an offset that neither side has.
    """
    deepest = reach(assumptions)
    flow = () if assumptions.air.is_vacuum else assumptions.air.cross_flow
    edges = [edge for row in flow for edge in row[:2] if 0.0 < edge < deepest]
    sides = [*edges, *np.nextafter(edges, 0.0)]
    return np.array(sorted({*graded(deepest, points).tolist(), *map(float, sides)}))


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class Models:
    """The local field and air of a site, and what falls and hangs in them, against the straight vertical."""

    assumptions: Assumptions
    field: LocalField
    air: AirColumn | None

    @classmethod
    def of(cls, assumptions: Assumptions) -> "Models":
        """Build the models."""
        field = local_field(assumptions.site)
        air = None if assumptions.air.is_vacuum else air_column(assumptions.air, field)
        if air is not None and not _COLDEST <= float(air.temperature(reach(assumptions))) <= _HOTTEST:
            raise ParameterError(
                "temperature_gradient",
                assumptions.air.temperature_gradient,
                "K/m",
                "air of -100 to 200 °C at the bottom of the shaft",
            )
        return cls(assumptions=assumptions, field=field, air=air)

    def field_line(self, depth: NDArray[np.float64]) -> Pair:
        """Return the curved vertical through the collar at depths, shape (2, n) [m]."""
        north, east = self.field.field_line(depth)
        return np.stack([east, north])

    def bob(self, depth: NDArray[np.float64]) -> Pair:
        """Return where the bob hangs, at rest, when the line is as long as each depth, shape (2, n) [m]."""
        return self._hung(depth, 0.0)

    def _hung(self, depth: NDArray[np.float64], speed: float) -> Pair:
        line = replace(self.assumptions.line, line_speed=speed)
        found = hang(self.field, line, np.maximum(depth, 0.0), self.air)
        return np.stack([found.bob_east, found.bob_north])

    def body(self, to_depth: float) -> Trajectory:
        """Return the path of the body; in vacuum where the site gives none."""
        air = self.air if self.assumptions.body else None
        return fall(self.field, to_depth=to_depth, body=self.assumptions.body, air=air)

    def riding(self, depth: NDArray[np.float64], bob: Pair) -> NDArray[np.float64]:
        """Return how far east of its rest `bob` rides for each metre a second of its line, shape (n,) [s]."""
        return self._hung(depth, 1.0)[0] - bob[0]

    def seeming(self, depth: NDArray[np.float64]) -> NDArray[np.float64]:
        """Return how far west a plumb guide seems to go for each metre a second of the line, shape (n,) [s].

        That is ∫ ε dz at 1 m/s, by the trapezoidal rule over `depth`, which rises from the collar.
        """
        angle = lean(1.0, self.assumptions.site.latitude, self.field.gravity_at(depth))
        steps = np.diff(depth) * (0.5 * (angle[1:] + angle[:-1]))
        return np.concatenate([[0.0], np.cumsum(steps)])

    def moving(self, depth: NDArray[np.float64], bob: Pair) -> NDArray[np.float64]:
        """Return how far east `plumb` moves for each metre a second of the line, shape (n,) [s].

        At depths that rise from the collar, where a bob at rest is known; a falling body hangs on no line.
        """
        match self.assumptions.run.kind:
            case "guided":
                return -self.seeming(depth)
            case "hung":
                return self.riding(depth, bob)
            case _:
                return np.zeros_like(depth)

    def reference(self, depth: NDArray[np.float64]) -> Pair:
        """Return the run's reference line against the straight vertical, shape (2, n) [m]."""
        match self.assumptions.run.reference:
            case "field-line":
                return self.field_line(depth)
            case "hung-line":
                return self.bob(depth)
            case _:
                return np.zeros((2, depth.size))

    def stated(self, depth: NDArray[np.float64]) -> Pair:
        """Return what a plumb shaft shows with the line at the speed that the site states, shape (2, n) [m].

        Guided or hung, at depths that rise from the collar; at rest it is the `plumb` of `expected_curve`.
        """
        speed = self.assumptions.line_speed
        if self.assumptions.run.kind == "hung":
            return self._hung(depth, speed) - self.reference(depth)
        shown = self.reference(depth) - self.field_line(depth)
        shown[0] -= speed * self.seeming(depth)
        return shown
