"""The help page: the keys of the screen one came from, and how to read what is on it."""

from collections.abc import Callable
from functools import partial
from typing import ClassVar

from textual.app import ComposeResult
from textual.binding import BindingType
from textual.containers import VerticalScroll

from eastfall.io.cautions import CAUTIONS
from eastfall.tui import keys
from eastfall.tui.roles import Role
from eastfall.tui.screens.dialogs import plain, shown_in
from eastfall.tui.units import METRIC, Units
from eastfall.tui.widgets.cells import PaintedScreen
from eastfall.tui.widgets.line import KeyLine
from eastfall.tui.widgets.table import LongTable, fit_bar

_READING = """How to read the picture

Depth goes down, in {long} from the collar.
Offsets are {short} east (+) or west (-), north (+) or south (-) of the
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

Steering (key {steer}): bell fast: over or undecided; slower: past warning; slow:
off by more than the uncertainty; silent: do not move it.

Plan, north up
  rings     warning limit inside, action limit outside, about the expected
  x         rest point of a swing, in its 95 % ellipse"""


_INPUTS = """Marks of the inputs
  *  changed against the site file
  !  out of its range: the line below says what is accepted"""
_MARKS = {
    "form": """Marks of the keys
  *  given in the file; without a mark: the default
  ?  required, and missing
  !  wrong: the line at the bottom says why""",
    "explorer": _INPUTS,
    "planner": _INPUTS,
    "whatif": _INPUTS,
    "trial": """Marks of the lines
  =  good
  !  bad
  -  not used
  ~  waiting for the rest""",
    "shelf": """Marks of the runs
  *  picked to be compared""",
}
"""How to read what is on a screen that is no picture, by its place."""


def reading(keymap: keys.Keymap, units: Units = METRIC) -> str:
    """Return how to read what is on the watch screen."""
    return _READING.format(steer=keymap["watch.steer"], long=units.long_name, short=units.short_name)


def key_table(
    keymap: keys.Keymap,
    *places: str,
    replay: bool = False,
    kind: str = "guided",
    spelled: Callable[[str], str] = str,
) -> str:
    """Return the keys of some places, one a line; `spelled` puts a key into the letters of the terminal."""
    told = [(spelled(key), what) for key, what in keymap.page(*places, replay=replay, kind=kind)]
    width = max((len(key) for key, _ in told), default=0) + 1
    return "\n".join(f"{key:<{width}}{what}" for key, what in told)


class HelpScreen(PaintedScreen[None]):
    """Keys and reading of one screen."""

    BINDINGS: ClassVar[list[BindingType]] = list(keys.bindings("page"))

    def __init__(self, *places: str, replay: bool = False, kind: str = "guided") -> None:
        super().__init__()
        self._places, self._replay, self._kind = places, replay, kind

    def compose(self) -> ComposeResult:
        """Show the keys, how to read the picture, and the cautions."""
        keymap = keys.keymap_of(self.app)
        table = key_table(
            keymap,
            *self._places,
            "all",
            replay=self._replay,
            kind=self._kind,
            spelled=partial(shown_in, self.app),
        )
        with VerticalScroll(classes="page"):
            yield plain("Keys\n\n" + table)
            if told := self._about(keymap):
                yield plain("\n" + told)
            yield plain("\nCautions\n\n" + "\n".join(CAUTIONS))
        yield KeyLine(id="keys")

    def _about(self, keymap: keys.Keymap) -> str:
        """Return how to read what is on the screen that this page was opened over."""
        for place in self._places:
            if place in _MARKS:
                return _MARKS[place]
        return reading(keymap, getattr(self.app, "units", METRIC)) if "watch" in self._places else ""

    def on_mount(self) -> None:
        """Fit the scroll bar to the terminal, and tell the ways on and back."""
        page = self.query_one(VerticalScroll)
        fit_bar(page)
        page.focus()
        keymap = keys.keymap_of(self.app)
        scroll = (
            f"{keymap['list.up']} {keymap['list.down']} {keymap['list.page-up']} {keymap['list.page-down']}"
        )
        self.query_one(KeyLine).show(*keymap.line("page"), (scroll, "scroll"))

    def action_close(self) -> None:
        """Go back."""
        self.dismiss(None)


class KeyNames(PaintedScreen[None]):
    """Every key that can be moved, by the name that the settings file knows it by."""

    PLACES = ("list", "page")
    BINDINGS: ClassVar[list[BindingType]] = list(keys.bindings("page"))

    def compose(self) -> ComposeResult:
        """Show the table."""
        yield LongTable(f"{'name':<22}{'key':<7}what it does", id="key-names")
        yield KeyLine(id="keys")

    def on_mount(self) -> None:
        """Fill it."""
        keymap = keys.keymap_of(self.app)
        names = keymap.names()
        table = self.query_one(LongTable)
        table.follows = False
        table.focus()
        table.show(len(names), lambda row: ("{:<22}{:<7}{}".format(*names[row]), Role.TEXT))
        self.query_one(KeyLine).show(*keymap.line(*self.PLACES))

    def action_close(self) -> None:
        """Go back."""
        self.dismiss(None)
