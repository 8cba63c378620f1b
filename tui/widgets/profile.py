"""The depth profile: measured and expected, east and north side by side, with limits and the uncertainty band."""

from dataclasses import dataclass

import numpy as np

from eastfall.physics.findings import Rows
from eastfall.physics.verdict import COVERAGE_FACTOR
from eastfall.tui import sight as look
from eastfall.tui.axes import Axis, around, label, symmetric
from eastfall.tui.raster import Floats, Raster, Runs, polyline, rhythm, trace
from eastfall.tui.roles import Role
from eastfall.tui.session import Curve
from eastfall.tui.store import Snapshot, last_pass
from eastfall.tui.widgets.cells import CellWidget

LEAST_WIDTH, LEAST_HEIGHT = 26, 6
_GUTTER = 6
_SIDES = (("west", "east"), ("south", "north"))
_DASH = {  # dots drawn and left out, down the panel: told apart without colour
    Role.EXPECTED: (3, 2),
    Role.BAND: (1, 2),
    Role.WARNING: (4, 4),
    Role.BOB: (1, 5),
    Role.FALL: (2, 8),
}
_LEAST_REACH = 0.002  # m; below two millimetres to each side the picture would show only noise


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class ProfileView:
    """What the profile draws."""

    snapshot: Snapshot
    sight: look.Sight
    whole: float
    """Depth of the shaft [m]."""
    bob: "Curve | None" = None
    fall: "Curve | None" = None
    """Where a bob would hang and a dropped body would be, by depth: east and north [m]."""


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class _Columns:
    """One axis (east or north) of the rows [m], along with what goes with it; residual views have expected 0."""

    measured: Floats
    expected: Floats
    u: Floats


class Profile(CellWidget):
    """Depth downward on the left, one panel for east and one for north."""

    view: ProfileView | None = None

    def show(self, view: ProfileView) -> None:
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
        focus = _focus(self.view)
        depth = Axis(
            low=(bounds := look.window(self.view.sight, self.view.whole, focus))[0],
            high=bounds[1],
            dots=(sheet.height - 3) * sheet.glyphs.down,
        )
        _depth_labels(sheet, depth, focus)
        left = (sheet.width - _GUTTER - 1) // 2
        places = ((_GUTTER, left), (_GUTTER + left + 1, sheet.width - _GUTTER - left - 1))
        for which, place in enumerate(places):
            _Panel(self.view, which, depth, sheet, place).draw()
        _legend(sheet, self.view)


def _focus(view: ProfileView) -> float:
    one = look.subject(view.sight, view.snapshot)
    return one.depth if one is not None else float("nan")


def _depth_labels(sheet: Raster, depth: Axis, focus: float) -> None:
    """Write the depths at the left, and the mark of the depth in view."""
    sheet.text(0, 0, "depth m", Role.DIM)
    down = sheet.glyphs.down
    ticks = depth.ticks(max(2, (sheet.height - 3) // 3))
    step = ticks[1] - ticks[0] if len(ticks) > 1 else 1.0
    for value in ticks:
        row = min(int(depth.dot(value)) // down, sheet.height - 4)
        sheet.text(0, 1 + row, f"{label(value, step, signed=False):>{_GUTTER - 1}}", Role.DIM)
    if np.isfinite(focus) and depth.low <= focus <= depth.high:
        row = 1 + min(int(depth.dot(focus)) // down, sheet.height - 4)
        sheet.text(0, row, f"{focus:>{_GUTTER - 1}.{0 if focus >= 1000.0 else 1}f}", Role.STRONG)
        sheet.text(_GUTTER - 1, row, sheet.glyphs.here, Role.STRONG)


def _legend(sheet: Raster, view: ProfileView) -> None:
    """Say in the bottom row what the lines mean, as far as there is room."""
    solid, dashed, dotted, broken, heavy = sheet.glyphs.samples
    parts = [(f"{solid}measured", Role.MEASURED), (f"{dashed}expected", Role.EXPECTED)]
    if view.sight.residual:
        parts = [(f"{solid}measured less expected", Role.MEASURED)]
    parts += [(f"{dotted}±U", Role.BAND), (f"{broken}warning", Role.WARNING), (f"{heavy}action", Role.ACTION)]
    if _extras(view):
        parts += [("b bob", Role.BOB), ("d dropped", Role.FALL)]
    column = _GUTTER
    for words, role in parts:
        if column + len(words) > sheet.width:
            break
        column += sheet.text(column, sheet.height - 1, words, role) + 1


def _extras(view: ProfileView) -> list[tuple[str, Role, Curve]]:
    """Return the classical curves to draw, with their letters."""
    if view.sight.residual or not view.sight.extras:
        return []
    both = (("b", Role.BOB, view.bob), ("d", Role.FALL, view.fall))
    return [(letter, role, curve) for letter, role, curve in both if curve is not None]


class _Panel:
    """One of the two panels, drawn on part of the sheet."""

    def __init__(
        self, view: ProfileView, which: int, depth: Axis, sheet: Raster, place: tuple[int, int]
    ) -> None:
        self.view, self.which, self.depth, self.sheet = view, which, depth, sheet
        self.column, self.width = place
        self.rows = view.snapshot.rows
        self.begin = last_pass(self.rows)
        self.axis = Axis(low=-1.0, high=1.0, dots=self.width * sheet.glyphs.across)

    def draw(self) -> None:
        """Draw grid, band, limits, curves and labels, the important ones last."""
        now = Rows(self.rows.data[:, self.begin :])
        past = Rows(self.rows.data[:, : self.begin])
        self._scale(past, now)
        self._zero()
        if len(past):
            self._measured(past, Role.PAST)
        if len(now):
            self._bounds(now)
        self._extras()
        if len(now):
            self._measured(now, Role.MEASURED)
        self._labels()
        self._marks()

    def _columns(self, rows: Rows) -> _Columns:
        name = ("east", "north")[self.which]
        measured, expected = rows.column(f"measured_{name}"), rows.column(f"expected_{name}")
        if self.view.sight.residual:
            measured, expected = measured - expected, np.zeros_like(expected)
        return _Columns(measured=measured, expected=expected, u=rows.column(f"u_{name}"))

    def _scale(self, past: Rows, now: Rows) -> None:
        """Fit the axis to what is in view; the limits count, so that the eye sees how far off they are."""
        held = []
        for rows in (past, now):
            inside = (rows.column("depth") >= self.depth.low) & (rows.column("depth") <= self.depth.high)
            part = self._columns(Rows(rows.data[:, inside]))
            held += [part.measured]
        limit = now.column("action")[inside]
        held += [part.expected - limit, part.expected + limit]
        values = np.concatenate(held)
        fit = symmetric if self.view.sight.residual else around
        low, high = fit(values, _LEAST_REACH)
        self.axis = Axis(low=low, high=high, dots=self.axis.dots)

    def _along(self, rows: Rows) -> Floats:
        along: Floats = self.depth.dot(rows.column("depth"))
        return along

    def _put(self, part: np.ndarray, role: Role) -> None:
        """Stamp a panel's plane where the panel lies on the sheet."""
        plane = self.sheet.plane()
        down, across = self.sheet.glyphs.down, self.sheet.glyphs.across
        plane[down : down + part.shape[0], self.column * across : self.column * across + part.shape[1]] = part
        self.sheet.stamp(plane, role)

    def _plane(self) -> np.ndarray:
        return np.zeros((self.depth.dots, self.axis.dots), dtype=np.bool_)

    def _zero(self) -> None:
        """Draw the reference line: offset zero."""
        plane = self._plane()
        place = float(self.axis.dot(0.0))
        polyline(plane, [place, place], [0.0, self.depth.dots])
        self._put(rhythm(plane, 1, 3, upright=True), Role.DIM)

    def _measured(self, rows: Rows, role: Role) -> None:
        along = self._along(rows)
        plane = self._plane()
        trace(plane, Runs.of(along), along, self.axis.dot(self._columns(rows).measured), upright=True)
        self._put(plane if role is Role.MEASURED else rhythm(plane, 1, 1, upright=True), role)

    def _bounds(self, rows: Rows) -> None:
        """Draw band, limits and expected curve; they are smooth, so one row a dot is enough."""
        along = self._along(rows)
        runs = Runs.of(along)
        kept = Rows(rows.data[:, np.r_[runs.starts, len(rows) - 1]])
        place, part = self._along(kept), self._columns(kept)
        wide = COVERAGE_FACTOR * part.u
        self._line(place, [part.expected - wide, part.expected + wide], Role.BAND, _DASH[Role.BAND])
        warning, action = kept.column("warning"), kept.column("action")
        self._line(
            place, [part.expected - warning, part.expected + warning], Role.WARNING, _DASH[Role.WARNING]
        )
        self._line(place, [part.expected - action, part.expected + action], Role.ACTION, None)
        self._line(place, [part.expected], Role.EXPECTED, _DASH[Role.EXPECTED])

    def _line(self, place: Floats, curves: list[Floats], role: Role, dash: tuple[int, int] | None) -> None:
        plane = self._plane()
        for values in curves:
            polyline(plane, self.axis.dot(values), place)
        self._put(rhythm(plane, *dash, upright=True) if dash else plane, role)

    def _extras(self) -> None:
        """Draw where a bob would hang and a dropped body would be, the whole way down, with a letter at the end."""
        depths = np.linspace(self.depth.low, self.depth.high, 64)
        for letter, role, curve in _extras(self.view):
            values = curve(depths)[self.which]
            self._line(self.depth.dot(depths), [values], role, _DASH[role])
            known = np.flatnonzero(np.isfinite(values))
            place = float(self.axis.dot(values[known[-1]])) if known.size else -1.0
            if 0.0 <= place < self.axis.dots:
                column = self.column + int(place) // self.sheet.glyphs.across
                self.sheet.text(column, self.sheet.height - 3, letter, role)

    def _labels(self) -> None:
        """Name the panel's directions at the top and write the scale below."""
        left, right = _SIDES[self.which]
        title = f"{left} – {right}  mm"
        self.sheet.text(self.column + (self.width - len(title)) // 2, 0, title, Role.STRONG)
        ticks = self.axis.ticks(max(4, self.width // 5))
        step = (ticks[1] - ticks[0]) if len(ticks) > 1 else 1e-3
        row = self.sheet.height - 2
        self.sheet.text(self.column, row, self.sheet.glyphs.rule * self.width, Role.DIM)
        free = self.column
        for value in ticks:
            words = label(value * 1e3, step * 1e3, signed=True)
            middle = self.column + int(self.axis.dot(value)) // self.sheet.glyphs.across
            start = min(max(middle - len(words) // 2, self.column), self.column + self.width - len(words))
            if start >= free:
                self.sheet.text(max(start - 1, self.column), row, " " * (len(words) + 2), Role.DIM)
                self.sheet.text(start, row, words, Role.DIM)
                free = start + len(words) + 1

    def _marks(self) -> None:
        """Mark the point in view: expected first, measured over it."""
        one = look.subject(self.view.sight, self.view.snapshot)
        if one is None or not self.depth.low <= one.depth <= self.depth.high:
            return
        pairs = ((one.expected_east, one.expected_north), (one.measured_east, one.measured_north))
        base = pairs[0][self.which] if self.view.sight.residual else 0.0
        row = 1 + min(int(self.depth.dot(one.depth)) // self.sheet.glyphs.down, self.sheet.height - 4)
        marks = ((self.sheet.glyphs.expected, Role.EXPECTED), (self.sheet.glyphs.measured, Role.MEASURED))
        for both, (mark, role) in zip(pairs, marks, strict=True):
            place = float(self.axis.dot(both[self.which] - base))
            if 0.0 <= place < self.axis.dots:
                self.sheet.text(self.column + int(place) // self.sheet.glyphs.across, row, mark, role)
