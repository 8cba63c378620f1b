"""The plan at one depth, north up: measured, expected and limits close by, or the shaft wall; true in both ways."""

from collections.abc import Hashable, Iterable
from dataclasses import dataclass
from math import isfinite
from typing import Literal

import numpy as np

from eastfall.physics.findings import RestPoint, Standing, Station
from eastfall.tui.axes import round_step
from eastfall.tui.raster import Floats, Kept, Packed, Plane, Raster
from eastfall.tui.roles import Role
from eastfall.tui.strokes import polyline, rhythm, ring, segments
from eastfall.tui.units import METRIC, Units
from eastfall.tui.widgets.cells import CellWidget

CELL_ASPECT = 2.0
"""Height of a character cell over its width; a setting, because terminals differ."""
LEAST_WIDTH, LEAST_HEIGHT = 14, 6
ELLIPSE = 2.4477
"""Half-axes of the 95 % ellipse of two normal variables, in standard deviations: sqrt(-2 ln 0.05)."""

_NOWHERE = (1e6, 1e6)  # m; stands for a point that there is none of

Scope = Literal["close", "wall"]
Point = tuple[float, float]


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class PlanView:
    """What the plan draws; offsets east and north of the reference line [m]."""

    one: Standing | Station | None
    trail: tuple[Floats, Floats] = (np.empty(0), np.empty(0))
    """Where it was lately."""
    landings: tuple[Floats, Floats] = (np.empty(0), np.empty(0))
    """Single points of which none leads to the next: where bodies landed."""
    leans: bool = False
    """A guided run: the sum of tilts holds the lean of the moving line, so the guide itself stands at the residual."""
    rest: RestPoint | None = None
    bob: Point | None = None
    fall: Point | None = None
    centre: Point = (0.0, 0.0)
    diameter: float | None = None
    """Of the shaft, round about its centre."""
    clearance: float | None = None
    """From the measured point to the wall."""
    units: Units = METRIC


class Plan(CellWidget):
    """The plan at one scale: `close` fits measured, expected and limits; `wall` fits the shaft."""

    view: PlanView | None = None
    scope: Scope = "close"

    def __init__(self, *, id: str | None = None) -> None:  # noqa: A002 (Textual's name)
        super().__init__(id=id)
        self.kept = Kept()
        self._drawn: Hashable = None

    @property
    def aspect(self) -> float:
        """Height of a character cell over its width."""
        return getattr(self.app, "cell_aspect", CELL_ASPECT)

    def show(self, view: PlanView, scope: Scope) -> None:
        """Draw another view, unless all of it comes out within half a dot of where it stands."""
        self.view, self.scope = view, scope
        seen = self._seen(view) if self.is_on_screen else None
        if seen is None or seen != self._drawn:
            self.redraw()
            self._drawn = seen

    def _seen(self, view: PlanView) -> Hashable:
        """Return what tells one picture from another; None where there is more to it than single marks."""
        if view.one is None or view.trail[0].size or view.landings[0].size or view.rest is not None:
            return None
        sheet = PlanSheet(view, self.scope, Raster(*self.size, self.glyphs), self.aspect, self.kept)
        return sheet.places(view, view.one), id(self.app.theme), self.units.name

    def draw(self, sheet: Raster) -> None:
        """Draw the plan, or say why there is none."""
        if sheet.width < LEAST_WIDTH or sheet.height < LEAST_HEIGHT:
            return
        view = self.view
        if self.scope == "wall" and view is not None and view.diameter is None:
            sheet.text(0, 0, "shaft plan", Role.STRONG)
            sheet.text(0, 1, "no diameter in the site file", Role.DIM)
            return
        PlanSheet(view, self.scope, sheet, self.aspect, self.kept).draw()


class PlanSheet:
    """One drawing of a plan."""

    def __init__(self, view: PlanView | None, scope: Scope, sheet: Raster, aspect: float, kept: Kept) -> None:
        self.view, self.scope, self.sheet, self.kept = view, scope, sheet, kept
        self.units = view.units if view is not None else METRIC
        self.rows = sheet.height - 2
        self.size = (sheet.width * sheet.glyphs.across, self.rows * sheet.glyphs.down)
        # Height of a dot over its width: one length must look the same both ways.
        self.squash = aspect * sheet.glyphs.across / sheet.glyphs.down
        self.middle, self.reach = self._fit()
        half = min(self.size[0], self.size[1] * self.squash) / 2.0
        self.per_metre = half / self.reach

    def _fit(self) -> tuple[Point, float]:
        """Return the point in the middle and the distance from it to the nearer edge [m]."""
        view = self.view
        if view is not None and self.scope == "wall":
            return view.centre, (view.diameter or 1.0) / 2.0 * 1.08
        if view is None or view.one is None:
            return (0.0, 0.0), 0.03
        one = view.one
        middle = (one.expected_east, one.expected_north)
        if not all(map(isfinite, middle)):
            middle = (0.0, 0.0)
        measured = (np.array([one.measured_east]), np.array([one.measured_north]))
        far = np.concatenate(
            [
                np.hypot(east - middle[0], north - middle[1])
                for east, north in (measured, view.trail, view.landings)
            ]
        )
        reach = max(one.action * 1.12, 1.1 * float(np.max(far, where=np.isfinite(far), initial=0.0)))
        step = round_step(2.0 * reach, 40)
        return middle, step * np.ceil(reach / step)

    def at(self, east: Floats | float, north: Floats | float) -> tuple[Floats, Floats]:
        """Return dots of offsets [m]."""
        x = self.size[0] / 2.0 + (np.asarray(east, dtype=float) - self.middle[0]) * self.per_metre
        y = (
            self.size[1] / 2.0
            - (np.asarray(north, dtype=float) - self.middle[1]) * self.per_metre / self.squash
        )
        return x, y

    def places(self, view: PlanView, one: Standing | Station) -> Hashable:
        """Return where everything comes to lie, in half dots, and the words that change."""
        points = (
            (0.0, 0.0),
            (one.measured_east, one.measured_north),
            (one.expected_east, one.expected_north),
            self._shaft_centre(view),
            view.bob or _NOWHERE,
            view.fall or _NOWHERE,
        )
        if not all(isfinite(east) and isfinite(north) for east, north in points):
            return None
        half = [round(2.0 * float(place)) for point in points for place in self.at(*point)]
        gap = None if view.clearance is None else view.units.depth(view.clearance, 2)
        return (*half, self.scope, self.size, self.squash, self.per_metre, one.warning, one.action, gap)

    def draw(self) -> None:
        """Draw axes, circles, curves and marks, then the words."""
        self._cross()
        view = self.view
        if view is not None:
            if view.diameter is not None:
                self._circle(self._shaft_centre(view), view.diameter / 2.0, Role.WALL, 0)
            if view.one is not None:
                self._evidence(view, view.one)
        self._words()

    def _shaft_centre(self, view: PlanView) -> Point:
        """Return the shaft's centre as it lies to what is marked: close by, that is the sum with its lean."""
        if view.leans and view.one is not None and self.scope == "close":
            return view.centre[0] + view.one.expected_east, view.centre[1] + view.one.expected_north
        return view.centre

    def _stamp(self, plane: Plane, role: Role) -> None:
        self.sheet.stamp(plane, role, 0, 1)

    def _plane(self) -> Plane:
        return np.zeros((self.size[1], self.size[0]), dtype=np.bool_)

    def _settled(self, point: Point) -> tuple[float, float]:
        """Return the place of a point to a quarter of a dot, so that what hangs on it is not drawn anew for less."""
        x, y = (float(one) for one in self.at(*point))
        return (round(4.0 * x) / 4.0, round(4.0 * y) / 4.0) if isfinite(x) and isfinite(y) else (x, y)

    def _cross(self) -> None:
        """Draw the lines north-south and east-west through the reference line."""
        x, y = self._settled((0.0, 0.0))

        def drawn() -> Packed:
            plane, across = self._plane(), self._plane()
            polyline(plane, [x, x], [0.0, self.size[1]])
            polyline(across, [0.0, self.size[0]], [y, y])
            cross = rhythm(plane, 1, 1, upright=True) | rhythm(across, 1, 2, upright=False)
            return self.sheet.packed(cross)

        self.sheet.put(self.kept.packed((Role.DIM, self.size, x, y), drawn), Role.DIM, 0, 1)

    def _circle(self, centre: Point, radius: float, role: Role, gaps: int) -> None:
        x, y = self._settled(centre)
        dots = radius * self.per_metre
        if not (isfinite(dots) and isfinite(x) and isfinite(y)):
            return

        def drawn() -> Packed:
            plane = self._plane()
            ring(plane, (x, y), (dots, dots / self.squash), gaps=gaps)
            return self.sheet.packed(plane)

        self.sheet.put(self.kept.packed((role, self.size, x, y, dots, self.squash), drawn), role, 0, 1)

    def _lately(self, view: PlanView) -> None:
        """Draw where it was lately, and where bodies landed."""
        plane = self._plane()
        polyline(plane, *self.at(*view.trail))
        landed = self.at(*view.landings)
        segments(plane, *landed, *landed)
        self._stamp(plane, Role.PAST)

    def _evidence(self, view: PlanView, one: Standing | Station) -> None:
        expected = (one.expected_east, one.expected_north)
        measured = (one.measured_east, one.measured_north)
        if self.scope == "close":
            self._circle(expected, one.warning, Role.WARNING, 28)
            self._circle(expected, one.action, Role.ACTION, 0)
            if view.trail[0].size or view.landings[0].size:
                self._lately(view)
            self._residual(expected, measured)
            if view.rest is not None:
                self._ellipse(view.rest)
        self._mark(view.bob, "b", Role.BOB)
        self._mark(view.fall, "d", Role.FALL)
        if self.scope == "wall" and view.leans:
            measured, expected = (one.residual_east, one.residual_north), (0.0, 0.0)
        self._mark(expected, self.sheet.glyphs.expected, Role.EXPECTED)
        self._mark(measured, self.sheet.glyphs.measured, Role.MEASURED)
        if view.rest is not None:
            self._mark((view.rest.east, view.rest.north), "x", Role.STRONG)

    def _residual(self, expected: Point, measured: Point) -> None:
        """Join expected and measured: the residual itself."""
        plane = self._plane()
        x, y = self.at(np.array([expected[0], measured[0]]), np.array([expected[1], measured[1]]))
        polyline(plane, x, y)
        self._stamp(plane, Role.MEASURED)

    def _ellipse(self, rest: RestPoint) -> None:
        """Draw the 95 % ellipse of the rest point from its covariance."""
        covariance = np.array(
            [
                [rest.u_east**2, rest.covariance_east_north],
                [rest.covariance_east_north, rest.u_north**2],
            ]
        )
        if not np.isfinite(covariance).all():
            return
        sizes, axes = np.linalg.eigh(covariance)
        turn = np.linspace(0.0, 2.0 * np.pi, 90)
        unit = np.array([np.cos(turn), np.sin(turn)])
        east, north = axes @ (ELLIPSE * np.sqrt(np.maximum(sizes, 0.0))[:, None] * unit)
        plane = self._plane()
        polyline(plane, *self.at(rest.east + east, rest.north + north))
        self._stamp(plane, Role.OK)

    def _mark(self, point: Point | None, mark: str, role: Role) -> None:
        if point is None or not (isfinite(point[0]) and isfinite(point[1])):
            return
        x, y = (float(one) for one in self.at(*point))
        if 0.0 <= x < self.size[0] and 0.0 <= y < self.size[1]:
            column, row = int(x) // self.sheet.glyphs.across, int(y) // self.sheet.glyphs.down
            self.sheet.text(column, 1 + row, mark, role)

    def _words(self) -> None:
        """Write the title with the scale at the top, north, and the legend at the bottom."""
        width = self.sheet.width
        across = 2.0 * self.reach
        units = self.units
        wide = across >= 1.0
        span = f"{units.depth(across)} {units.long}" if wide else f"{units.offset(across, 0)} {units.short}"
        title = "shaft" if self.scope == "wall" else "plan"
        self.sheet.text(0, 0, f"{title}, {span} across", Role.STRONG)
        self.sheet.text(width // 2, 1, "N", Role.STRONG)
        # What finds no room at the bottom stands at the top, from the right.
        place, end = 0, width
        used = len(f"{title}, {span} across") + 1
        for words, role in self._legend():
            if place + len(words) <= width:
                self.sheet.text(place, self.sheet.height - 1, words, role)
                place += len(words) + 1
            elif end - len(words) >= used:
                end -= len(words)
                self.sheet.text(end, 0, words, role)
                end -= 1

    def _legend(self) -> Iterable[tuple[str, Role]]:
        view, glyphs = self.view, self.sheet.glyphs
        if view is not None and view.clearance is not None and self.scope == "wall":
            yield f"wall {view.units.depth(view.clearance, 2)} {view.units.long} off", Role.WALL
        yield f"{glyphs.measured}measured", Role.MEASURED
        yield f"{glyphs.expected}expected", Role.EXPECTED
        if view is None:
            return
        if view.rest is not None:
            yield "x rest", Role.STRONG
        if view.bob is not None:
            yield "b bob", Role.BOB
        if view.fall is not None:
            yield "d dropped", Role.FALL
