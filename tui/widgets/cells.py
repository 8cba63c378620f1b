"""The ground of all drawn widgets: a picture of cells, of which only the rows that changed are painted again."""

from itertools import pairwise
from typing import TYPE_CHECKING, ClassVar

import numpy as np
from rich.segment import Segment
from rich.style import Style
from textual.geometry import Region
from textual.screen import Screen, ScreenResultType
from textual.strip import Strip
from textual.widget import Widget

from eastfall.tui.glyphs import BRAILLE, Glyphs
from eastfall.tui.letters import in_ascii
from eastfall.tui.raster import FILLER, Cells, Raster
from eastfall.tui.roles import CLASS_OF, COMPONENT_CLASSES, Role
from eastfall.tui.units import METRIC, Units

if TYPE_CHECKING:
    from textual.events import Resize

_GROUNDS = len(Role)
_FILLER = chr(FILLER)


class PaintedScreen(Screen[ScreenResultType]):
    """A screen that holds the styles of all roles for what is on it.

    With component classes on every widget, each change of a class on the screen would style some hundred nodes anew:
    measured, a quarter of a second.
    """

    COMPONENT_CLASSES: ClassVar[set[str]] = set(COMPONENT_CLASSES)


def role_style(widget: Widget, role: Role) -> Style:
    """Return how a role looks on the widget's screen."""
    return widget.screen.get_component_rich_style(CLASS_OF[role], partial=True)


class CellWidget(Widget):
    """A widget that draws itself as cells; subclasses give `draw`."""

    can_focus = False

    def __init__(self, *, id: str | None = None, classes: str | None = None) -> None:  # noqa: A002 (Textual's name)
        super().__init__(id=id, classes=classes)
        self._cells = Cells.blank(0, 0)
        self._styles: dict[int, Style] = {}

    @property
    def glyphs(self) -> Glyphs:
        """How this terminal shows dots."""
        return getattr(self.app, "glyphs", BRAILLE)

    @property
    def units(self) -> Units:
        """What lengths are shown in."""
        return getattr(self.app, "units", METRIC)

    def letters(self, text: str) -> str:
        """Return a text in the letters that this terminal shows, as long as it will be."""
        return in_ascii(text) if self.glyphs.name == "ascii" else text

    def draw(self, sheet: Raster) -> None:
        """Put the picture on a sheet of the widget's size."""
        raise NotImplementedError

    def redraw(self) -> None:
        """Draw again and paint the rows that came out differently; a hidden widget draws nothing."""
        width, height = self.size
        if width == 0 or height == 0 or not self.is_attached or not self.is_on_screen:
            return
        sheet = Raster(width, height, self.glyphs)
        self.draw(sheet)
        fresh, old = sheet.cells(), self._cells
        self._cells = fresh
        if fresh.chars.shape != old.chars.shape:
            self.refresh()
            return
        rows = fresh.rows_that_differ(old)
        if rows.size:
            self.refresh(*_bands(rows, width))

    def on_resize(self, event: "Resize") -> None:
        """Draw for the new size."""
        del event
        self.redraw()

    def on_show(self) -> None:
        """Draw what came while it was hidden."""
        self.redraw()

    def notify_style_update(self) -> None:
        """Forget the styles of the theme before, and draw in the new ones."""
        super().notify_style_update()
        self._styles.clear()
        self.refresh()

    def render_line(self, y: int) -> Strip:
        """Return one row as runs of equal style."""
        cells = self._cells
        height, width = cells.chars.shape
        if y >= height or width != self.size.width:
            return Strip.blank(self.size.width, self.rich_style)
        code = cells.ink[y].astype(np.int32) * _GROUNDS + cells.ground[y]
        edges = [0, *(np.flatnonzero(np.diff(code)) + 1).tolist(), width]
        words = cells.chars[y].astype("<u4").tobytes().decode("utf-32-le")
        runs = [
            Segment(words[start:stop].replace(_FILLER, ""), self._style(int(code[start])))
            for start, stop in pairwise(edges)
        ]
        return Strip(runs, width)

    def _style(self, code: int) -> Style:
        found = self._styles.get(code)
        if found is None:
            ink, ground = divmod(code, _GROUNDS)
            found = self.rich_style + role_style(self, Role(ink))
            if ground:
                under = role_style(self, Role(ground))
                found += Style(bgcolor=under.bgcolor, reverse=under.reverse)
            self._styles[code] = found
        return found


def _bands(rows: np.ndarray, width: int) -> list[Region]:
    """Return rows as regions, neighbouring ones joined."""
    edges = np.flatnonzero(np.diff(rows) > 1) + 1
    return [Region(0, int(part[0]), width, int(part[-1] - part[0] + 1)) for part in np.split(rows, edges)]
