"""The settings screen: what is remembered, changed with the arrows and kept at once; the application applies it."""

from collections.abc import Callable, Mapping
from dataclasses import dataclass
from typing import ClassVar

from textual.app import ComposeResult
from textual.binding import BindingType

from eastfall.io.safetext import safe
from eastfall.tui import keys
from eastfall.tui.preferences import Remembered
from eastfall.tui.roles import Role
from eastfall.tui.screens.dialogs import AskText, plain
from eastfall.tui.screens.help import KeyNames
from eastfall.tui.units import UNITS
from eastfall.tui.widgets.cells import PaintedScreen
from eastfall.tui.widgets.line import KeyLine
from eastfall.tui.widgets.table import LongTable

Change = Callable[[str, object], None]
_WIDE = 70
"""Columns from which the values stand under each other."""


@dataclass(frozen=True, slots=True, kw_only=True)
class Setting:
    """One line of the screen."""

    name: str
    says: str
    values: tuple[object, ...]
    """In the order of the arrows; empty for a text."""
    shown: tuple[str, ...] = ()
    """The values in words."""


SETTINGS = (
    Setting(
        name="units",
        says="lengths in",
        values=("metric", "feet"),
        shown=tuple(UNITS[name].in_words() for name in ("metric", "feet")),
    ),
    Setting(
        name="theme",
        says="colours",
        values=("dark", "light", "none"),
        shown=("on dark ground", "on light ground", "none"),
    ),
    Setting(
        name="glyphs",
        says="curves drawn with",
        values=("auto", "braille", "half", "ascii"),
        shown=("what this terminal shows best", "braille dots", "half blocks", "plain letters"),
    ),
    Setting(name="sound", says="sound of alarms and steering", values=(True, False), shown=("on", "off")),
    Setting(
        name="cell_aspect",
        says="height of a letter over its width",
        values=tuple(round(1.5 + 0.1 * step, 1) for step in range(13)),
        shown=tuple(f"{1.5 + 0.1 * step:.1f}  (until circles are round)" for step in range(13)),
    ),
    Setting(name="keys", says="keys", values=()),
    Setting(name="runs_folder", says="runs are recorded in", values=()),
)


def in_words(one: Setting, value: object) -> str:
    """Return a setting's value for a reader."""
    if isinstance(value, Mapping):
        return f"{f'{len(value)} moved' if value else 'as they were made'}; the list of their names"
    if not one.values:
        return safe(str(value), 60) or "eastfall-runs, where the program is started"
    return one.shown[one.values.index(value)] if value in one.values else str(value)


def after(one: Setting, value: object, by: int) -> object:
    """Return the value `by` places on, round the end; of a number that is not listed, the nearest one's neighbour."""
    if value in one.values:
        return one.values[(one.values.index(value) + by) % len(one.values)]
    numbers = [other for other in one.values if isinstance(other, float)]
    return min(numbers, key=lambda other: abs(other - float(str(value))))


class SettingsScreen(PaintedScreen[None]):
    """The settings, one a line.

    Parameters
    ----------
    remembered : Remembered
        What holds.
    change : callable
        Takes the name of a setting and its new value.
    """

    PLACES = ("settings", "page")
    BINDINGS: ClassVar[list[BindingType]] = [
        *keys.bindings("settings", "page"),
    ]

    def __init__(self, remembered: Remembered, change: Change) -> None:
        super().__init__()
        self._remembered, self._change = remembered, change

    def compose(self) -> ComposeResult:
        """Show the lines, where they are kept, and how keys are moved."""
        yield plain("settings   kept at once", "title")
        yield LongTable("", id="settings")
        yield plain(self._kept(), "kept")
        yield KeyLine(id="setting-keys")

    def _kept(self) -> str:
        where = safe(str(self._remembered.path), 200) if self._remembered.path else "nowhere: not asked for"
        moved = 'Keys are moved in that file: [keys], then lines such as "watch.note" = "N".'
        metric = "Records, reports, exports and printed tables stay in metres and millimetres."
        return "\n".join(filter(None, (f"file: {where}", moved, metric, self._remembered.complaint)))

    def on_mount(self) -> None:
        """Take the keys."""
        table = self.query_one(LongTable)
        table.follows = False
        table.focus()
        self._fill()
        self.query_one(KeyLine).show(*keys.keymap_of(self.app).line("settings", "page", "all"))

    def _fill(self) -> None:
        now = self._remembered.now

        def line(row: int) -> tuple[str, Role]:
            one = SETTINGS[row]
            value = in_words(one, getattr(now, one.name))
            told = f"{one.says:<34}{value}" if self.size.width >= _WIDE else f"{one.says}: {value}"
            return f"  {told}", Role.TEXT

        self.query_one(LongTable).show(len(SETTINGS), line)

    def action_turn(self, by: int) -> None:
        """Change the setting under the cursor; a folder is asked for."""
        one = SETTINGS[self.query_one(LongTable).cursor]
        if one.values:
            self._set(one, after(one, getattr(self._remembered.now, one.name), by))
            return
        if one.name == "keys":
            self.app.push_screen(KeyNames())
            return
        hint = "empty: eastfall-runs, where the program is started"
        self.app.push_screen(AskText("Folder for new records", hint), lambda text: self._folder(one, text))

    def _folder(self, one: Setting, text: str | None) -> None:
        if text is not None:
            self._set(one, text.strip())

    def _set(self, one: Setting, value: object) -> None:
        self._change(one.name, value)
        self._fill()

    def on_long_table_opened(self) -> None:
        """Change the setting under the cursor."""
        self.action_turn(1)

    def action_close(self) -> None:
        """Go back."""
        self.dismiss(None)
