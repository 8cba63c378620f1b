"""The table of stations: every one that closed, ordered and filtered, one opened to its budget."""

from typing import TYPE_CHECKING, ClassVar

from textual.app import ComposeResult
from textual.binding import BindingType
from textual.screen import ModalScreen

from eastfall.physics.findings import Station
from eastfall.tui import keys, words
from eastfall.tui.roles import Role
from eastfall.tui.screens.dialogs import Page, plain
from eastfall.tui.screens.following import FollowingScreen
from eastfall.tui.store import Snapshot
from eastfall.tui.units import METRIC, NONE, Units
from eastfall.tui.widgets.line import KeyLine, TextLine
from eastfall.tui.widgets.table import LongTable, fitting, fixed

if TYPE_CHECKING:
    from eastfall.physics.settings import Kind

ORDERS = ("time", "depth", "residual")
_WIDTHS = (7, 4, 13, 13, 8, 6, 6, 9, 4)
_RANKS = (0, 5, 6, 7, 2, 4, 3, 1, 8)
"""What stays the longest in a narrow window: depth, verdict, residual, its uncertainty."""
_WIDE = 60
"""Columns from which the table has offsets, and the title their unit."""
_ROLE = {"within": Role.TEXT, "over": Role.ACTION, "undecided": Role.WARNING}


def head(units: Units = METRIC, room: int = 80) -> str:
    """Return the line over the table, as far as there is room."""
    names = (
        units.depth_head,
        "pass",
        "measured E N",
        "expected E N",
        f"resid {units.short}",
        "toward",
        f"± {units.short}",
        "verdict",
        "n",
    )
    return fixed(names, _WIDTHS, fitting(_WIDTHS, _RANKS, room))


def row(one: Station, units: Units = METRIC, kind: "Kind" = "guided", room: int = 80) -> str:
    """Return a station as a line of the table; bodies that fall make no passes."""
    cells = (
        units.depth(one.depth),
        NONE if kind == "drop" else one.direction,
        f"{units.signed(one.measured_east)} {units.signed(one.measured_north)}",
        f"{units.signed(one.expected_east)} {units.signed(one.expected_north)}",
        units.offset(words.residual_length(one)),
        words.bearing(one.residual_east, one.residual_north),
        units.offset(words.expanded(one)),
        words.VERDICT[one.verdict],
        str(one.readings),
    )
    return fixed(cells, _WIDTHS, fitting(_WIDTHS, _RANKS, room))


def chosen(stations: tuple[Station, ...], order: str, only_open: bool) -> list[int]:
    """Return indices in an order; `only_open` leaves out what is within."""
    indices = [i for i, one in enumerate(stations) if not only_open or one.verdict != "within"]
    if order == "depth":
        indices.sort(key=lambda i: (stations[i].depth, i))
    elif order == "residual":
        indices.sort(key=lambda i: words.residual_length(stations[i]))
    return indices


class StationsScreen(FollowingScreen[int | None]):
    """The table; closes with the index of a station to look back at, or None."""

    PLACES = ("stations", "page")
    BINDINGS: ClassVar[list[BindingType]] = list(keys.bindings("page", "stations"))

    def __init__(self, snapshot: Snapshot, units: Units = METRIC, kind: "Kind" = "guided") -> None:
        super().__init__()
        self._units, self._kind = units, kind
        self._snapshot = snapshot
        self._order = ORDERS[0]
        self._only_open = False
        self._indices: list[int] = []

    def compose(self) -> ComposeResult:
        """Show a title line over the table."""
        yield TextLine(id="station-title")
        yield LongTable(head(self._units), id="stations")
        yield KeyLine(id="station-keys")

    def on_mount(self) -> None:
        """Fill the table."""
        self.query_one(LongTable).focus()
        self.show(self._snapshot)
        self.query_one(KeyLine).show(*keys.keymap_of(self.app).line("stations", "page", "all"))

    def show(self, snapshot: Snapshot) -> None:
        """Show a newer snapshot."""
        self._snapshot = snapshot
        self._indices = chosen(snapshot.stations, self._order, self._only_open)
        what = "over or undecided" if self._only_open else "all"
        told = f"stations: {len(self._indices)} of {len(snapshot.stations)} ({what}), by {self._order}"
        self.query_one("#station-title", TextLine).show(
            (told, Role.STRONG),
            right=((f"E N: east, north {self._units.short}", Role.TEXT),) if self.size.width >= _WIDE else (),
        )
        room, stations = self.size.width - 1, snapshot.stations
        table = self.query_one(LongTable)
        table.head = head(self._units, room)
        table.empty = (
            "none of them is over or undecided" if snapshot.stations else "no station has closed yet"
        )
        table.show(
            len(self._indices),
            lambda i: (
                row(one := stations[self._indices[i]], self._units, self._kind, room),
                _ROLE[one.verdict],
            ),
        )

    def on_resize(self) -> None:
        """Take the columns that fit."""
        self.show(self._snapshot)

    def reckon_in(self, units: Units) -> None:
        """Show lengths in other units."""
        self._units = units
        self.show(self._snapshot)

    def action_sort(self) -> None:
        """Take the next order."""
        self._order = ORDERS[(ORDERS.index(self._order) + 1) % len(ORDERS)]
        self.show(self._snapshot)

    def action_filter(self) -> None:
        """Show all, or what is not within."""
        self._only_open = not self._only_open
        self.show(self._snapshot)

    def on_long_table_opened(self, event: LongTable.Opened) -> None:
        """Open a station to its budget."""
        index = self._indices[event.row]

        def after(look: bool | None) -> None:
            if look:
                self.dismiss(index)

        self.app.push_screen(StationPage(self._snapshot.stations[index], self._units, self._kind), after)

    def action_close(self) -> None:
        """Go back."""
        self.dismiss(None)


def budget(one: Station, units: Units = METRIC, room: int = 70) -> str:
    """Return a station's uncertainty budget as lines, largest first."""
    if not one.shares:
        return "no budget with this station"
    wide = min(34, max(room - 16, 8))

    def line(name: str, east: str, north: str) -> str:
        return f"{name[: wide - 1]:<{wide}}{east:>8}{north:>8}"

    lines = [line(f"standard uncertainty, {units.short}", "east", "north")]
    lines += [line(s.name, units.offset(s.east, 3), units.offset(s.north, 3)) for s in one.shares]
    lines.append(line("together", units.offset(one.u_east, 3), units.offset(one.u_north, 3)))
    return "\n".join(lines)


_FRAME = 7
"""Columns that frame and scroll bar of a page take."""


class StationPage(ModalScreen[bool]):
    """One station; closes with True to look at it in the picture."""

    BINDINGS: ClassVar[list[BindingType]] = list(keys.bindings("station", "page"))

    def __init__(self, one: Station, units: Units = METRIC, kind: "Kind" = "guided") -> None:
        super().__init__()
        self._one, self._units, self._kind = one, units, kind

    def compose(self) -> ComposeResult:
        """Show the answer, both offsets and the budget."""
        one = self._one
        with Page():
            yield plain(f"Station {one.number}, {words.taken(one, self._kind)}", "title")
            yield plain(words.answer(one, self._units))
            yield plain(f"measured {words.pair(one.measured_east, one.measured_north, units=self._units)}")
            yield plain(f"expected {words.pair(one.expected_east, one.expected_north, units=self._units)}")
            what = "landings" if self._kind == "drop" else "readings"
            yield plain(f"from {one.readings} {what}, closed {words.clock(one.time)} after the start\n")
            if one.spread_east is not None and one.spread_north is not None:
                told = words.pair(one.spread_east, one.spread_north, units=self._units)
                yield plain(f"single bodies scatter by {told} (standard deviation)\n")
            yield plain(budget(one, self._units, min(self.app.size.width, 70) - _FRAME))
            keymap = keys.keymap_of(self.app)
            yield plain(
                f"\n{keymap['station.look']}  look at it in the picture        {keymap['page.close']}  back"
            )

    def action_look(self) -> None:
        """Close and look at it."""
        self.dismiss(True)

    def action_close(self) -> None:
        """Close."""
        self.dismiss(False)
