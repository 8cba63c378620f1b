"""One panel of the depth profile: an axis of the offset by depth on its part of a sheet; the frame is `profile`."""

from collections.abc import Callable, Hashable
from dataclasses import dataclass, field
from functools import partial

import numpy as np

from eastfall.physics.findings import Rows
from eastfall.physics.verdict import COVERAGE_FACTOR
from eastfall.tui import sight as look
from eastfall.tui.axes import Axis, around, label, symmetric
from eastfall.tui.raster import Floats, Kept, Packed, Plane, Raster, Runs, polyline, rhythm, trace
from eastfall.tui.roles import Role
from eastfall.tui.session import Curve
from eastfall.tui.store import Snapshot, last_pass
from eastfall.tui.units import METRIC, Units

GUTTER = 6
"""Columns for the depths at the left."""
BELOW = 2
"""Rows below the panels: scale and legend."""
_SIDES = (("west", "east"), ("south", "north"))
_DASH = {  # dots drawn and left out, down the panel: told apart without colour
    Role.EXPECTED: (3, 2),
    Role.BAND: (1, 2),
    Role.WARNING: (4, 4),
    Role.BOB: (1, 5),
    Role.FALL: (2, 8),
    Role.DIM: (1, 3),
    Role.PAST: (1, 1),
}
_LEAST_REACH = 0.002  # m; below two millimetres to each side the picture would show only noise


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class ProfileView:
    """What the profile draws."""

    snapshot: Snapshot
    sight: look.Sight
    whole: float
    """Depth of the shaft [m]."""
    bob: Curve | None = None
    fall: Curve | None = None
    """Where a bob would hang and a dropped body would be, by depth: east and north [m]."""
    units: Units = METRIC
    kept: Kept = field(default_factory=Kept)
    """Planes from one picture to the next."""

    @property
    def extras(self) -> list[tuple[str, Role, Curve]]:
        """The classical curves to draw, with their letters; none beside residuals."""
        if self.sight.residual or not self.sight.extras:
            return []
        both = (("b", Role.BOB, self.bob), ("d", Role.FALL, self.fall))
        return [(letter, role, curve) for letter, role, curve in both if curve is not None]


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class _Columns:
    """One axis (east or north) of the rows [m], along with what goes with it; residual views have expected 0."""

    measured: Floats
    expected: Floats
    u: Floats


def one_row_a_dot(rows: Rows, along: Floats) -> Rows:
    """Return the first row of each dot and the last of all: enough for curves that are smooth."""
    return Rows(rows.data[:, np.append(Runs.of(along).starts, len(rows) - 1)])


class PanelGround:
    """One axis of an offset by depth on part of a sheet, and the means to draw on it.

    Parameters
    ----------
    which : int
        0 for east, 1 for north.
    depth : Axis
        Metres of depth down the panel.
    sheet : Raster
        Drawn on.
    place : tuple of int
        First column and width of the panel.
    units : Units
        Of the scale below.
    """

    def __init__(
        self, which: int, depth: Axis, sheet: Raster, place: tuple[int, int], units: Units = METRIC
    ) -> None:
        self.which, self.depth, self.sheet, self.units = which, depth, sheet, units
        self.column, self.width = place
        self.axis = Axis(low=-1.0, high=1.0, dots=self.width * sheet.glyphs.across)

    def _plane(self) -> Plane:
        return np.zeros((self.depth.dots, self.axis.dots), dtype=np.bool_)

    @staticmethod
    def _dashed(plane: Plane, role: Role) -> Plane:
        dash = _DASH.get(role)
        return rhythm(plane, *dash, upright=True) if dash else plane

    def _put(self, plane: Plane, role: Role) -> None:
        self.sheet.stamp(self._dashed(plane, role), role, self.column, 1)

    def _about(self, place: Floats, middle: Floats, off: Floats, role: Role) -> None:
        """Draw a pair of curves to both sides of one."""
        plane, gap = self._plane(), np.full(1, np.nan)
        across = self.axis.dot(np.concatenate([middle - off, gap, middle + off]))
        polyline(plane, across, np.concatenate([place, gap, place]))
        self._put(plane, role)

    def _mark(self, place: float, row: int, mark: str, role: Role) -> None:
        """Write a mark at a place across the panel [dots]; outside of it nothing."""
        if 0.0 <= place < self.axis.dots:
            self.sheet.text(self.column + int(place) // self.sheet.glyphs.across, row, mark, role)

    def _labels(self) -> None:
        """Name the panel's directions at the top and write the scale below."""
        left, right = _SIDES[self.which]
        title = f"{left} – {right}  {self.units.short}"
        self.sheet.text(self.column + (self.width - len(title)) // 2, 0, title, Role.STRONG)
        size = self.units.short_size
        ticks = self.axis.ticks(max(4, self.width // 5), size)
        step = (ticks[1] - ticks[0]) if len(ticks) > 1 else size
        row = self.sheet.height - BELOW
        self.sheet.text(self.column, row, self.sheet.glyphs.rule * self.width, Role.DIM)
        free = self.column
        for value in ticks:
            words = label(value / size, step / size, signed=True)
            middle = self.column + int(self.axis.dot(value)) // self.sheet.glyphs.across
            start = min(max(middle - len(words) // 2, self.column), self.column + self.width - len(words))
            if start >= free:
                self.sheet.text(max(start - 1, self.column), row, " " * (len(words) + 2), Role.DIM)
                self.sheet.text(start, row, words, Role.DIM)
                free = start + len(words) + 1


class Panel(PanelGround):
    """East or north, drawn on part of a sheet.

    Parameters
    ----------
    view : ProfileView
        What to draw.
    which : int
        0 for east, 1 for north.
    depth : Axis
        Metres of depth down the panel.
    sheet : Raster
        Drawn on.
    place : tuple of int
        First column and width of the panel.
    """

    def __init__(
        self, view: ProfileView, which: int, depth: Axis, sheet: Raster, place: tuple[int, int]
    ) -> None:
        super().__init__(which, depth, sheet, place, view.units)
        self.view = view
        rows = view.snapshot.rows
        begin = last_pass(rows)
        self.past, self.now = Rows(rows.data[:, :begin]), Rows(rows.data[:, begin:])

    def draw(self) -> None:
        """Draw grid, band, limits, curves and labels, the important ones last."""
        along = self._along(self.now)
        kept = one_row_a_dot(self.now, along) if len(self.now) else self.now
        self._scale(kept)
        self._still(Role.DIM, (), self._zero)
        if len(self.past):
            last = self.past.data[:, -1]
            known_by = (len(self.past), float(last[0]), float(last[1]))
            self._still(Role.PAST, known_by, lambda plane: self._trace(plane, self.past))
        self._bounds(kept)
        self._extras()
        plane = self._plane()
        self._trace(plane, self.now)
        self._put(plane, Role.MEASURED)
        self._labels()
        self._marks()

    # -- where things go -------------------------------------------------------------------------------------------

    def _columns(self, rows: Rows) -> _Columns:
        name = ("east", "north")[self.which]
        measured, expected = rows.column(f"measured_{name}"), rows.column(f"expected_{name}")
        if self.view.sight.residual:
            measured, expected = measured - expected, np.zeros_like(expected)
        return _Columns(measured=measured, expected=expected, u=rows.column(f"u_{name}"))

    def _scale(self, kept: Rows) -> None:
        """Fit the axis to what is in view; the limits count, so that the eye sees how far off they are."""
        part, limit = self._columns(kept), kept.column("action")
        held = [np.where(self._inside(kept), part.expected + side * limit, np.nan) for side in (-1.0, 1.0)]
        for rows in (self.past, self.now):
            values = self._columns(rows).measured
            if self.view.sight.span is not None:
                values = values[self._inside(rows)]
            held.append(np.array([np.fmin.reduce(values), np.fmax.reduce(values)]) if values.size else values)
        fit = symmetric if self.view.sight.residual else around
        low, high = fit(np.concatenate(held), _LEAST_REACH)
        self.axis = Axis(low=low, high=high, dots=self.axis.dots)

    def _inside(self, rows: Rows) -> Plane:
        depth = rows.column("depth")
        inside: Plane = (depth >= self.depth.low) & (depth <= self.depth.high)
        return inside

    def _along(self, rows: Rows) -> Floats:
        along: Floats = self.depth.dot(rows.column("depth"))
        return along

    def _still(self, role: Role, known_by: Hashable, draw: Callable[[Plane], None]) -> None:
        """Put a plane that stays as it is until the axes change, or what it is known by."""

        def drawn() -> Packed:
            plane = self._plane()
            draw(plane)
            return self.sheet.packed(self._dashed(plane, role))

        key = (role, self.which, known_by, self.depth, self.axis, self.view.sight.residual)
        self.sheet.put(self.view.kept.packed(key, drawn), role, self.column, 1)

    # -- curves ----------------------------------------------------------------------------------------------------

    def _zero(self, plane: Plane) -> None:
        """Draw the reference line: offset zero."""
        place = float(self.axis.dot(0.0))
        polyline(plane, [place, place], [0.0, self.depth.dots])

    def _trace(self, plane: Plane, rows: Rows) -> None:
        """Draw what was measured."""
        along = self._along(rows)
        trace(plane, Runs.of(along), along, self.axis.dot(self._columns(rows).measured), upright=True)

    def _bounds(self, kept: Rows) -> None:
        """Draw band, limits and expected curve of the pass."""
        if not len(kept):
            return
        place, part = self._along(kept), self._columns(kept)
        self._about(place, part.expected, COVERAGE_FACTOR * part.u, Role.BAND)
        self._about(place, part.expected, kept.column("warning"), Role.WARNING)
        self._about(place, part.expected, kept.column("action"), Role.ACTION)
        plane = self._plane()
        polyline(plane, self.axis.dot(part.expected), place)
        self._put(plane, Role.EXPECTED)

    def _extras(self) -> None:
        """Draw where a bob would hang and a dropped body would be, the whole way down, with a letter at the end."""
        depths = np.linspace(self.depth.low, self.depth.high, 64)
        for letter, role, curve in self.view.extras:
            values = curve(depths)[self.which]
            across, down = self.axis.dot(values), self.depth.dot(depths)
            self._still(role, id(curve), partial(polyline, x=across, y=down))
            known = np.flatnonzero(np.isfinite(values))
            if known.size:
                self._mark(float(across[known[-1]]), self.sheet.height - BELOW - 1, letter, role)

    # -- words -----------------------------------------------------------------------------------------------------

    def _marks(self) -> None:
        """Mark the point in view: expected first, measured over it."""
        one = look.subject(self.view.sight, self.view.snapshot)
        if one is None or not self.depth.low <= one.depth <= self.depth.high:
            return
        expected = (one.expected_east, one.expected_north)[self.which]
        measured = (one.measured_east, one.measured_north)[self.which]
        base = expected if self.view.sight.residual else 0.0
        row = row_of(self.depth, one.depth, self.sheet)
        self._mark(float(self.axis.dot(expected - base)), row, self.sheet.glyphs.expected, Role.EXPECTED)
        self._mark(float(self.axis.dot(measured - base)), row, self.sheet.glyphs.measured, Role.MEASURED)


def row_of(depth: Axis, value: float, sheet: Raster) -> int:
    """Return the row of a depth; the bottom of the shaft is in the last row of the panel."""
    return 1 + min(int(depth.dot(value)) // sheet.glyphs.down, sheet.height - BELOW - 2)
