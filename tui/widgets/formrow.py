"""The parts of a form: sections side by side with the keys of one of them, and the one line that is typed in.

They show what they are handed and tell where a person clicked or what was typed; what a key may be is not known here.
"""

from dataclasses import dataclass
from typing import TYPE_CHECKING, Literal

from textual.message import Message
from textual.widgets import Input

from eastfall.tui.raster import Raster
from eastfall.tui.roles import Role
from eastfall.tui.widgets.cells import CellWidget

if TYPE_CHECKING:
    from textual.events import Click, Key, MouseScrollDown, MouseScrollUp

State = Literal["given", "default", "missing", "fault"]
_ROLES = {"given": Role.STRONG, "default": Role.DIM, "missing": Role.WARNING, "fault": Role.ACTION}
_MARKS = {"given": "*", "default": " ", "missing": "?", "fault": "!"}
NAME_WIDTH, VALUE_WIDTH, UNIT_WIDTH = 26, 44, 10


@dataclass(frozen=True, slots=True, kw_only=True)
class SectionRow:
    """One section as its list shows it."""

    name: str
    given: int = 0
    faults: int = 0


@dataclass(frozen=True, slots=True, kw_only=True)
class KeyRow:
    """One key as its list shows it."""

    name: str
    value: str
    unit: str = ""
    state: State = "default"


class RowList(CellWidget):
    """Rows of which one is the cursor's; the list moves so that it stays in view."""

    class Chosen(Message):
        """A row was clicked, or the wheel asks for a step."""

        def __init__(self, control: "RowList", row: int) -> None:
            super().__init__()
            self.row = row
            self._control = control

        @property
        def control(self) -> "RowList":
            """The list."""
            return self._control

    def __init__(self, *, id: str) -> None:  # noqa: A002 (Textual's name)
        super().__init__(id=id)
        self.cursor = 0
        self.count = 0
        self._top = 0

    def _place(self, height: int) -> range:
        """Return the rows in view."""
        self._top = max(min(self._top, self.cursor, self.count - height), self.cursor - height + 1, 0)
        return range(self._top, min(self._top + height, self.count))

    def on_click(self, event: "Click") -> None:
        """Tell which row was meant."""
        row = self._top + event.y
        if row < self.count:
            self.post_message(self.Chosen(self, row))

    def on_mouse_scroll_down(self, event: "MouseScrollDown") -> None:
        """Ask for the next row."""
        event.stop()
        self.post_message(self.Chosen(self, min(self.cursor + 1, self.count - 1)))

    def on_mouse_scroll_up(self, event: "MouseScrollUp") -> None:
        """Ask for the row before."""
        event.stop()
        self.post_message(self.Chosen(self, max(self.cursor - 1, 0)))


class SectionList(RowList):
    """The sections of a file; each with how many keys are given, or how many are at fault."""

    rows: tuple[SectionRow, ...] = ()

    def show(self, rows: tuple[SectionRow, ...], cursor: int) -> None:
        """Set rows and cursor."""
        if (rows, cursor) != (self.rows, self.cursor):
            self.rows, self.cursor, self.count = rows, cursor, len(rows)
            self.redraw()

    def draw(self, sheet: Raster) -> None:
        """Write the rows in view."""
        for line, row in enumerate(self._place(sheet.height)):
            one = self.rows[row]
            here = row == self.cursor
            number = f"!{one.faults}" if one.faults else str(one.given) if one.given else ""
            role = Role.ACTION if one.faults else Role.DIM
            sheet.text(0, line, ">" if here else " ", Role.STRONG)
            sheet.text(1, line, one.name, Role.STRONG if here else Role.TEXT)
            sheet.text(sheet.width - len(number) - 2, line, number, role)
            sheet.text(sheet.width - 1, line, "│", Role.DIM)


class KeyList(RowList):
    """The keys of one section: name, value or default, unit."""

    rows: tuple[KeyRow, ...] = ()

    def show(self, rows: tuple[KeyRow, ...], cursor: int) -> None:
        """Set rows and cursor."""
        if (rows, cursor) != (self.rows, self.cursor):
            self.rows, self.cursor, self.count = rows, cursor, len(rows)
            self.redraw()

    def draw(self, sheet: Raster) -> None:
        """Write the rows in view; a value that does not fit ends in dots."""
        room = min(max(sheet.width - NAME_WIDTH - UNIT_WIDTH - 3, 6), VALUE_WIDTH)
        for line, row in enumerate(self._place(sheet.height)):
            one = self.rows[row]
            role = Role.CURSOR if row == self.cursor else _ROLES[one.state]
            value = one.value if len(one.value) <= room else one.value[: room - 3] + "..."
            words = f" {_MARKS[one.state]} {one.name:<{NAME_WIDTH}}{value:<{room}} {one.unit}"
            sheet.text(0, line, f"{words:<{sheet.width}}", role)
        below = self.count - self._top - sheet.height
        if below > 0:
            sheet.text(sheet.width - 8, sheet.height - 1, f" {below} more".rjust(8), Role.DIM)


class ValueInput(Input):
    """The line that is typed in; for a choice the arrows take the next one. Its screen has an action `enter`.

    Posts `Typed` with the key that it stands for, so that a message that comes late still meets its own key.
    """

    class Typed(Message):
        """Something was typed."""

        def __init__(self, path: str, text: str) -> None:
            super().__init__()
            self.path, self.text = path, text

    def __init__(self, *, id: str) -> None:  # noqa: A002 (Textual's name)
        super().__init__(id=id, compact=True, select_on_focus=False)
        self.cursor_blink = False
        self.path = ""
        self.choices: tuple[str, ...] = ()
        self._told = True

    def load(self, path: str, text: str, hint: str, choices: tuple[str, ...]) -> None:
        """Stand for another key."""
        self._told = False
        self.path, self.choices = path, choices
        self.placeholder = hint
        self.value = text
        self.cursor_position = len(text)
        self._told = True

    def watch_value(self, value: str) -> None:
        """Tell what was typed."""
        if self._told and self.path:
            self.post_message(self.Typed(self.path, value))

    async def _on_key(self, event: "Key") -> None:
        """Do what a key is bound to before the next one is looked at.

        The library sends such keys up to the application and back, while letters are taken at once: in a burst, over a
        slow line, a letter would overtake the arrow before it and land in the wrong key.
        """
        # Nothing public does it: `active_bindings` names the first binding, not the first that is not skipped.
        if not event.is_printable and await self.app._check_bindings(event.key):  # noqa: SLF001
            event.stop()
            event.prevent_default()

    async def action_submit(self) -> None:
        """Have the screen go on at once, for the same reason."""
        await self.run_action("screen.enter")

    def _choose(self, by: int) -> None:
        if self.value in self.choices:
            self.value = self.choices[(self.choices.index(self.value) + by) % len(self.choices)]
        else:
            self.value = self.choices[0 if by > 0 else -1]
        self.cursor_position = len(self.value)

    def action_cursor_left(self, select: bool = False) -> None:
        """Move, or take the choice before."""
        if self.choices:
            self._choose(-1)
        else:
            super().action_cursor_left(select)

    def action_cursor_right(self, select: bool = False) -> None:
        """Move, or take the next choice."""
        if self.choices:
            self._choose(1)
        else:
            super().action_cursor_right(select)
