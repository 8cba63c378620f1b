"""A table that formats only the rows in view, so that its length costs nothing; follows the newest until moved."""

from collections.abc import Callable, Sequence
from typing import ClassVar

from rich.segment import Segment
from textual.binding import BindingType
from textual.events import Click
from textual.geometry import Size
from textual.message import Message
from textual.scroll_view import ScrollView
from textual.scrollbar import ScrollBar, ScrollBarRender
from textual.strip import Strip
from textual.widget import Widget

from eastfall.tui import keys
from eastfall.tui.glyphs import BRAILLE
from eastfall.tui.letters import in_ascii
from eastfall.tui.roles import Role
from eastfall.tui.widgets.cells import role_style

CUT = "..."
Formatter = Callable[[int], tuple[str, Role]]
"""From a row's number to its text and how it is drawn."""


class PlainRender(ScrollBarRender):
    """A scroll bar without parts of letters, for terminals that have none."""

    VERTICAL_BARS: ClassVar[list[str]] = [" "] * 8


class PlainBar(ScrollBar):
    """The widget that shows it."""

    renderer: ClassVar[type[ScrollBarRender]] = PlainRender


def fit_bar(widget: Widget) -> None:
    """Give a widget's scroll bar the letters that the terminal has."""
    if getattr(widget.app, "glyphs", BRAILLE).name == "ascii":
        widget.vertical_scrollbar.__class__ = PlainBar


class LongTable(ScrollView, can_focus=True):
    """Rows of text with a cursor.

    Posts `Opened` when a row is chosen with enter.
    """

    BINDINGS: ClassVar[list[BindingType]] = list(keys.bindings("list"))

    class Opened(Message):
        """A row was chosen."""

        def __init__(self, row: int) -> None:
            super().__init__()
            self.row = row

    def __init__(self, head: str, *, id: str | None = None) -> None:  # noqa: A002 (Textual's name)
        super().__init__(id=id)
        self.head = head
        self.empty = ""
        """What is said where there is no row."""
        self._count = 0
        self._format: Formatter = lambda _: ("", Role.TEXT)
        self.cursor = 0
        self.follows = True

    def on_mount(self) -> None:
        """Fit the scroll bar to the terminal."""
        fit_bar(self)

    def show(self, count: int, formatter: Formatter) -> None:
        """Show `count` rows; the cursor stays on the last one until it is moved off."""
        self._count, self._format = count, formatter
        self.virtual_size = Size(max(len(self.head), 1), count + 1)
        if self.follows:
            self.cursor = max(0, count - 1)
        self.cursor = min(self.cursor, max(0, count - 1))
        self._into_view()
        self.refresh()

    def action_move(self, by: int) -> None:
        """Move the cursor."""
        self.cursor = min(max(self.cursor + by, 0), max(0, self._count - 1))
        self.follows = self.cursor >= self._count - 1
        self._into_view()
        self.refresh()

    def action_open(self) -> None:
        """Tell that the row under the cursor was chosen."""
        if self._count:
            self.post_message(self.Opened(self.cursor))

    def _into_view(self) -> None:
        room = max(1, self.size.height - 1)
        top = int(self.scroll_offset.y)
        if self.cursor < top:
            self.scroll_to(y=self.cursor, animate=False, force=True)
        elif self.cursor >= top + room:
            self.scroll_to(y=self.cursor - room + 1, animate=False, force=True)

    def render_line(self, y: int) -> Strip:
        """Return the head, or the row that is scrolled to this line."""
        width = self.size.width
        if y == 0:
            return self._strip(self.head, Role.STRONG, width)
        row = int(self.scroll_offset.y) + y - 1
        if row >= self._count:
            said = self.empty if row == 0 else ""
            return self._strip(said, Role.DIM, width)
        text, role = self._format(row)
        return self._strip(text, Role.CURSOR if row == self.cursor else role, width)

    def on_click(self, event: Click) -> None:
        """Put the cursor on the row that was clicked; a click on the cursor opens its row."""
        row = int(self.scroll_offset.y) + event.y - 1
        if event.y < 1 or row >= self._count:
            return
        if row == self.cursor:
            self.action_open()
        else:
            self.action_move(row - self.cursor)

    def _strip(self, text: str, role: Role, width: int) -> Strip:
        if getattr(self.app, "glyphs", BRAILLE).name == "ascii":
            text = in_ascii(text)
        if len(text) > width > len(CUT):
            text = text[: width - len(CUT)] + CUT
        style = self.rich_style + role_style(self, role)
        return Strip([Segment(text, style)]).adjust_cell_length(width, style)


def fixed(cells: Sequence[str], widths: Sequence[int], shown: Sequence[int] | None = None) -> str:
    """Return texts set to the right in columns of given widths, all or those that are shown."""
    return " ".join(
        f"{cells[at]:>{widths[at]}}" for at in (shown if shown is not None else range(len(cells)))
    )


def fitting(widths: Sequence[int], ranks: Sequence[int], room: int) -> list[int]:
    """Return which columns stand side by side in a room, in their order; of the others those of higher rank go first.

    Parameters
    ----------
    widths, ranks : sequence of int
        Of each column; rank 0 is there in any room.
    room : int
        Columns of letters.
    """
    shown, used = set(), -1
    for at in sorted(range(len(widths)), key=ranks.__getitem__):
        if ranks[at] and used + 1 + widths[at] > room:
            break
        shown.add(at)
        used += 1 + widths[at]
    return sorted(shown)
