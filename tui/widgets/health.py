"""Whether the feed and the record can be believed: one line for small screens, a list where there is room."""

from eastfall.tui import words
from eastfall.tui.raster import Raster
from eastfall.tui.roles import Role
from eastfall.tui.store import HealthView, LinkView, Snapshot
from eastfall.tui.widgets.cells import CellWidget
from eastfall.tui.widgets.line import Piece

_SILENT = 2.0  # s without a line, from which the silence is told in words


def link_words(one: LinkView) -> Piece:
    """Return one link's state in words."""
    if one.state == "lost":
        retry = f", next try in {one.retry_in:.0f} s" if one.retry_in is not None else ""
        return f"LOST{retry}", Role.ACTION
    if one.state == "ended":
        return "ended", Role.DIM
    if one.silent_for > _SILENT:
        return f"SILENT {one.silent_for:.0f} s", Role.WARNING
    return f"{one.rate:.1f} lines/s", Role.OK


def record_words(health: HealthView, mode: str) -> Piece:
    """Return the state of the record."""
    if mode == "replay":
        return "replay of a record", Role.TEXT
    if not health.log_path:
        return "NOT RECORDED", Role.ACTION
    if health.log_state not in {"", "open", "ok", "recording"}:
        return f"RECORD {health.log_state.upper()}", Role.ACTION
    return f"recording {words.size(health.log_bytes)}", Role.OK


def health_line(snapshot: Snapshot) -> tuple[Piece, ...]:
    """Return feed, bad lines and record in one line."""
    health = snapshot.health
    pieces: list[Piece] = []
    for one in health.links:
        pieces += [(f"{one.name} ", Role.DIM), link_words(one), ("  ", Role.DIM)]
    bad = Role.DIM if not health.rejected else Role.WARNING
    pieces += [
        (f"{health.frames} good ", Role.DIM),
        (f"{health.rejected} bad  ", bad),
        record_words(health, snapshot.mode),
    ]
    dropped = sum(one.dropped for one in health.links)
    if dropped:
        pieces.append((f"  {dropped} LINES LOST IN THE QUEUE", Role.ACTION))
    return tuple(pieces)


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
        if self.snapshot is None:
            return
        row = 1
        for pieces in _lines(self.snapshot):
            column = 0
            for text, role in pieces:
                column += sheet.text(column, row, text, role)
            row += 1


def _lines(snapshot: Snapshot) -> list[tuple[Piece, ...]]:
    health = snapshot.health
    lines: list[tuple[Piece, ...]] = []
    for one in health.links:
        lines.append(((f"{one.name}  ", Role.TEXT), link_words(one), (f"  {one.lines} lines", Role.DIM)))
        if one.last_fault:
            lines.append(((f"  last bad: {one.last_fault}", Role.DIM),))
    kinds = ", ".join(f"{count} {kind}" for kind, count in sorted(health.faults.items()) if count)
    bad = f"{health.rejected} bad" + (f": {kinds}" if kinds else "")
    lines.append(((f"{health.frames} good readings, ", Role.TEXT), (bad, _role_of_bad(health))))
    lines.append((record_words(health, snapshot.mode),))
    if health.log_path:
        lines.append(((health.log_path, Role.DIM),))
    return lines


def _role_of_bad(health: HealthView) -> Role:
    return Role.WARNING if health.rejected else Role.DIM
