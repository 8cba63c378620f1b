"""The plan of a drop, north up: release, path, landing with its 95 % ellipse, cloud of drops, best release, wall."""

from collections.abc import Iterable
from math import hypot

import numpy as np

from eastfall.tui.axes import round_step
from eastfall.tui.drop import Plan as Drop
from eastfall.tui.raster import Kept, Raster
from eastfall.tui.roles import Role
from eastfall.tui.strokes import polyline, rhythm, segments
from eastfall.tui.units import METRIC, Units
from eastfall.tui.widgets.cells import CellWidget
from eastfall.tui.widgets.plan import (
    CELL_ASPECT,
    ELLIPSE,
    LEAST_HEIGHT,
    LEAST_WIDTH,
    PlanSheet,
    PlanView,
    Point,
    Scope,
)

_IN_VIEW = 2.0


class Cloud(CellWidget):
    """A drop in plan at one scale: `wall` fits the shaft, `close` the cloud."""

    drop: Drop | None = None
    scope: Scope = "close"

    def __init__(self, *, id: str | None = None) -> None:  # noqa: A002 (Textual's name)
        super().__init__(id=id)
        self.kept = Kept()
        self.shown_units = METRIC

    def show(self, drop: Drop, scope: Scope, units: Units = METRIC) -> None:
        """Draw another drop."""
        if drop is self.drop and (scope, units) == (self.scope, self.shown_units):
            return
        self.drop, self.scope, self.shown_units = drop, scope, units
        self.redraw()

    def draw(self, sheet: Raster) -> None:
        """Draw the plan, or say why there is none."""
        if sheet.width < LEAST_WIDTH or sheet.height < LEAST_HEIGHT or self.drop is None:
            return
        if self.scope == "wall" and self.drop.assumptions.shaft.diameter is None:
            sheet.text(0, 0, "shaft", Role.STRONG)
            sheet.text(0, 1, "no diameter given", Role.DIM)
            return
        aspect = getattr(self.app, "cell_aspect", CELL_ASPECT)
        _CloudSheet(self.drop, self.scope, sheet, aspect, self.kept, self.shown_units).draw()


class _CloudSheet(PlanSheet):
    """One drawing of a drop."""

    def __init__(
        self, drop: Drop, scope: Scope, sheet: Raster, aspect: float, kept: Kept, units: Units
    ) -> None:
        self.drop = drop
        shaft = drop.assumptions.shaft
        view = PlanView(
            one=None, centre=(shaft.centre_east, shaft.centre_north), diameter=shaft.diameter, units=units
        )
        super().__init__(view, scope, sheet, aspect, kept)

    def _fit(self) -> tuple[Point, float]:
        drop = self.drop
        shaft = drop.assumptions.shaft
        if self.scope == "wall":
            return (shaft.centre_east, shaft.centre_north), (shaft.diameter or 1.0) / 2.0 * 1.08
        far = np.hypot(drop.cloud[0] - drop.landing[0], drop.cloud[1] - drop.landing[1])
        apart = hypot(drop.release[0] - drop.landing[0], drop.release[1] - drop.landing[1])
        # A release much farther off than the cloud is wide would make a dot of it.
        reach = max(0.001, float(far.max()) * 1.1)
        reach = 1.1 * apart if reach < 1.1 * apart < _IN_VIEW * reach else reach
        step = round_step(2.0 * reach, 40)
        return drop.landing, step * float(np.ceil(reach / step))

    def draw(self) -> None:
        """Draw wall, cloud, ellipse, path and marks, then the words."""
        self._cross()
        drop = self.drop
        shaft = drop.assumptions.shaft
        if shaft.diameter is not None:
            self._circle((shaft.centre_east, shaft.centre_north), shaft.diameter / 2.0, Role.WALL, 0)
        plane = self._plane()
        landed = self.at(*drop.cloud)
        segments(plane, *landed, *landed)
        self._stamp(plane, Role.PAST)
        plane = self._plane()
        polyline(plane, *self.at(*drop.path))
        self._stamp(rhythm(plane, 2, 2, upright=False), Role.FALL)
        self._region()
        if drop.best is not None:
            self._mark((drop.best.east, drop.best.north), "+", Role.OK)
        self._mark(drop.release, "R", Role.STRONG)
        self._mark(drop.landing, "x", Role.EXPECTED)
        self._words()

    def _region(self) -> None:
        """Draw the ellipse that holds 95 % of the landings."""
        if not np.isfinite(self.drop.covariance).all():
            return
        sizes, axes = np.linalg.eigh(self.drop.covariance)
        turn = np.linspace(0.0, 2.0 * np.pi, 90)
        unit = np.array([np.cos(turn), np.sin(turn)])
        east, north = axes @ (ELLIPSE * np.sqrt(np.maximum(sizes, 0.0))[:, None] * unit)
        plane = self._plane()
        polyline(plane, *self.at(self.drop.landing[0] + east, self.drop.landing[1] + north))
        self._stamp(plane, Role.EXPECTED)

    def _in_view(self, point: Point) -> bool:
        x, y = (float(one) for one in self.at(*point))
        return 0.0 <= x < self.size[0] and 0.0 <= y < self.size[1]

    def _legend(self) -> Iterable[tuple[str, Role]]:
        """Name what is in view."""
        yield "x lands (95 %)", Role.EXPECTED
        if self._in_view(self.drop.release):
            yield "R release", Role.STRONG
        best = self.drop.best
        if best is not None and self._in_view((best.east, best.north)):
            yield "+ best", Role.OK
        if self.scope == "wall":
            yield "wall", Role.WALL
