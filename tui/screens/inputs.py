"""A screen of inputs: cursor, typed numbers, turned choices, a worker that follows; explorer and planner are two."""

from typing import ClassVar

from textual.binding import Binding, BindingType
from textual.message import Message

from eastfall.tui import keys
from eastfall.tui.dials import CONDITIONS, Dial
from eastfall.tui.inputs import Inputs
from eastfall.tui.newest import Newest
from eastfall.tui.raster import Raster
from eastfall.tui.roles import Role
from eastfall.tui.screens.dialogs import Confirm
from eastfall.tui.units import Units
from eastfall.tui.widgets.cells import CellWidget, PaintedScreen
from eastfall.tui.widgets.dials import DialList
from eastfall.tui.widgets.line import KeyLine, TextLine

TYPED = {**{str(digit): str(digit) for digit in range(10)}, "full_stop": ".", "comma": ".", "minus": "-"}
"""Keys that write into an input, and what they write."""


def typing() -> list[BindingType]:
    """Return the bindings of a screen of inputs that write numbers."""
    letters: list[BindingType] = [Binding(key, f"write('{sign}')", show=False) for key, sign in TYPED.items()]
    return [*letters, Binding("backspace", "rub", show=False), Binding("delete", "wipe", show=False)]


MOST = 3
"""Rows that a line of words may take, where there are some to spare."""
_LOW = 20


class InputScreen(PaintedScreen[None]):
    """A screen of inputs with a cursor and a worker that follows them; subclasses say what is worked out and shown.

    Parameters
    ----------
    inputs : Inputs
        To begin with.
    """

    DIALS: ClassVar[tuple[Dial, ...]] = CONDITIONS
    PLACES: ClassVar[tuple[str, ...]] = ()

    class Worked(Message):
        """A result for inputs, or why there is none."""

        def __init__(self, inputs: Inputs, found: object) -> None:
            super().__init__()
            self.inputs, self.found = inputs, found

    def __init__(self, inputs: Inputs) -> None:
        super().__init__()
        self.inputs = inputs
        self.cursor = 0
        self.complaint = ""
        self._fresh = True
        self._newest = Newest(self.work, self._worked, self._in_a_thread)

    def work(self, inputs: Inputs) -> object:
        """Work out what is shown; in the worker."""
        raise NotImplementedError

    def take(self, found: object) -> None:
        """Keep a result."""
        raise NotImplementedError

    def paint(self) -> None:
        """Show all that is known."""
        raise NotImplementedError

    def _in_a_thread(self, function: object) -> None:
        self.run_worker(function, thread=True, exit_on_error=False, group="prediction")  # type: ignore[arg-type]

    def _worked(self, inputs: Inputs, found: object) -> None:
        self.post_message(self.Worked(inputs, found))

    def on_input_screen_worked(self, event: Worked) -> None:
        """Show a result, or say what hinders; what was there before stays in view then."""
        if isinstance(event.found, ValueError):
            self.complaint = str(event.found)
        else:
            self.complaint = ""
            self.take(event.found)
        self.paint()

    def on_mount(self) -> None:
        """Work out the first picture."""
        self.change(self.inputs)

    def change(self, inputs: Inputs) -> None:
        """Take other inputs and have them worked out."""
        self.inputs = inputs
        self._newest.ask(inputs)
        self.paint()

    @property
    def most(self) -> int:
        """Rows that a line of words may take in this window."""
        return MOST if self.size.height >= _LOW else 1

    def on_resize(self) -> None:
        """Share out the rows anew."""
        self.call_after_refresh(self.paint)

    @property
    def dial(self) -> Dial:
        """The input under the cursor."""
        return self.DIALS[self.cursor]

    def reckon_in(self, units: Units) -> None:
        """Show lengths, and have them typed, in other units."""
        self._fresh = True
        self.change(self.inputs.reckoned_in(units, self.DIALS))

    def action_move(self, by: int) -> None:
        """Go to another input, round the end."""
        self.cursor = (self.cursor + by) % len(self.DIALS)
        self._fresh = True
        self.paint()

    def action_step(self, by: int) -> None:
        """Turn an input."""
        self._fresh = True
        self.change(self.inputs.stepped(self.dial, by))

    def action_write(self, sign: str) -> None:
        """Write into an input; the first sign after coming to it begins anew."""
        if not self.dial.key.choices:
            before = "" if self._fresh else self.inputs.text(self.dial)
            self._fresh = False
            self.change(self.inputs.put(self.dial, (before + sign)[:12]))

    def action_rub(self) -> None:
        """Take back the last sign."""
        if not self.dial.key.choices:
            self._fresh = False
            self.change(self.inputs.put(self.dial, self.inputs.text(self.dial)[:-1]))

    def action_wipe(self) -> None:
        """Empty an input."""
        if not self.dial.key.choices:
            self._fresh = False
            self.change(self.inputs.put(self.dial, ""))

    def action_restore(self) -> None:
        """Take an input as in the site file."""
        self._fresh = True
        self.change(self.inputs.restored(self.dial))

    def action_restore_all(self) -> None:
        """Take all inputs as in the site file; what was changed in several is asked about first."""
        if len(self.inputs.typed) > 1:
            count = len(self.inputs.typed)
            question = Confirm(
                "All inputs as in the site file?", f"What was changed in {count} of them is lost."
            )
            self.app.push_screen(question, lambda sure: self.restore_all() if sure else None)
        else:
            self.restore_all()

    def restore_all(self) -> None:
        """Take all inputs as in the site file."""
        self._fresh = True
        self.change(self.inputs.restored())

    def action_close(self) -> None:
        """Go back."""
        self.dismiss(None)

    def paint_inputs(self) -> None:
        """Show the inputs, and help or complaint."""
        self.query_one(DialList).show(self.inputs, self.DIALS, self.cursor, self._wrong())
        line = self.query_one("#help", TextLine)
        if self.complaint:
            line.show((f"! {self.complaint}", Role.ACTION))
        else:
            line.show((self._help(), Role.DIM))

    def _wrong(self) -> str:
        for dial in self.DIALS:
            try:
                self.inputs.value(dial)
            except ValueError:
                return dial.path
        return ""

    def _help(self) -> str:
        dial, keymap = self.dial, keys.keymap_of(self.app)
        turn = f"{keymap[f'{self.PLACES[0]}.less']} {keymap[f'{self.PLACES[0]}.more']}"
        return f"{dial.help}. " + (f"{turn} choose" if dial.key.choices else f"Type a number, or {turn}")

    def key_line(self, place: str) -> None:
        """Show the keys."""
        self.query_one(KeyLine).show(*keys.keymap_of(self.app).line(place, "page", "all"))


class Lines(CellWidget):
    """Lines of text, the first a head."""

    lines: tuple[str, ...] = ()

    def show(self, lines: tuple[str, ...]) -> None:
        """Draw other lines."""
        if lines != self.lines:
            self.lines = lines
            self.redraw()

    def draw(self, sheet: Raster) -> None:
        """Write them."""
        for row, text in enumerate(self.lines):
            sheet.text(0, row, text, Role.TEXT if row else Role.STRONG)
