"""The shelf: all runs of the folders, with verdict and state of their records; open, compare, report, export."""

from collections.abc import Callable, Sequence
from functools import partial
from pathlib import Path
from typing import ClassVar

from textual.app import ComposeResult
from textual.binding import BindingType
from textual.message import Message
from textual.worker import get_current_worker

from eastfall.io.compare import Comparison, compare_runs
from eastfall.io.reduce import reduce_file
from eastfall.io.safetext import safe
from eastfall.io.shelf import RunCard
from eastfall.physics.errors import EastfallError
from eastfall.tui import keys, shelf
from eastfall.tui.roles import Role
from eastfall.tui.screens.compare import CompareScreen
from eastfall.tui.screens.dialogs import AskText
from eastfall.tui.units import METRIC, Units
from eastfall.tui.widgets.cells import PaintedScreen
from eastfall.tui.widgets.line import KeyLine, TextLine
from eastfall.tui.widgets.table import LongTable


class _Left(Exception):  # noqa: N818 (no error: nobody waits for the rest any more)
    """The screen was closed while the list was being made."""


class ShelfScreen(PaintedScreen[Path | None]):
    """The list; closes with the run to replay, or None.

    Parameters
    ----------
    folders : sequence of Path
        Where run logs stand.
    units : Units
        Of the reader.
    """

    PLACES = ("shelf", "page")
    BINDINGS: ClassVar[list[BindingType]] = list(keys.bindings("page", "shelf"))

    class Told(Message):
        """What a worker has come to: cards, how far it is, a comparison, or a line to say."""

        def __init__(self, what: object) -> None:
            super().__init__()
            self.what = what

    def __init__(self, folders: Sequence[Path], units: Units = METRIC) -> None:
        super().__init__()
        self._folders, self._units = tuple(folders), units
        self.cards: tuple[RunCard, ...] = ()
        self._rows: list[RunCard] = []
        self._order, self._only = shelf.ORDERS[0], shelf.FILTERS[0]
        self._picked: Path | None = None
        self._busy = "reading the headers"

    def compose(self) -> ComposeResult:
        """Show a title line over the list."""
        yield TextLine(id="shelf-title")
        yield LongTable(shelf.head(self._units), id="runs")
        yield TextLine(id="shelf-help")
        yield KeyLine(id="shelf-keys")

    def on_mount(self) -> None:
        """Begin to list: headers first, which is quick, then verdicts."""
        table = self.query_one(LongTable)
        table.follows = False
        table.focus()
        self.query_one(KeyLine).show(*keys.keymap_of(self.app).line("shelf", "page", "all"))
        self.paint()
        self._in_a_thread(self._list)

    def _in_a_thread(self, work: Callable[[], object]) -> None:
        self.run_worker(partial(self._work, work), thread=True, exit_on_error=False, group="shelf")

    def _work(self, work: Callable[[], object]) -> None:
        try:
            self.post_message(self.Told(work()))
        except _Left:
            return
        except (EastfallError, OSError) as error:
            self.post_message(self.Told(safe(str(error), 300)))

    def _list(self) -> tuple[RunCard, ...]:
        self.post_message(self.Told(shelf.cards(self._folders, self._progress(), judged=False)))
        return shelf.cards(self._folders, self._progress(), judged=True)

    def _progress(self) -> shelf.Progress:
        worker = get_current_worker()

        def so_far(done: int, total: int) -> None:
            if worker.is_cancelled:
                raise _Left
            self.post_message(self.Told((done, total)))

        return so_far

    def on_shelf_screen_told(self, event: Told) -> None:
        """Show what a worker has come to."""
        match event.what:
            case Comparison() as found:
                self._busy = ""
                self.app.push_screen(CompareScreen((found,), self._units))
            case str(line):
                self._busy = ""
                self.app.notify(line, markup=False, timeout=8)
            case (int(done), int(total)):
                self._busy = f"{done} of {total}" if done < total else ""
            case tuple(cards):
                self.cards = cards
        self.paint()

    def reckon_in(self, units: Units) -> None:
        """Show lengths in other units."""
        self._units = units
        self.paint()

    def on_resize(self) -> None:
        """Take the columns that fit."""
        self.paint()

    def paint(self) -> None:
        """Show the list."""
        self._rows = shelf.chosen(self.cards, self._order, self._only)
        title = f"runs: {len(self._rows)} of {len(self.cards)} ({self._only}), by {self._order}"
        busy = ((f"working: {self._busy}", Role.WARNING),) if self._busy else ()
        self.query_one("#shelf-title", TextLine).show((title, Role.STRONG), right=busy)
        rows, room = self._rows, self.size.width - 1
        table = self.query_one(LongTable)
        table.head = shelf.head(self._units, room)
        table.empty = f"no run is {self._only}" if self.cards else ""
        table.show(
            len(rows),
            lambda i: shelf.line(rows[i], picked=rows[i].path == self._picked, units=self._units, room=room),
        )
        table.follows = False
        key = keys.keymap_of(self.app)["shelf.pick"]
        picked = (
            f"{key} on another run compares it with {safe(self._picked.name, 60)}" if self._picked else ""
        )
        self.query_one("#shelf-help", TextLine).show((picked or self._where(), Role.DIM))

    def _where(self) -> str:
        return (
            "in " + ", ".join(safe(str(one), 60) for one in self._folders)
            if self._folders
            else "no run log found"
        )

    def _under_cursor(self) -> RunCard | None:
        row = self.query_one(LongTable).cursor
        one = self._rows[row] if row < len(self._rows) else None
        return one if one is not None and not one.error else None

    def on_long_table_opened(self) -> None:
        """Close with the run under the cursor."""
        one = self._under_cursor()
        if one is not None:
            self.dismiss(one.path)

    def action_sort(self) -> None:
        """Take the next order."""
        self._order = shelf.ORDERS[(shelf.ORDERS.index(self._order) + 1) % len(shelf.ORDERS)]
        self.paint()

    def action_filter(self) -> None:
        """Take the next filter."""
        self._only = shelf.FILTERS[(shelf.FILTERS.index(self._only) + 1) % len(shelf.FILTERS)]
        self.paint()

    def action_pick(self) -> None:
        """Pick a run to compare; with another picked already compare the two, the older one first."""
        one = self._under_cursor()
        if one is None:
            return
        first, self._picked = self._picked, one.path if self._picked is None else None
        if first is not None and first != one.path:
            ages = {card.path: shelf.age(card) for card in self.cards}
            earlier, later = sorted((first, one.path), key=lambda path: ages.get(path, 0.0))
            self._begin("comparing", lambda: compare_runs(reduce_file(earlier), reduce_file(later)))
        self.paint()

    def action_report(self) -> None:
        """Ask for a file and write the report."""
        self._ask_file("Write the report to", (".html",), _report)

    def action_export(self) -> None:
        """Ask for a file and write the stations."""
        self._ask_file("Write the stations to (.csv, .json or .las)", shelf.EXPORTS, _export)

    def _ask_file(self, question: str, suffixes: Sequence[str], write: Callable[[Path, Path], str]) -> None:
        one = self._under_cursor()
        if one is None:
            return
        log = one.path

        def asked(text: str | None) -> None:
            if text is not None:
                self._begin("writing", partial(write, log, shelf.new_file(text, suffixes)))

        check = partial(shelf.new_file, suffixes=suffixes)
        hint = "Nothing is ever written over."
        value = shelf.beside(log, suffixes[0])
        self.app.push_screen(AskText(question, hint, does="writes it", check=check, value=value), asked)

    def _begin(self, what: str, work: Callable[[], object]) -> None:
        self._busy = what
        self.paint()
        self._in_a_thread(work)

    def action_close(self) -> None:
        """Go back."""
        self.dismiss(None)


def _report(log: Path, out: Path) -> str:
    from eastfall.io.report import write_report  # noqa: PLC0415 (figures are drawn only for a report)

    write_report(reduce_file(log), out)
    return f"report written: {safe(str(out), 200)}"


def _export(log: Path, out: Path) -> str:
    from eastfall.io.export import export  # noqa: PLC0415 (only where asked for)

    export(reduce_file(log), out)
    return f"written: {safe(str(out), 200)}"
