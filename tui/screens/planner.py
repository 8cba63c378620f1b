"""The drop planner: where a body would land and how spread out, whether it meets the wall, what is the best release."""

from typing import TYPE_CHECKING, ClassVar

from textual.app import ComposeResult
from textual.binding import BindingType
from textual.containers import Horizontal

from eastfall.physics.settings import Assumptions
from eastfall.tui import drop, keys
from eastfall.tui.dials import RELEASE, Dial
from eastfall.tui.inputs import Inputs
from eastfall.tui.roles import Role
from eastfall.tui.screens.inputs import MOST, InputScreen, typing
from eastfall.tui.units import METRIC, Units, lengths_in, size_of
from eastfall.tui.widgets.cloud import Cloud
from eastfall.tui.widgets.dials import DialList
from eastfall.tui.widgets.line import KeyLine, TextLine

if TYPE_CHECKING:
    from eastfall.tui.widgets.plan import Scope

CLEAR = "Nobody below a dropped load: clear the shaft first, from collar to bottom."


class PlannerScreen(InputScreen):
    """Inputs on the left, the plan on the right.

    Parameters
    ----------
    base : Assumptions
        Of the site.
    name : str
        Of the site, safe to show.
    units : Units
        Of the reader.
    """

    PLACES = ("planner", "page")
    BINDINGS: ClassVar[list[BindingType]] = [*keys.bindings("planner", "page"), *typing()]
    DIALS: ClassVar[tuple[Dial, ...]] = RELEASE
    HORIZONTAL_BREAKPOINTS = [(0, "-slim"), (62, "-narrow"), (110, "-normal")]  # noqa: RUF012

    def __init__(self, base: Assumptions, *, name: str = "", units: Units = METRIC) -> None:
        super().__init__(Inputs(base=base, units=units))
        self._site_name = name or "unnamed site"
        self.found: drop.Plan | None = None
        self.scope: Scope = "close"

    def compose(self) -> ComposeResult:
        """Put the parts together."""
        yield TextLine(id="title")
        yield TextLine(id="caution")
        for name in ("answer", "wall", "best", "warnings"):
            yield TextLine(id=name)
        with Horizontal(id="middle"):
            yield DialList(id="dials")
            yield Cloud(id="plan-view")
            yield Cloud(id="other-plan")
        yield TextLine(id="help")
        yield KeyLine(id="keys")

    def work(self, inputs: Inputs) -> drop.Plan:
        """Work out the drop."""
        assumptions = inputs.assumptions(RELEASE)
        return drop.plan(assumptions, inputs.level(assumptions.shaft.depth))

    def take(self, found: object) -> None:
        """Keep it."""
        assert isinstance(found, drop.Plan)  # noqa: S101 (what `work` returns)
        self.found = found

    def paint(self) -> None:
        """Show all that is known."""
        if not self.is_mounted:
            return
        self.paint_inputs()
        self.key_line("planner")
        self.query_one("#title", TextLine).show(
            ("plan a drop, from the straight vertical", Role.STRONG), (f"  {self._site_name}", Role.TEXT)
        )
        caution = self.query_one("#caution", TextLine)
        caution.show((CLEAR, Role.ON_GROUND), under=Role.GROUND_WARNING)
        caution.fit(MOST)
        if self.found is not None:
            self._paint_found(self.found)

    def _paint_found(self, found: drop.Plan) -> None:
        units = self.inputs.units
        self.query_one("#answer", TextLine).show(
            (drop.landing(found, units), Role.DIM if self.complaint else Role.STRONG)
        )
        text, in_the_way = drop.wall(found, units)
        self.query_one("#wall", TextLine).show((text, Role.ACTION if in_the_way else Role.TEXT))
        self.query_one("#best", TextLine).show((drop.best(found, units), Role.TEXT))
        warnings = self.query_one("#warnings", TextLine)
        told = "  ".join(f"! {lengths_in(text, units)}" for text in found.warnings)
        warnings.show((told, Role.WARNING))
        for name in ("answer", "wall", "best", "warnings"):
            self.query_one(f"#{name}", TextLine).fit(self.most)
        self.query_one("#plan-view", Cloud).show(found, self.scope, units)
        other: Scope = "wall" if self.scope == "close" else "close"
        self.query_one("#other-plan", Cloud).show(found, other, units)

    def action_best(self) -> None:
        """Release where the body keeps farthest from the wall."""
        if self.found is None or self.found.best is None:
            return
        inputs = self.inputs
        for path, value in (
            ("body.release_east_mm", self.found.best.east),
            ("body.release_north_mm", self.found.best.north),
        ):
            dial = next(one for one in RELEASE if one.path == path)
            shown = value * 1e3 / size_of(dial.key.unit, self.inputs.units)[1]
            inputs = inputs.put(
                dial, f"{shown:.1f}" if self.inputs.units.name == "metric" else f"{shown:.2f}"
            )
        self.change(inputs)

    def action_scope(self) -> None:
        """Change the scale of the plan."""
        self.scope = "wall" if self.scope == "close" else "close"
        self.paint()
