"""The library's list of choices, made to show its cursor where a terminal has no colours."""

from rich.style import Style
from textual.strip import Strip
from textual.widgets import OptionList

from eastfall.tui.widgets.table import fit_bar

_REVERSED = Style(reverse=True)


class Choices(OptionList):
    """A list of choices; without colours the one under the cursor is reversed."""

    def on_mount(self) -> None:
        """Fit the scroll bar to the terminal."""
        fit_bar(self)

    def render_line(self, y: int) -> Strip:
        """Return a line; the library tells the cursor's one by colours alone, and drops a reversal set by a style."""
        strip = super().render_line(y)
        line = int(self.scroll_offset.y) + y
        if not self.app.native_ansi_color or line >= len(self._lines):
            return strip
        return strip.apply_style(_REVERSED) if self._lines[line][0] == self.highlighted else strip
