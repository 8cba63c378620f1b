"""The plot of a comparison: second less first by depth, east and north, with the band of its uncertainty."""

import numpy as np

from eastfall.io.compare import Comparison
from eastfall.physics.budget import COVERAGE_FACTOR
from eastfall.tui.axes import Axis, symmetric
from eastfall.tui.raster import Raster
from eastfall.tui.roles import Role
from eastfall.tui.strokes import polyline
from eastfall.tui.widgets.cells import CellWidget
from eastfall.tui.widgets.panel import BELOW, GUTTER, PanelGround, row_of
from eastfall.tui.widgets.profile import LEAST_HEIGHT, LEAST_WIDTH, depth_labels

_LEAST_REACH = 0.002  # m; below two millimetres to each side the picture would show only noise


class Shift(CellWidget):
    """Depth downward, a panel for east and one for north; marks where the difference is more than its uncertainty."""

    comparison: Comparison | None = None

    def show(self, comparison: Comparison) -> None:
        """Draw another comparison."""
        self.comparison = comparison
        self.redraw()

    def draw(self, sheet: Raster) -> None:
        """Draw both panels with a common depth axis."""
        if sheet.width < LEAST_WIDTH or sheet.height < LEAST_HEIGHT:
            sheet.text(0, 0, "window too small", Role.DIM)
            return
        if self.comparison is None:
            return
        depths = np.array([one.depth for one in self.comparison.rows])
        bottom = float(depths.max())
        depth = Axis(
            low=0.0, high=bottom if bottom > 0.0 else 1.0, dots=(sheet.height - 1 - BELOW) * sheet.glyphs.down
        )
        depth_labels(sheet, depth, float("nan"), self.units)
        left = (sheet.width - GUTTER - 1) // 2
        places = ((GUTTER, left), (GUTTER + left + 1, sheet.width - GUTTER - left - 1))
        for which, place in enumerate(places):
            ShiftPanel(which, depth, sheet, place, self.units).draw_shift(self.comparison)
        self._legend(sheet)

    @staticmethod
    def _legend(sheet: Raster) -> None:
        solid, _, dotted, _, _ = sheet.glyphs.samples
        parts = (
            (f"{solid}second less first", Role.MEASURED),
            (f"{dotted}±U about none", Role.BAND),
            (f"{sheet.glyphs.measured}moved", Role.ACTION),
        )
        column = GUTTER
        for words, role in parts:
            if column + len(words) <= sheet.width:
                column += sheet.text(column, sheet.height - 1, words, role) + 1


class ShiftPanel(PanelGround):
    """East or north of a comparison."""

    def draw_shift(self, comparison: Comparison) -> None:
        """Draw reference, band, difference and marks."""
        rows = comparison.rows
        name = ("east", "north")[self.which]
        value = np.array([getattr(one, name) for one in rows])
        band = COVERAGE_FACTOR * np.array([getattr(one, f"u_{name}") for one in rows])
        place = self.depth.dot(np.array([one.depth for one in rows]))
        low, high = symmetric(np.concatenate([value, band]), _LEAST_REACH)
        self.axis = Axis(low=low, high=high, dots=self.axis.dots)
        plane = self._plane()
        middle = float(self.axis.dot(0.0))
        polyline(plane, [middle, middle], [0.0, self.depth.dots])
        self._put(plane, Role.DIM)
        self._about(place, np.zeros_like(band), band, Role.BAND)
        plane = self._plane()
        polyline(plane, self.axis.dot(value), place)
        self._put(plane, Role.MEASURED)
        self._labels()
        for one, across in zip(rows, self.axis.dot(value).tolist(), strict=True):
            if one.moved == "yes":
                row = row_of(self.depth, one.depth, self.sheet)
                self._mark(across, row, self.sheet.glyphs.measured, Role.ACTION)
