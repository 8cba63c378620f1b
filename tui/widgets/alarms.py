"""The alarm list: every alarm that is not normal, those that wait for an answer first; they stay until acknowledged."""

from textual.message import Message

from eastfall.physics.findings import AlarmView
from eastfall.tui import words
from eastfall.tui.keys import keymap_of
from eastfall.tui.raster import Raster
from eastfall.tui.roles import Role
from eastfall.tui.store import in_order
from eastfall.tui.widgets.cells import CellWidget
from eastfall.tui.widgets.line import wrapped


def role_of(one: AlarmView) -> Role:
    """Return how an alarm's line is drawn."""
    if one.state not in words.WANTS_ANSWER:
        return Role.DIM if one.state == "shelved" else Role.TEXT
    return Role.WARNING if "warning" in one.name else Role.ACTION


class AlarmList(CellWidget):
    """The alarms under a title, long ones on several lines; the last line says when there are more."""

    alarms: tuple[AlarmView, ...] = ()
    live: bool = True

    class Clicked(Message):
        """The list was clicked."""

    def on_click(self) -> None:
        """Ask for the board."""
        self.post_message(self.Clicked())

    def show(self, alarms: tuple[AlarmView, ...], *, live: bool = True) -> None:
        """Draw another list; only a live run has the key that acknowledges."""
        if (alarms, live) != (self.alarms, self.live):
            self.alarms, self.live = alarms, live
            self.redraw()

    def draw(self, sheet: Raster) -> None:
        """Write the list under its title."""
        waiting = sum(one.state in words.WANTS_ANSWER for one in self.alarms)
        key = f" (key {keymap_of(self.app)['watch.acknowledge']})" if self.live else ""
        title = f"alarms: {waiting} to acknowledge{key}" if waiting else "alarms: none to acknowledge"
        sheet.text(0, 0, title, Role.STRONG)
        row = 1
        for one in in_order(self.alarms):
            told = self.letters(words.alarm(one, self.units))
            for index, part in enumerate(wrapped(told, sheet.width, sheet.width - 2)):
                sheet.text(2 if index else 0, row, part, role_of(one))
                row += 1
        if row > sheet.height:
            more = f"more below: {keymap_of(self.app)['watch.alarms']} lists all"
            sheet.text(0, sheet.height - 1, more.ljust(sheet.width), Role.STRONG)
