"""The prediction explorer: change the inputs, see expected curves and wall contact move, keep two side by side."""

from typing import ClassVar

from textual.app import ComposeResult
from textual.binding import Binding, BindingType
from textual.containers import Horizontal, Vertical
from textual.message import Message
from textual.screen import ModalScreen

from eastfall.physics.settings import Assumptions
from eastfall.tui import keys, outlook
from eastfall.tui.dials import CONDITIONS, Dial, Inputs
from eastfall.tui.newest import Newest
from eastfall.tui.outlook import Prospect
from eastfall.tui.raster import Raster
from eastfall.tui.roles import Role
from eastfall.tui.screens.dialogs import AskText, plain
from eastfall.tui.units import METRIC, Units
from eastfall.tui.widgets.cells import CellWidget, PaintedScreen
from eastfall.tui.widgets.curves import Curves, Prospects
from eastfall.tui.widgets.dials import DialList
from eastfall.tui.widgets.line import KeyLine, TextLine

TYPED = {**{str(digit): str(digit) for digit in range(10)}, "full_stop": ".", "comma": ".", "minus": "-"}
"""Keys that write into an input, and what they write."""


def typing() -> list[BindingType]:
    """Return the bindings of a screen of inputs that write numbers."""
    letters: list[BindingType] = [Binding(key, f"write('{sign}')", show=False) for key, sign in TYPED.items()]
    return [*letters, Binding("backspace", "rub", show=False), Binding("delete", "wipe", show=False)]


class InputScreen(PaintedScreen[None]):
    """A screen of inputs with a cursor and a worker that follows them; subclasses say what is worked out and shown.

    Parameters
    ----------
    inputs : Inputs
        To begin with.
    """

    DIALS: ClassVar[tuple[Dial, ...]] = CONDITIONS

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
    def dial(self) -> Dial:
        """The input under the cursor."""
        return self.DIALS[self.cursor]

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
        dial = self.dial
        return f"{dial.help}. " + ("← → choose" if dial.key.choices else "Type a number, or ← →")

    def key_line(self, place: str) -> None:
        """Show the keys."""
        changes = getattr(self.app, "key_changes", None)
        self.query_one(KeyLine).show(*keys.line((place, "page", "all"), replay=False, changes=changes))


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


class ExplorerScreen(InputScreen):
    """Inputs on the left, curves on the right, numbers at depths below.

    Parameters
    ----------
    base : Assumptions
        Of the site.
    name : str
        Of the site, safe to show.
    units : Units
        Of the reader.
    """

    PLACES = ("explorer", "page")
    BINDINGS: ClassVar[list[BindingType]] = [*keys.bindings("explorer", "page"), *typing()]
    DEFAULT_CSS = """
    InputScreen #middle { height: 1fr; layout: horizontal; }
    InputScreen DialList { width: 35; }
    InputScreen #numbers { height: 5; }
    InputScreen #warnings { display: none; }
    """

    def __init__(self, base: Assumptions, *, name: str = "", units: Units = METRIC) -> None:
        super().__init__(Inputs(base=base, units=units))
        self._site_name, self._units = name or "unnamed site", units
        self.one: Prospect | None = None
        self.other: Prospect | None = None
        self._others_inputs: Inputs | None = None
        self.what: outlook.What = "expected"
        self.extras = True
        self.depths: tuple[float, ...] = ()

    def compose(self) -> ComposeResult:
        """Put the parts together."""
        yield TextLine(id="title")
        yield TextLine(id="answer")
        yield TextLine(id="wall")
        yield TextLine(id="warnings")
        with Horizontal(id="middle"):
            yield DialList(id="dials")
            yield Curves(id="curves")
        yield Lines(id="numbers")
        yield TextLine(id="help")
        yield KeyLine(id="keys")

    def work(self, inputs: Inputs) -> Prospect:
        """Work out the prediction."""
        return Prospect.of(inputs.assumptions(CONDITIONS))

    def take(self, found: object) -> None:
        """Keep it as A."""
        assert isinstance(found, Prospect)  # noqa: S101 (what `work` returns)
        self.one = found

    def shown_depths(self) -> tuple[float, ...]:
        """Return the depths of the table [m]."""
        if self.one is None:
            return ()
        return self.depths or outlook.quarters(self.one.deepest)

    def paint(self) -> None:
        """Show all that is known."""
        if not self.is_mounted:
            return
        self.paint_inputs()
        self.key_line("explorer")
        if self.one is None:
            self.query_one("#title", TextLine).show(
                (f"expect  {self._site_name}: working it out", Role.STRONG)
            )
            return
        self._paint_lines(self.one)
        self.query_one(Curves).show(
            Prospects(one=self.one, other=self.other, extras=self.extras, units=self._units)
        )
        lines = outlook.table(self.one, self.other, self.what, self.shown_depths(), self._units)
        if self._others_inputs is not None:
            lines.append(self._others_inputs.against(self.inputs, CONDITIONS))
        numbers = self.query_one("#numbers", Lines)
        numbers.styles.height = len(lines)
        numbers.show(tuple(lines))

    def _paint_lines(self, one: Prospect) -> None:
        kept = "A, with B kept" if self.other is not None else "A alone"
        self.query_one("#title", TextLine).show(
            (f"expect  {outlook.title(one)}", Role.STRONG),
            (f"  {self._site_name}", Role.TEXT),
            right=((f"{kept}  {self._units.short}", Role.STRONG),),
        )
        self.query_one("#answer", TextLine).show(
            (outlook.answer(one, self._units), Role.DIM if self.complaint else Role.STRONG)
        )
        met = one.curve.wall_contact_depth is not None
        self.query_one("#wall", TextLine).show(
            (outlook.wall(one, self._units), Role.ACTION if met else Role.TEXT)
        )
        warnings = self.query_one("#warnings", TextLine)
        told = "  ".join(f"! {text}" for text in one.curve.warnings)
        warnings.display = bool(told)
        warnings.styles.height = 1 if len(told) <= self.size.width else 2
        warnings.show((told, Role.WARNING))

    def action_keep(self) -> None:
        """Keep the prediction as B."""
        self.other, self._others_inputs = self.one, self.inputs
        self.paint()

    def action_swap(self) -> None:
        """Change over A and B, the inputs with them."""
        if self.other is not None and self._others_inputs is not None:
            mine = self.inputs
            self.one, self.other = self.other, self.one
            inputs, self._others_inputs = self._others_inputs, mine
            self.change(inputs)

    def action_alone(self) -> None:
        """Forget B."""
        self.other = self._others_inputs = None
        self.paint()

    def action_compare(self) -> None:
        """Compare the next curve with B."""
        whats = outlook.WHATS
        self.what = whats[(whats.index(self.what) + 1) % len(whats)]
        self.paint()

    def action_extras(self) -> None:
        """Show or hide bob and dropped body."""
        self.extras = not self.extras
        self.paint()

    def action_depths(self) -> None:
        """Ask for the depths of the table."""
        if self.one is not None:
            hint = f"{self._units.long}, as 100 250 600; nothing: quarters of the shaft; escape leaves them"
            self.app.push_screen(AskText("Depths of the table", hint, check=self._read), self._asked)

    def _read(self, text: str) -> tuple[float, ...]:
        assert self.one is not None  # noqa: S101 (the question is asked only with a prediction)
        return outlook.read_depths(text, self.one.deepest, self._units)

    def _asked(self, text: str | None) -> None:
        if text is not None:
            self.depths = self._read(text) if text.strip() else ()
            self.paint()

    def action_budget(self) -> None:
        """Open the uncertainty budget."""
        if self.one is not None:
            self.app.push_screen(BudgetPage(outlook.budget(self.one, self.shown_depths(), self._units)))

    def action_plan(self) -> None:
        """Open the drop planner with these inputs."""
        from eastfall.tui.screens.planner import PlannerScreen  # noqa: PLC0415 (it builds on this module)

        if self.one is not None:
            self.app.push_screen(PlannerScreen(self.one.assumptions, name=self._site_name, units=self._units))


class BudgetPage(ModalScreen[None]):
    """Where the uncertainty of the expected offset comes from."""

    BINDINGS: ClassVar[list[BindingType]] = [*keys.bindings("page"), Binding("u", "close", show=False)]

    def __init__(self, lines: list[str]) -> None:
        super().__init__()
        self._lines = lines

    def compose(self) -> ComposeResult:
        """Show the lines."""
        with Vertical(classes="dialog"):
            yield plain("Where the uncertainty of the expected offset comes from", "title")
            yield plain("\n".join(self._lines))
            yield plain("\nOne standard uncertainty of each input alone, east and north.   esc  back")

    def action_close(self) -> None:
        """Close."""
        self.dismiss(None)
