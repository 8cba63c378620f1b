"""The help page: the keys of the screen one came from, and how to read what is on it."""

from collections.abc import Mapping
from typing import ClassVar

from textual.app import ComposeResult
from textual.binding import BindingType
from textual.containers import VerticalScroll
from textual.screen import Screen

from eastfall.io.cautions import CAUTIONS
from eastfall.tui import keys
from eastfall.tui.screens.dialogs import plain
from eastfall.tui.widgets.table import fit_bar

READING = """How to read the picture

Depth goes down, in metres from the collar.
Offsets are millimetres east (+) or west (-), north (+) or south (-) of the
reference line named in the top row.
A residual is measured less expected; its direction is a bearing from north.
± is the expanded uncertainty (k = 2, about 95 %).

WITHIN     residual and all of its uncertainty are inside the action limit
OVER       residual less all of its uncertainty is beyond the action limit
UNDECIDED  the limit lies inside the uncertainty: measure again, or better

Depth picture, east-west on the left and north-south on the right
  solid     measured; thin: an earlier pass
  dashed    expected; dots to both sides: the uncertainty about it
  broken    warning limit
  unbroken  action limit
  b, d      where a plumb bob would hang, where a dropped body would be

Swing of a hung line: the rest point, the swings still needed, and its period
against that of a free line, which goes with the root of its length; a line
that swings faster touches something.

Steering (key d): bell fast: over or undecided; slower: past warning; slow:
off by more than the uncertainty; silent: do not move it.

Plan, north up
  rings     warning limit inside, action limit outside, about the expected
  x         rest point of a swing, in its 95 % ellipse"""


def key_table(places: tuple[str, ...], *, replay: bool, changes: Mapping[str, str] | None = None) -> str:
    """Return the keys of some places, one a line."""
    return "\n".join(
        f"{shown:<10}{what}" for shown, what in keys.page(places, replay=replay, changes=changes)
    )


class HelpScreen(Screen[None]):
    """Keys and reading of one screen."""

    BINDINGS: ClassVar[list[BindingType]] = list(keys.bindings("page"))

    def __init__(self, *places: str, replay: bool = False, changes: Mapping[str, str] | None = None) -> None:
        super().__init__()
        self._table = key_table((*places, "all"), replay=replay, changes=changes)

    def compose(self) -> ComposeResult:
        """Show the keys, how to read the picture, and the cautions."""
        with VerticalScroll(classes="page"):
            yield plain("Keys   (escape goes back, arrows scroll)\n\n" + self._table)
            yield plain("\n" + READING)
            yield plain("\nCautions\n\n" + "\n".join(CAUTIONS))

    def on_mount(self) -> None:
        """Fit the scroll bar to the terminal."""
        fit_bar(self.query_one(VerticalScroll))

    def action_close(self) -> None:
        """Go back."""
        self.dismiss(None)
