"""What the port trial draws: lines with how each is read, and a proposal with its reasons."""

from eastfall.io.safetext import safe
from eastfall.io.trial import LineRead
from eastfall.tui.raster import Raster
from eastfall.tui.roles import Role
from eastfall.tui.widgets.cells import CellWidget
from eastfall.tui.widgets.line import Piece, wrapped

_ROLES = {"good": Role.OK, "bad": Role.ACTION, "unused": Role.DIM, "waiting": Role.DIM}
_MARKS = {"good": "=", "bad": "!", "unused": "-", "waiting": "~"}


class TrialLines(CellWidget):
    """Pairs of rows: a line as it came, and under it how it is read; the newest at the bottom."""

    lines: tuple[LineRead, ...] = ()
    note = ""

    def show(self, lines: tuple[LineRead, ...], note: str) -> None:
        """Set the lines, and what to say where there are none."""
        if (lines, note) != (self.lines, self.note):
            self.lines, self.note = lines, note
            self.redraw()

    def draw(self, sheet: Raster) -> None:
        """Write as many pairs as there is room for."""
        shown = self.lines[-(sheet.height // 2) :] if sheet.height > 1 else ()
        for place, one in enumerate(shown):
            sheet.text(0, 2 * place, safe(one.raw, max(sheet.width, 4)), Role.TEXT)
            sheet.text(2, 2 * place + 1, f"{_MARKS[one.verdict]} {one.words}", _ROLES[one.verdict])
        if not shown:
            sheet.text(0, 0, self.note, Role.WARNING)


class Reasons(CellWidget):
    """What is proposed, then a line for each reason; what does not fit is counted."""

    head: Piece = ("", Role.TEXT)
    reasons: tuple[str, ...] = ()

    def show(self, head: Piece, reasons: tuple[str, ...]) -> None:
        """Set both."""
        if (head, reasons) != (self.head, self.reasons):
            self.head, self.reasons = head, reasons
            self.redraw()

    def draw(self, sheet: Raster) -> None:
        """Write them."""
        words, role = self.head
        lines = [(one, role) for one in wrapped(self.letters(words), sheet.width, sheet.width)]
        lines += [(f"  {one}", Role.TEXT) for one in self.reasons]
        if len(lines) > sheet.height:
            left = len(lines) - sheet.height + 1
            lines = [*lines[: sheet.height - 1], (f"  and {left} more; a taller window shows them", Role.DIM)]
        for row, (text, ink) in enumerate(lines):
            sheet.text(0, row, text, ink)
