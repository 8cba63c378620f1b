"""Two surveys of one shaft held against each other: the outcome, the plot by depth, the table with uncertainties."""

from typing import ClassVar

from textual.app import ComposeResult
from textual.binding import BindingType
from textual.containers import Horizontal

from eastfall.io.compare import Comparison
from eastfall.io.safetext import safe
from eastfall.tui import differences, keys
from eastfall.tui.roles import Role
from eastfall.tui.units import METRIC, Units, lengths_in
from eastfall.tui.widgets.cells import PaintedScreen
from eastfall.tui.widgets.line import KeyLine, TextLine
from eastfall.tui.widgets.shift import Shift
from eastfall.tui.widgets.table import LongTable

_MOST = 3
"""Rows that the outcome, and the remarks, may take; one in a low window."""
_LOW = 20


_BOTH = 110
"""Columns from which plot and table stand side by side."""


class CompareScreen(PaintedScreen[None]):
    """One comparison of several.

    Parameters
    ----------
    comparisons : tuple of Comparison
        One at least; the arrows go from one to the next.
    units : Units
        Of the reader.
    """

    PLACES = ("compare", "page")
    BINDINGS: ClassVar[list[BindingType]] = list(keys.bindings("page", "compare"))
    HORIZONTAL_BREAKPOINTS = [(0, "-small"), (_BOTH, "-normal")]  # noqa: RUF012

    def __init__(self, comparisons: tuple[Comparison, ...], units: Units = METRIC) -> None:
        super().__init__()
        self._all, self._units = comparisons, units
        self._at = 0
        self._order = differences.ORDERS[0]
        self._only_moved = False

    def compose(self) -> ComposeResult:
        """Put the parts together."""
        for name in ("compared", "outcome", "remarks"):
            yield TextLine(id=name)
        with Horizontal(id="shown"):
            yield Shift(id="shift")
            yield LongTable(differences.head(self._units), id="differences")
        yield KeyLine(id="compare-keys")

    def on_mount(self) -> None:
        """Show the first."""
        table = self.query_one(LongTable)
        table.follows = False
        table.focus()
        self.paint()

    def paint(self) -> None:
        """Show the comparison in view."""
        if not self.is_mounted:
            return
        one = self._all[self._at]
        idle = (*(("turn",) if self._both else ()), *(("other", "other-back") if len(self._all) < 2 else ()))
        self.query_one(KeyLine).show(*keys.keymap_of(self.app).line("compare", "page", "all", without=idle))
        which = f"{self._at + 1} of {len(self._all)}" if len(self._all) > 1 else ""
        self.query_one("#compared", TextLine).show(
            (safe(one.second), Role.STRONG),
            ("  less  ", Role.DIM),
            (safe(one.first), Role.STRONG),
            right=((which, Role.STRONG),) if which else (),
        )
        calm = not one.moved and any(row.moved == "no" for row in one.rows)
        under = Role.GROUND_OK if calm else Role.GROUND_WARNING
        words = differences.outcome(one, self._units)
        self.query_one("#outcome", TextLine).show((words, Role.ON_GROUND), under=under)
        left_out = (f"stations of the first beyond the second: {one.left_out}",) if one.left_out else ()
        remarks = self.query_one("#remarks", TextLine)
        told = "  ".join(f"! {lengths_in(safe(note), self._units)}" for note in (*one.notes, *left_out))
        remarks.show((told, Role.WARNING))
        for name in ("outcome", "remarks"):
            self.query_one(f"#{name}", TextLine).fit(_MOST if self.size.height >= _LOW else 1)
        self.query_one(Shift).show(one)
        rows = differences.chosen(one, self._order, only_moved=self._only_moved)
        table, room = self.query_one(LongTable), min(self.size.width - 1, 72)
        table.head = differences.head(self._units, room)
        table.empty = "nothing moved beyond its uncertainty" if self._only_moved else ""
        table.show(len(rows), lambda i: differences.row(rows[i], self._units, room))

    @property
    def _both(self) -> bool:
        return self.size.width >= _BOTH

    def on_resize(self) -> None:
        """Tell the keys that mean something in this window."""
        self.paint()

    def reckon_in(self, units: Units) -> None:
        """Show lengths in other units."""
        self._units = units
        self.paint()

    def action_other(self, by: int) -> None:
        """Take another comparison."""
        self._at = (self._at + by) % len(self._all)
        self.paint()

    def action_sort(self) -> None:
        """Take the other order."""
        orders = differences.ORDERS
        self._order = orders[(orders.index(self._order) + 1) % len(orders)]
        self.paint()

    def action_filter(self) -> None:
        """Show all depths, or only where it moved."""
        self._only_moved = not self._only_moved
        self.paint()

    def action_turn(self) -> None:
        """Show the table instead of the plot, or the plot instead of the table, where both do not fit."""
        if self._both:
            self.app.notify("Plot and table both stand here.", markup=False, timeout=3)
        else:
            self.query_one("#shown").toggle_class("-table")

    def action_close(self) -> None:
        """Go back."""
        self.dismiss(None)
