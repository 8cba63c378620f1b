"""The time strip: length of the residual over the last minutes against the limits."""

import numpy as np

from eastfall.tui.axes import Axis, label, round_step
from eastfall.tui.raster import Raster
from eastfall.tui.roles import Role
from eastfall.tui.store import Snapshot
from eastfall.tui.strokes import Runs, polyline, rhythm, trace
from eastfall.tui.widgets.cells import CellWidget

LEAST_WIDTH, LEAST_HEIGHT = 24, 4
_GUTTER = 5


class Strip(CellWidget):
    """Time to the right, residual upward, in millimetres."""

    snapshot: Snapshot | None = None
    minutes: float = 3.0
    _drawn_at: float = float("-inf")

    def show(self, snapshot: Snapshot) -> None:
        """Draw another snapshot, unless less than half a dot of time went by since the last drawing."""
        self.snapshot = snapshot
        time = snapshot.rows.column("time")
        newest = float(time[-1]) if time.size else 0.0
        half_a_dot = self.minutes * 30.0 / max(1, (self.size.width - _GUTTER) * self.glyphs.across)
        if not 0.0 <= newest - self._drawn_at < half_a_dot:
            self._drawn_at = newest
            self.redraw()

    def draw(self, sheet: Raster) -> None:
        """Draw the strip."""
        if sheet.width < LEAST_WIDTH or sheet.height < LEAST_HEIGHT or self.snapshot is None:
            return
        glyphs, rows = sheet.glyphs, self.snapshot.rows
        time = rows.column("time")
        newest = float(time[-1]) if time.size else 0.0
        begin = int(np.searchsorted(time, newest - self.minutes * 60.0)) if time.size else 0
        size = np.hypot(rows.residual_east[begin:], rows.residual_north[begin:])
        limit = rows.column("action")[begin:]
        top = _top(size, limit, self.units.short_size)
        across = Axis(
            low=newest - self.minutes * 60.0, high=newest, dots=(sheet.width - _GUTTER) * glyphs.across
        )
        up = Axis(low=top, high=0.0, dots=(sheet.height - 2) * glyphs.down)
        self._curves(sheet, across, up, begin, size)
        self._labels(sheet, top)

    def _curves(self, sheet: Raster, across: Axis, up: Axis, begin: int, size: np.ndarray) -> None:
        assert self.snapshot is not None  # noqa: S101 (draw returned before)
        rows = self.snapshot.rows
        place = across.dot(rows.column("time")[begin:])
        for name, role, dash in (("action", Role.ACTION, None), ("warning", Role.WARNING, (2, 4))):
            plane = self._plane(across, up)
            runs = Runs.of(place)
            if runs.length:
                keep = np.append(runs.starts, place.size - 1)
                polyline(plane, place[keep], up.dot(rows.column(name)[begin:][keep]))
            sheet.stamp(rhythm(plane, *dash, upright=False) if dash else plane, role, _GUTTER, 1)
        plane = self._plane(across, up)
        trace(plane, Runs.of(place), place, up.dot(size), upright=False)
        sheet.stamp(plane, Role.MEASURED, _GUTTER, 1)

    @staticmethod
    def _plane(across: Axis, up: Axis) -> np.ndarray:
        return np.zeros((up.dots, across.dots), dtype=np.bool_)

    def _labels(self, sheet: Raster, top: float) -> None:
        size = self.units.short_size
        sheet.text(0, 0, f"residual {self.units.short}, last {self.minutes:g} min", Role.STRONG)
        step = round_step(top / size, 4)
        sheet.text(0, 1, f"{label(top / size, step, signed=False):>{_GUTTER - 1}}", Role.DIM)
        sheet.text(0, sheet.height - 2, f"{'0':>{_GUTTER - 1}}", Role.DIM)
        sheet.text(_GUTTER, sheet.height - 1, f"{self.minutes:g} min ago", Role.DIM)
        sheet.text(sheet.width - 3, sheet.height - 1, "now", Role.DIM)


def _top(size: np.ndarray, limit: np.ndarray, unit: float) -> float:
    """Return the rounded upper end of the strip [m]: past the limit and all that is finite."""
    values = np.concatenate([size, limit])
    values = values[np.isfinite(values)]
    reach = max(0.002, float(values.max()) * 1.1 if values.size else 0.0)
    step = round_step(reach / unit, 4) * unit
    return float(step * np.ceil(reach / step))
