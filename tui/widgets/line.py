"""One line of plain text that paints itself only when its words or its part change."""

from collections.abc import Iterable

from eastfall.tui.raster import Raster
from eastfall.tui.roles import Role
from eastfall.tui.widgets.cells import CellWidget

Piece = tuple[str, Role]


class TextLine(CellWidget):
    """Pieces of text side by side; the first may colour the ground of the whole line."""

    def __init__(self, *, id: str | None = None, classes: str | None = None) -> None:  # noqa: A002 (Textual's name)
        super().__init__(id=id, classes=classes)
        self.pieces: tuple[Piece, ...] = ()
        self.right: tuple[Piece, ...] = ()
        self.under: Role | None = None

    def show(self, *pieces: Piece, right: tuple[Piece, ...] = (), under: Role | None = None) -> None:
        """Set the pieces from the left and those at the right end, for which the left ones give way."""
        if (pieces, right, under) != (self.pieces, self.right, self.under):
            self.pieces, self.right, self.under = pieces, right, under
            self.redraw()

    @property
    def words(self) -> str:
        """The text as a reader sees it, without style."""
        return "".join(text for text, _ in (*self.pieces, *self.right))

    def rows_at(self, width: int) -> int:
        """Return how many rows all the words need at a width; none without words."""
        placed = laid(self._lettered(self.pieces), width)
        if not placed:
            return 0
        column, row, text, _ = placed[-1]
        ending = sum(len(one) for one, _ in self._lettered(self.right))
        return row + 1 + (0 < ending < width < column + len(text) + 1 + ending)

    def fit(self, most: int) -> None:
        """Take the rows that the words need on this screen, no more than some; without words none."""
        self.take(min(self.rows_at(self.screen.size.width), most))

    def take(self, rows: int) -> None:
        """Take so many rows, or none and vanish; nothing is laid out anew where nothing changes."""
        if self.display is not (rows > 0):
            self.display = rows > 0
        if rows and (self.styles.height is None or self.styles.height.value != rows):
            self.styles.height = rows

    def _lettered(self, pieces: tuple[Piece, ...]) -> list[Piece]:
        return [(self.letters(text), role) for text, role in pieces if text]

    def draw(self, sheet: Raster) -> None:
        """Write the pieces; what has no room is cut and ends in dots."""
        if self.under is not None:
            for row in range(sheet.height):
                sheet.ground(row, 0, sheet.width, self.under)
        right = self._lettered(self.right)
        ending = sum(len(text) for text, _ in right)
        room = sheet.width - ending - 1 if 0 < ending < sheet.width else sheet.width
        last, place = sheet.height - 1, (0, Role.TEXT)
        for column, row, text, role in laid(self._lettered(self.pieces), sheet.width):
            if row > last or (row == last and column + len(text.rstrip()) > room):
                if row == last:
                    sheet.text(column, row, text[: max(room - column, 0)], role)
                    place = (room, role)
                sheet.text(max(min(place[0], room - len(CUT)), 0), last, CUT, place[1])
                break
            sheet.text(column, row, text, role)
            place = (column + len(text.rstrip()), role)
        if ending < sheet.width:
            start = sheet.width - ending
            for text, role in right:
                start += sheet.text(start, last, text, role)


CUT = "..."


def laid(pieces: Iterable[Piece], width: int) -> list[tuple[int, int, str, Role]]:
    """Return pieces of text set one behind the other in lines of a width: column, row, words, role of each part."""
    placed: list[tuple[int, int, str, Role]] = []
    column = row = 0
    for text, role in pieces:
        for index, part in enumerate(wrapped(text, width - column, width)):
            column, row = (0, row + 1) if index else (column, row)
            placed.append((column, row, part, role))
            column += len(part)
    while placed and not placed[-1][2].strip():
        placed.pop()
    return placed


class KeyLine(CellWidget):
    """Keys and what they do, in one line; a pair that does not fit whole is left out with all after it."""

    pairs: tuple[tuple[str, str], ...] = ()

    def show(self, *pairs: tuple[str, str]) -> None:
        """Set the pairs of key and name."""
        if pairs != self.pairs:
            self.pairs = pairs
            self.redraw()

    def draw(self, sheet: Raster) -> None:
        """Write the pairs."""
        column = 0
        for shown, name in ((self.letters(key), name) for key, name in self.pairs):
            if column + len(shown) + 1 + len(name) > sheet.width:
                return
            column += sheet.text(column, 0, shown, Role.STRONG) + 1
            column += sheet.text(column, 0, name, Role.DIM) + 2


def wrapped(text: str, room: int, width: int) -> list[str]:
    """Return the text cut at blanks: a first part for the room that is left, further ones for whole lines."""
    parts = []
    while len(text) > room and width > 0:
        split = text.rfind(" ", 0, room + 1)
        if split < 0 and room == width:  # one word longer than a line
            parts.append(text[:width])
            text = text[width:]
            continue
        parts.append(text[: max(split, 0)])
        text, room = text[split + 1 :], width
    return [*parts, text]
