"""One panel of the depth profile: an axis of the offset by depth on its part of a sheet; the frame is `profile`."""

from collections.abc import Callable, Hashable
from dataclasses import dataclass, field
from functools import partial

import numpy as np

from eastfall.physics.budget import COVERAGE_FACTOR
from eastfall.physics.findings import Rows
from eastfall.tui import sight as look
from eastfall.tui.axes import Axis, around, label, symmetric
from eastfall.tui.raster import Floats, Kept, Packed, Plane, Raster
from eastfall.tui.roles import Role
from eastfall.tui.session import Curve
from eastfall.tui.store import Snapshot, last_pass
from eastfall.tui.strokes import Runs, polyline, rhythm, trace
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


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class Journey:
    """The rows of a picture laid along its depth axis, worked out once for both panels.

    The newest pass is parted where its last dot of depth begins: all before that is as it will stay, and need not be
    drawn again until a further dot is reached.
    """

    past: Rows
    """Earlier passes."""
    now: Rows
    """The newest pass."""
    along: Floats
    """Its depths in dots."""
    smooth: Rows
    """Its first row in each dot: enough for curves that bend little."""
    settled: int
    """How many of its rows are as they will stay."""
    known_by: tuple[float, ...]
    """What tells one settled part from another."""

    @classmethod
    def of(cls, rows: Rows, depth: Axis) -> "Journey":
        """Part and group rows along a depth axis."""
        begin = last_pass(rows)
        now = Rows(rows.data[:, begin:])
        along = depth.dot(now.column("depth"))
        starts = Runs.of(along).starts
        settled = int(starts[-1]) if starts.size else 0
        time = now.column("time")
        known_by = (begin, settled, starts.size, float(time[0]), float(time[settled])) if starts.size else ()
        return cls(
            past=Rows(rows.data[:, :begin]),
            now=now,
            along=along,
            smooth=Rows(now.data[:, starts]),
            settled=settled,
            known_by=known_by,
        )


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
        plane = self._plane()
        self._pair(plane, place, middle, off)
        self._put(plane, role)

    def _pair(self, plane: Plane, place: Floats, middle: Floats, off: Floats) -> None:
        gap = np.full(1, np.nan)
        across = self.axis.dot(np.concatenate([middle - off, gap, middle + off]))
        polyline(plane, across, np.concatenate([place, gap, place]))

    def _mark(self, place: float, row: int, mark: str, role: Role) -> None:
        """Write a mark at a place across the panel [dots]; outside of it nothing."""
        if 0.0 <= place < self.axis.dots:
            self.sheet.text(self.column + int(place) // self.sheet.glyphs.across, row, mark, role)

    def _labels(self) -> None:
        """Name the panel's directions at the top and write the scale below."""
        left, right = _SIDES[self.which]
        title = f"{left} – {right}  {self.units.short}"
        start = self.column + (self.width - len(title)) // 2
        if self.which == 0:
            start = max(start, len(self.units.depth_head) + 1)  # clear of what stands over the depths
        self.sheet.text(start, 0, title, Role.STRONG)
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
    journey : Journey
        Its rows along the depth axis.
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
        self,
        view: ProfileView,
        journey: Journey,
        which: int,
        *,
        depth: Axis,
        sheet: Raster,
        place: tuple[int, int],
    ) -> None:
        super().__init__(which, depth, sheet, place, view.units)
        self.view, self.journey = view, journey

    def draw(self) -> None:
        """Draw grid, band, limits, curves and labels, the important ones last."""
        journey = self.journey
        self._scale()
        self._still(Role.DIM, (), self._zero)
        if len(journey.past):
            last = journey.past.data[:, -1]
            known_by = (len(journey.past), float(last[0]), float(last[1]))
            self._still(Role.PAST, known_by, lambda plane: self._trace(plane, journey.past))
        if len(journey.now):
            self._bounds()
        self._extras()
        if len(journey.now):
            self._newest()
        self._labels()
        self._marks()

    # -- where things go -------------------------------------------------------------------------------------------

    def _columns(self, rows: Rows) -> _Columns:
        name = ("east", "north")[self.which]
        measured, expected = rows.column(f"measured_{name}"), rows.column(f"expected_{name}")
        if self.view.sight.residual:
            measured, expected = measured - expected, np.zeros_like(expected)
        return _Columns(measured=measured, expected=expected, u=rows.column(f"u_{name}"))

    def _scale(self) -> None:
        """Fit the axis to what is in view; the limits count, so that the eye sees how far off they are."""
        smooth = self.journey.smooth
        part, limit = self._columns(smooth), smooth.column("action")
        held = [np.where(self._inside(smooth), part.expected + side * limit, np.nan) for side in (-1.0, 1.0)]
        for rows in (self.journey.past, self.journey.now):
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
        along = self.depth.dot(rows.column("depth"))
        trace(plane, Runs.of(along), along, self.axis.dot(self._columns(rows).measured), upright=True)

    def _newest(self) -> None:
        """Draw what was measured in the newest pass."""
        data, settled = self.journey.now.data, self.journey.settled
        self._still(
            Role.MEASURED, self.journey.known_by, lambda plane: self._trace(plane, Rows(data[:, :settled]))
        )
        plane = self._plane()
        self._trace(plane, Rows(data[:, max(settled - 1, 0) :]))
        self._put(plane, Role.MEASURED)

    def _bounds(self) -> None:
        """Draw band, limits and expected curve of the newest pass."""
        smooth, known_by = self.journey.smooth, self.journey.known_by
        place, part = self.depth.dot(smooth.column("depth")), self._columns(smooth)
        for role, off in (
            (Role.BAND, COVERAGE_FACTOR * part.u),
            (Role.WARNING, smooth.column("warning")),
            (Role.ACTION, smooth.column("action")),
        ):
            self._still(role, known_by, partial(self._pair, place=place, middle=part.expected, off=off))
        across = self.axis.dot(part.expected)
        self._still(Role.EXPECTED, known_by, partial(polyline, x=across, y=place))

    def _extras(self) -> None:
        """Draw where a bob would hang and a dropped body would be, the whole way down, with a letter at the end."""
        for letter, role, curve in self.view.extras:
            across, down, last = self.view.kept.made(
                (id(curve), self.which, self.depth, self.axis), partial(self._curve, curve)
            )
            self._still(role, id(curve), partial(polyline, x=across, y=down))
            self._mark(last, self.sheet.height - BELOW - 1, letter, role)

    def _curve(self, curve: Curve) -> tuple[Floats, Floats, float]:
        """Return a curve of depth in dots across and down, and where across it ends; NaN for nowhere."""
        depths = np.linspace(self.depth.low, self.depth.high, 64)
        across, down = self.axis.dot(curve(depths)[self.which]), self.depth.dot(depths)
        known = across[np.isfinite(across)]
        return across, down, float(known[-1]) if known.size else float("nan")

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
