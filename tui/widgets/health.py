"""Whether the feed and the record can be believed: one line for small screens, a list where there is room."""

from pathlib import PurePath
from typing import TYPE_CHECKING

from eastfall.io.sitefile import HAND
from eastfall.tui import words
from eastfall.tui.raster import Raster
from eastfall.tui.roles import Role
from eastfall.tui.store import Snapshot
from eastfall.tui.widgets.cells import CellWidget
from eastfall.tui.widgets.line import Piece, wrapped

if TYPE_CHECKING:
    from eastfall.io.run import Health, LinkHealth

_SILENT = 2.0  # s without a line, from which the silence is told in words
_LONGEST_NAME = 20
_PLAYED = {"changed": ("RECORD CHANGED since it was written", Role.ACTION)}


def short_name(url: str) -> str:
    """Return a link's name without its options, cut to fit a line."""
    name = url.split("?", maxsplit=1)[0].rstrip(":/")
    return name if len(name) <= _LONGEST_NAME else "..." + name[3 - _LONGEST_NAME :]


def link_words(one: "LinkHealth") -> Piece:
    """Return one link's state in words."""
    if one.state == "lost":
        retry = f", next try in {one.retry_in:.0f} s" if one.retry_in is not None else ", trying"
        return f"LOST{retry}", Role.ACTION
    if one.state == "ended":
        return "ended", Role.DIM
    if one.url == HAND:
        return "by eye, typed", Role.OK
    if one.silent_for > _SILENT:
        return f"SILENT {one.silent_for:.0f} s", Role.WARNING
    return f"{one.rate:.1f} lines/s", Role.OK


def record_words(health: "Health", mode: str) -> Piece:
    """Return the state of the record."""
    if mode == "replay":
        return _PLAYED.get(health.log_state, ("replay of a record", Role.TEXT))
    if health.log_lost:
        return f"RECORD INCOMPLETE, {health.log_lost} LOST", Role.ACTION
    if not health.log_path:
        return "NOT RECORDED", Role.ACTION
    if health.log_state == "closed":
        return f"record closed, {words.size(health.log_bytes)}", Role.TEXT
    if health.log_state != "recording":
        return f"RECORD FAILING: {health.log_state}", Role.ACTION
    return f"recording {words.size(health.log_bytes)}", Role.OK


def _dropped(health: "Health") -> list[Piece]:
    dropped = sum(one.queue_dropped for one in health.links)
    return [(f"{dropped} LINES LOST IN THE QUEUE  ", Role.ACTION)] if dropped else []


def health_line(snapshot: Snapshot) -> tuple[Piece, ...]:
    """Return record, feed and bad lines in one line, the worst first."""
    health = snapshot.health
    if health is None:
        return (("no feed yet", Role.DIM),)
    pieces = [*_dropped(health), record_words(health, snapshot.mode), ("  ", Role.DIM)]
    for one in health.links:
        pieces += [(f"{short_name(one.name)} ", Role.DIM), link_words(one), ("  ", Role.DIM)]
    pieces += [(f"{health.frames} good ", Role.DIM), (f"{health.rejected} bad", _role_of_bad(health))]
    if health.set_aside:
        pieces.append((f"  {health.set_aside} before arming", Role.WARNING))
    return tuple(pieces)


def told(snapshot: Snapshot) -> tuple[object, ...]:
    """Return what must change for health to be written again at once; its counts alone wait for half a second."""
    health = snapshot.health
    if health is None:
        return ()
    states = tuple((one.state, one.queue_dropped) for one in health.links)
    return states, health.rejected, health.log_state, health.log_lost, int(2.0 * snapshot.time)


class HealthList(CellWidget):
    """Links, bad lines by kind, and the record."""

    snapshot: Snapshot | None = None

    def show(self, snapshot: Snapshot) -> None:
        """Draw another snapshot."""
        self.snapshot = snapshot
        self.redraw()

    def draw(self, sheet: Raster) -> None:
        """Write the list under its title."""
        sheet.text(0, 0, "feed and record", Role.STRONG)
        if self.snapshot is None or self.snapshot.health is None:
            return
        row = 1
        for pieces in _lines(self.snapshot.health, self.snapshot.mode):
            column = 0
            for text, role in pieces:
                told = self.letters(text)
                for index, part in enumerate(wrapped(told, sheet.width - column, sheet.width - 2)):
                    column, row = (2, row + 1) if index else (column, row)
                    column += sheet.text(column, row, part, role)
            row += 1


def _lines(health: "Health", mode: str) -> list[tuple[Piece, ...]]:
    lines: list[tuple[Piece, ...]] = [(record_words(health, mode),)]
    for one in health.links:
        lines.append(
            ((f"{short_name(one.name)}  ", Role.TEXT), link_words(one), (f", {one.lines} lines", Role.DIM))
        )
        if one.last_fault:
            lines.append(((one.last_fault, Role.DIM),))
    kinds = ", ".join(f"{count} {kind}" for kind, count in sorted(health.faults.items()) if count)
    bad = f"{health.rejected} bad" + (f": {kinds}" if kinds else "")
    lines.append(((f"{health.frames} good, ", Role.TEXT), (bad, _role_of_bad(health))))
    lines += [(one,) for one in _dropped(health)]
    if health.log_path:
        lines.append(((PurePath(health.log_path).name, Role.DIM),))
    return lines


def _role_of_bad(health: "Health") -> Role:
    return Role.WARNING if health.rejected else Role.DIM
