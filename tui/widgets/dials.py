"""A list of inputs with a cursor: name, value, unit; those changed are marked; typing is the screen's business."""

from eastfall.tui.dials import Dial
from eastfall.tui.inputs import Inputs
from eastfall.tui.raster import Raster
from eastfall.tui.roles import Role
from eastfall.tui.widgets.cells import CellWidget

_NAME = 18
_VALUE = 11


class DialList(CellWidget):
    """The inputs, one a line; a list longer than the widget follows its cursor."""

    inputs: Inputs | None = None
    dials: tuple[Dial, ...] = ()
    cursor: int = 0
    wrong: str = ""
    """Path of a dial that holds nothing usable."""

    def show(self, inputs: Inputs, dials: tuple[Dial, ...], cursor: int, wrong: str = "") -> None:
        """Draw other inputs."""
        self.inputs, self.dials, self.cursor, self.wrong = inputs, dials, cursor, wrong
        self.redraw()

    def draw(self, sheet: Raster) -> None:
        """Write the lines in view."""
        if self.inputs is None or sheet.height < 1:
            return
        top = min(max(0, self.cursor - sheet.height // 2), max(0, len(self.dials) - sheet.height))
        for row, dial in enumerate(self.dials[top : top + sheet.height]):
            self._line(sheet, row, dial, here=top + row == self.cursor)
        if top > 0:
            sheet.text(sheet.width - 1, 0, "↑" if sheet.glyphs.name != "ascii" else "^", Role.DIM)
        if top + sheet.height < len(self.dials):
            below = "↓" if sheet.glyphs.name != "ascii" else "v"
            sheet.text(sheet.width - 1, sheet.height - 1, below, Role.DIM)

    def _line(self, sheet: Raster, row: int, dial: Dial, *, here: bool) -> None:
        assert self.inputs is not None  # noqa: S101 (draw returned before)
        changed = dial.path in self.inputs.typed
        mark = "!" if dial.path == self.wrong else "*" if changed else " "
        value = self.inputs.shown(dial)
        number = self.inputs.text(dial) not in {"", value} or value[:1].isdigit() or value[:1] in "-."
        unit = self.inputs.unit(dial) if number else ""
        text = f"{mark}{dial.says:<{_NAME - 2}} {value[:_VALUE]:>{_VALUE}} {unit}"
        role = Role.CURSOR if here else Role.STRONG if changed else Role.TEXT
        if mark == "!":
            role = Role.CURSOR if here else Role.ACTION
        sheet.text(0, row, text[: sheet.width - 1].ljust(sheet.width - 1), role)
