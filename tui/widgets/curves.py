"""Predictions by depth, east beside north: expected with its uncertainty, bob, dropped body; A and perhaps B."""

from dataclasses import dataclass

import numpy as np

from eastfall.tui.axes import Axis, around
from eastfall.tui.outlook import Prospect
from eastfall.tui.raster import Floats, Raster
from eastfall.tui.roles import Role
from eastfall.tui.strokes import polyline, rhythm
from eastfall.tui.units import METRIC, Units
from eastfall.tui.widgets.cells import CellWidget
from eastfall.tui.widgets.panel import BELOW, GUTTER, PanelGround, row_of
from eastfall.tui.widgets.profile import LEAST_HEIGHT, LEAST_WIDTH, depth_labels

_POINTS = 129
_LEAST_REACH = 0.0005  # m to each side, below which a prediction is as good as zero
_A_DASH = {"bob": (2, 3), "dropped": (6, 2)}
_B_DASH = {"expected": (2, 4), "bob": (1, 5), "dropped": (1, 3)}
"""Dots drawn and left out, down the panel: all told apart without colour."""


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class Prospects:
    """What is drawn: A, perhaps B, and whether the classical curves are."""

    one: Prospect
    other: Prospect | None = None
    extras: bool = True
    units: Units = METRIC

    @property
    def deepest(self) -> float:
        """Depth that the picture goes down to [m]."""
        return max(self.one.deepest, self.other.deepest if self.other else 0.0)


class Curves(CellWidget):
    """Depth downward on the left, one panel for east and one for north."""

    view: Prospects | None = None

    def show(self, view: Prospects | None) -> None:
        """Draw another view."""
        self.view = view
        self.redraw()

    def draw(self, sheet: Raster) -> None:
        """Draw both panels with a common depth axis."""
        if sheet.width < LEAST_WIDTH or sheet.height < LEAST_HEIGHT:
            sheet.text(0, 0, "window too small", Role.DIM)
            return
        if self.view is None:
            return
        dots = (sheet.height - 1 - BELOW) * sheet.glyphs.down
        depth = Axis(low=0.0, high=self.view.deepest, dots=dots)
        depth_labels(sheet, depth, float("nan"), self.view.units)
        left = (sheet.width - GUTTER - 1) // 2
        places = ((GUTTER, left), (GUTTER + left + 1, sheet.width - GUTTER - left - 1))
        for which, place in enumerate(places):
            _CurvePanel(self.view, which, depth, sheet, place).draw()
        self._legend(sheet, self.view)

    def _legend(self, sheet: Raster, view: Prospects) -> None:
        solid, dashed, dotted, _, _ = sheet.glyphs.samples
        parts = [(f"{solid}A expected", Role.EXPECTED), (f"{dotted}±U", Role.BAND)]
        if view.extras:
            parts += [("b bob", Role.BOB), ("d dropped", Role.FALL)]
        if view.other is not None:
            parts.append((f"{dashed}B", Role.PAST))
        if view.one.curve.wall_contact_depth is not None:
            parts.append((f"{sheet.glyphs.rule}wall", Role.ACTION))
        column = GUTTER
        for text, role in parts:
            if column + len(text) <= sheet.width:
                column += sheet.text(column, sheet.height - 1, text, role) + 1


class _CurvePanel(PanelGround):
    """East or north of the predictions."""

    def __init__(
        self, view: Prospects, which: int, depth: Axis, sheet: Raster, place: tuple[int, int]
    ) -> None:
        super().__init__(which, depth, sheet, place, view.units)
        self.view = view
        self.depths = np.linspace(0.0, view.deepest, _POINTS) ** 2 / view.deepest
        self.mine, self.its = self._curves(view.one), self._curves(view.other)
        self.u = view.one.expanded(self.depths.tolist())[which]

    def _curves(self, one: Prospect | None) -> dict[str, Floats]:
        """Return offset by depth [m] of what is shown, by name."""
        if one is None:
            return {}
        whats = ("bob", "dropped", "expected") if self.view.extras else ("expected",)
        return {what: one.offsets(what, self.depths.tolist())[self.which] for what in whats}  # type: ignore[arg-type]

    def draw(self) -> None:
        """Draw B beneath A, the wall over both, then the words."""
        expected = self.mine["expected"]
        every = [*self.mine.values(), *self.its.values(), expected - self.u, expected + self.u]
        low, high = around(np.concatenate(every), _LEAST_REACH)
        self.axis = Axis(low=low, high=high, dots=self.axis.dots)
        zero = self._plane()
        polyline(zero, [float(self.axis.dot(0.0))] * 2, [0.0, self.depth.dots])
        self._put(zero, Role.DIM)
        for what, values in self.its.items():
            self._line(values, Role.PAST, _B_DASH[what])
        self._about(self.depth.dot(self.depths), expected, self.u, Role.BAND)
        for what, role in (("bob", Role.BOB), ("dropped", Role.FALL)):
            if what in self.mine:
                self._line(self.mine[what], role, _A_DASH[what])
        plane = self._plane()
        polyline(plane, self.axis.dot(expected), self.depth.dot(self.depths))
        self.sheet.stamp(plane, Role.EXPECTED, self.column, 1)
        self._letters()
        self._wall()
        self._labels()

    def _line(self, values: Floats, role: Role, dash: tuple[int, int]) -> None:
        plane = self._plane()
        polyline(plane, self.axis.dot(values), self.depth.dot(self.depths))
        self.sheet.stamp(rhythm(plane, *dash, upright=True), role, self.column, 1)

    def _letters(self) -> None:
        """Write the curves' letters at their ends, A last."""
        ends = [(self.its, "expected", "B", Role.PAST), (self.mine, "bob", "b", Role.BOB)]
        ends += [(self.mine, "dropped", "d", Role.FALL), (self.mine, "expected", "A", Role.EXPECTED)]
        for curves, what, letter, role in ends:
            known = np.flatnonzero(np.isfinite(curves[what])) if what in curves else np.empty(0, dtype=int)
            if known.size:
                row = row_of(self.depth, float(self.depths[known[-1]]), self.sheet)
                self._mark(float(self.axis.dot(curves[what][known[-1]])), row, letter, role)

    def _wall(self) -> None:
        """Draw the depth of the wall contact across the panel."""
        contact = self.view.one.curve.wall_contact_depth
        if contact is None:
            return
        row = row_of(self.depth, contact, self.sheet)
        text = f"wall {self.units.depth(contact)} {self.units.long}"
        bar = (self.sheet.glyphs.rule * self.width)[: self.width]
        self.sheet.text(self.column, row, bar, Role.ACTION)
        if self.which == 0:
            self.sheet.text(self.column + 1, row, text, Role.ACTION)
