"""The prediction explorer: change the inputs, see expected curves and wall contact move, keep two side by side."""

from typing import ClassVar

from textual.app import ComposeResult
from textual.binding import BindingType
from textual.containers import Horizontal
from textual.screen import ModalScreen

from eastfall.physics.settings import Assumptions
from eastfall.tui import keys, outlook
from eastfall.tui.dials import CONDITIONS
from eastfall.tui.inputs import Inputs
from eastfall.tui.outlook import Prospect
from eastfall.tui.roles import Role
from eastfall.tui.screens.dialogs import AskText, Page, plain
from eastfall.tui.screens.inputs import InputScreen, Lines, typing
from eastfall.tui.typed import example_depths
from eastfall.tui.units import METRIC, Units, lengths_in
from eastfall.tui.widgets.curves import Curves, Prospects
from eastfall.tui.widgets.dials import DialList
from eastfall.tui.widgets.line import KeyLine, TextLine

_FRAME = 7
"""Columns that frame and scroll bar of a page take."""


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

    def __init__(self, base: Assumptions, *, name: str = "", units: Units = METRIC) -> None:
        super().__init__(Inputs(base=base, units=units))
        self._site_name = name or "unnamed site"
        self.one: Prospect | None = None
        self.other: Prospect | None = None
        self._others_inputs: Inputs | None = None
        self.what: outlook.What = "expected"
        self.extras = True
        self.depths: tuple[float, ...] = ()
        self._painted: tuple[object, ...] = ()

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
        fresh = (self.one, self.other, self.extras, self.what, self.shown_depths(), self.inputs.units)
        if fresh != self._painted:
            self._painted = fresh
            self._paint_curves(self.one)

    def _paint_curves(self, one: Prospect) -> None:
        """Draw curves and numbers; moving the cursor changes neither."""
        self.query_one(Curves).show(
            Prospects(one=one, other=self.other, extras=self.extras, units=self.inputs.units)
        )
        lines = outlook.table(one, self.other, self.what, self.shown_depths(), self.inputs.units)
        if self._others_inputs is not None:
            lines.append(self._others_inputs.against(self.inputs, CONDITIONS))
        numbers = self.query_one("#numbers", Lines)
        numbers.styles.height = len(lines)
        numbers.show(tuple(lines))

    def _paint_lines(self, one: Prospect) -> None:
        kept = "A, with B kept" if self.other is not None else "A, no B kept"
        self.query_one("#title", TextLine).show(
            (f"expect  {outlook.title(one)}", Role.STRONG),
            (f"  {self._site_name}", Role.TEXT),
            right=((f"{kept}  offsets in {self.inputs.units.short}", Role.STRONG),),
        )
        self.query_one("#answer", TextLine).show(
            (outlook.answer(one, self.inputs.units), Role.DIM if self.complaint else Role.STRONG)
        )
        met = one.curve.wall_contact_depth is not None
        self.query_one("#wall", TextLine).show(
            (outlook.wall(one, self.inputs.units), Role.ACTION if met else Role.TEXT)
        )
        warnings = self.query_one("#warnings", TextLine)
        told = "  ".join(f"! {lengths_in(text, self.inputs.units)}" for text in one.curve.warnings)
        warnings.show((told, Role.WARNING))
        for name in ("answer", "wall", "warnings"):
            self.query_one(f"#{name}", TextLine).fit(self.most)

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
            example = example_depths(self.one.deepest, self.inputs.units)
            hint = f"{self.inputs.units.long_name}, as {example}; nothing: quarters of the shaft"
            self.app.push_screen(AskText("Depths of the table", hint, check=self._read), self._asked)

    def _read(self, text: str) -> tuple[float, ...]:
        assert self.one is not None  # noqa: S101 (the question is asked only with a prediction)
        return outlook.read_depths(text, self.one.deepest, self.inputs.units)

    def _asked(self, text: str | None) -> None:
        if text is not None:
            self.depths = self._read(text) if text.strip() else ()
            self.paint()

    def action_budget(self) -> None:
        """Open the uncertainty budget."""
        if self.one is not None:
            room = min(self.size.width, 70) - _FRAME
            self.app.push_screen(
                BudgetPage(outlook.budget(self.one, self.shown_depths(), self.inputs.units, room))
            )

    def action_plan(self) -> None:
        """Open the drop planner with these inputs."""
        from eastfall.tui.screens.planner import PlannerScreen  # noqa: PLC0415 (it builds on this module)

        if self.one is not None:
            self.app.push_screen(
                PlannerScreen(self.one.assumptions, name=self._site_name, units=self.inputs.units)
            )


class BudgetPage(ModalScreen[None]):
    """Where the uncertainty of the expected offset comes from."""

    BINDINGS: ClassVar[list[BindingType]] = [*keys.bindings("page"), keys.again("explorer.budget", "close")]

    def __init__(self, lines: list[str]) -> None:
        super().__init__()
        self._lines = lines

    def compose(self) -> ComposeResult:
        """Show the lines."""
        with Page():
            yield plain("Where the uncertainty of the expected offset comes from", "title")
            yield plain("\n".join(self._lines))
            back = f"{keys.keymap_of(self.app)['page.close']}  back"
            yield plain(f"\nOne standard uncertainty of each input alone, east and north.   {back}")

    def action_close(self) -> None:
        """Close."""
        self.dismiss(None)
