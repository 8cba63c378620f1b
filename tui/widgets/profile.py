"""The depth profile: measured and expected, east and north side by side, with limits and the uncertainty band."""

from math import isfinite

from textual.events import Click, MouseEvent, MouseScrollDown, MouseScrollUp
from textual.message import Message

from eastfall.tui import sight as look
from eastfall.tui.axes import Axis, label
from eastfall.tui.raster import Kept, Raster
from eastfall.tui.roles import Role
from eastfall.tui.units import Units
from eastfall.tui.widgets.cells import CellWidget
from eastfall.tui.widgets.panel import BELOW, GUTTER, Journey, Panel, ProfileView, row_of

LEAST_WIDTH, LEAST_HEIGHT = 26, 6
_WHEEL = 1.25
"""How many times as much depth, or as little, a notch of the wheel shows."""


class Profile(CellWidget):
    """Depth downward on the left, one panel for east and one for north."""

    view: ProfileView | None = None
    depth: Axis | None = None
    """Of the newest picture."""

    class Pointed(Message):
        """The pointer is at a depth [m]: to look at with factor 1, else to zoom about."""

        def __init__(self, depth: float, factor: float, window: tuple[float, float]) -> None:
            super().__init__()
            self.depth, self.factor, self.window = depth, factor, window

    def __init__(self, *, id: str | None = None) -> None:  # noqa: A002 (Textual's name)
        super().__init__(id=id)
        self.kept = Kept()

    def show(self, view: ProfileView) -> None:
        """Draw another view."""
        self.view = view
        self.redraw()

    def on_mouse_scroll_up(self, event: MouseScrollUp) -> None:
        """Come closer, about the pointer."""
        self._point(event, 1.0 / _WHEEL)

    def on_mouse_scroll_down(self, event: MouseScrollDown) -> None:
        """Go back, about the pointer."""
        self._point(event, _WHEEL)

    def on_click(self, event: Click) -> None:
        """Ask for what is at this depth."""
        self._point(event, 1.0)

    def _point(self, event: MouseEvent, factor: float) -> None:
        if self.depth is None:
            return
        event.stop()
        rows = self.size.height - 1 - BELOW
        part = min(max((event.y - 1 + 0.5) / max(rows, 1), 0.0), 1.0)
        low, high = self.depth.low, self.depth.high
        self.post_message(self.Pointed(low + part * (high - low), factor, (low, high)))

    def draw(self, sheet: Raster) -> None:
        """Draw both panels with a common depth axis."""
        if sheet.width < LEAST_WIDTH or sheet.height < LEAST_HEIGHT:
            sheet.text(0, 0, "window too small", Role.DIM)
            return
        if self.view is None:
            return
        one = look.subject(self.view.sight, self.view.snapshot)
        focus = one.depth if one is not None else float("nan")
        top, bottom = look.window(self.view.sight, self.view.whole, focus)
        depth = Axis(low=top, high=bottom, dots=(sheet.height - 1 - BELOW) * sheet.glyphs.down)
        self.depth = depth
        depth_labels(sheet, depth, focus, self.view.units)
        left = (sheet.width - GUTTER - 1) // 2
        places = ((GUTTER, left), (GUTTER + left + 1, sheet.width - GUTTER - left - 1))
        journey = Journey.of(self.view.snapshot.rows, depth)
        for which, place in enumerate(places):
            Panel(self.view, journey, which, depth=depth, sheet=sheet, place=place).draw()
        _legend(sheet, self.view)


def depth_labels(sheet: Raster, depth: Axis, focus: float, units: Units) -> None:
    """Write the depths at the left, and the mark of the depth in view."""
    size = units.long_size
    sheet.text(0, 0, units.depth_head, Role.DIM)
    ticks = depth.ticks(max(2, (sheet.height - 1 - BELOW) // 3), size)
    step = ticks[1] - ticks[0] if len(ticks) > 1 else size
    for value in ticks:
        words = label(value / size, step / size, signed=False)
        sheet.text(0, row_of(depth, value, sheet), f"{words:>{GUTTER - 1}}", Role.DIM)
    if isfinite(focus) and depth.low <= focus <= depth.high:
        row, places = row_of(depth, focus, sheet), 0 if focus / size >= 1000.0 else 1
        sheet.text(0, row, f"{units.depth(focus, places):>{GUTTER - 1}}{sheet.glyphs.here}", Role.STRONG)


def _legend(sheet: Raster, view: ProfileView) -> None:
    """Say in the bottom row what the lines mean, as far as there is room."""
    solid, dashed, dotted, broken, heavy = sheet.glyphs.samples
    parts = [(f"{solid}measured", Role.MEASURED), (f"{dashed}expected", Role.EXPECTED)]
    if view.sight.residual:
        parts = [(f"{solid}residual", Role.MEASURED)]
    parts += [(f"{dotted}±U", Role.BAND), (f"{broken}warning", Role.WARNING), (f"{heavy}action", Role.ACTION)]
    names = {"b": "b bob", "d": "d dropped"}
    parts += [(names[letter], role) for letter, role, _ in view.extras]
    column = GUTTER
    for words, role in parts:
        if column + len(words) > sheet.width:
            break
        column += sheet.text(column, sheet.height - 1, words, role) + 1
