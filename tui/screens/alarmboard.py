"""All alarms that are not normal, and what happened so far: acknowledge one, put one aside, read who said what."""

from collections.abc import Callable
from typing import ClassVar

from textual.app import ComposeResult
from textual.binding import BindingType

from eastfall.physics.findings import AlarmView
from eastfall.tui import keys, words
from eastfall.tui.people import read_shelving
from eastfall.tui.roles import Role
from eastfall.tui.screens.dialogs import AskText
from eastfall.tui.screens.following import FollowingScreen
from eastfall.tui.store import Snapshot, in_order
from eastfall.tui.units import METRIC, Units
from eastfall.tui.widgets.alarms import role_of
from eastfall.tui.widgets.line import KeyLine, TextLine, wrapped
from eastfall.tui.widgets.table import LongTable

Seen = Callable[[str], None]
"""Acknowledges the alarm of a name."""
Shelve = Callable[[str, float, str], None]
"""Puts the alarm of a name aside for some seconds, with a reason."""
Line = tuple[str, Role]


def history(snapshot: Snapshot, units: Units = METRIC) -> list[Line]:
    """Return what alarms did and people said, the newest first."""
    told = [(one.time, 0, words.alarm_change(one, units), Role.TEXT) for one in snapshot.changes]
    told += [(one.time, 1, one.text, Role.STRONG) for one in snapshot.said]
    told.sort(key=lambda one: one[:2], reverse=True)
    return [(f"{words.clock(time):>8}  {text}", role) for time, _, text, role in told]


class AlarmsScreen(FollowingScreen[None]):
    """The list over the history.

    Parameters
    ----------
    snapshot : Snapshot
        To begin with.
    seen, shelve : callable, optional
        What the keys do; a replay has neither.
    """

    PLACES = ("alarms", "page")
    BINDINGS: ClassVar[list[BindingType]] = list(keys.bindings("page", "alarms"))

    def __init__(self, snapshot: Snapshot, *, seen: Seen | None = None, shelve: Shelve | None = None) -> None:
        super().__init__()
        self._snapshot, self._seen, self._shelve = snapshot, seen, shelve
        self._alarms: list[AlarmView] = []
        self._owners: list[int] = []
        """Which alarm each row is about."""
        self._shown: object = None

    def compose(self) -> ComposeResult:
        """Show a title line over the table."""
        yield TextLine(id="alarms-title")
        yield LongTable("alarms, then their history, the newest first", id="board")
        yield KeyLine(id="alarm-keys")

    def on_mount(self) -> None:
        """Fill the table, the cursor on the first alarm."""
        table = self.query_one(LongTable)
        table.follows = False
        table.focus()
        self.show(self._snapshot)
        pairs = keys.keymap_of(self.app).line("alarms", "page", "all", replay=self._seen is None)
        self.query_one(KeyLine).show(*pairs)

    def show(self, snapshot: Snapshot) -> None:
        """Show a newer snapshot; the table is filled anew only when something changed."""
        self._snapshot = snapshot
        waiting = sum(one.state in words.WANTS_ANSWER for one in snapshot.alarms)
        title = f"alarms: {len(snapshot.alarms)} open, {waiting} to acknowledge"
        self.query_one("#alarms-title", TextLine).show((title, Role.STRONG))
        units: Units = getattr(self.app, "units", METRIC)
        width = max(self.size.width - _BAR, _INDENT + 1)
        known_by = (snapshot.alarms, snapshot.changes, snapshot.said, units, width)
        if known_by == self._shown:
            return
        self._shown = known_by
        self._alarms = in_order(snapshot.alarms)
        rows = [_rows(words.alarm(one, units), role_of(one), width) for one in self._alarms]
        self._owners = [place for place, parts in enumerate(rows) for _ in parts]
        lines = [part for parts in rows for part in parts] or [("no alarms", Role.DIM)]
        past = history(snapshot, units) or [("nothing happened yet", Role.DIM)]
        lines += [("", Role.TEXT), *(part for text, role in past for part in _rows(text, role, width))]
        table = self.query_one(LongTable)
        table.show(len(lines), lines.__getitem__)
        table.follows = False

    def on_resize(self) -> None:
        """Set the lines anew for another width."""
        self.show(self._snapshot)

    def reckon_in(self, units: Units) -> None:
        """Tell lengths in other units."""
        del units
        self.show(self._snapshot)

    def _under_cursor(self) -> AlarmView | None:
        row = self.query_one(LongTable).cursor
        return self._alarms[self._owners[row]] if row < len(self._owners) else None

    def action_seen(self) -> None:
        """Acknowledge the alarm under the cursor."""
        one = self._under_cursor()
        if one is not None and self._seen is not None and one.state in words.WANTS_ANSWER:
            self._seen(one.name)

    def action_shelve(self) -> None:
        """Ask for how long and why, and put the alarm under the cursor aside."""
        one = self._under_cursor()
        if one is None or self._shelve is None:
            return
        shelve, name = self._shelve, one.name

        def asked(text: str | None) -> None:
            if text is not None:
                shelve(name, *read_shelving(text))

        question = f"Shelve {name}: for how many minutes, and why?"
        hint = "as: 10 fan being mended"
        self.app.push_screen(AskText(question, hint, does="shelves it", check=read_shelving), asked)

    def action_close(self) -> None:
        """Go back."""
        self.dismiss(None)


_INDENT = 2
_BAR = 1
"""Columns that further rows of a line stand in, and that the scroll bar takes."""


def _rows(text: str, role: Role, width: int) -> list[Line]:
    """Return a line as rows of a width: nothing of it is cut off."""
    first, *rest = wrapped(text, width, width - _INDENT)
    return [(first, role), *((" " * _INDENT + part, role) for part in rest)]
