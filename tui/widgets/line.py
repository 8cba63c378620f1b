"""One line of plain text that paints itself only when its words or its part change."""

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

    def draw(self, sheet: Raster) -> None:
        """Write the pieces."""
        if self.under is not None:
            for row in range(sheet.height):
                sheet.ground(row, 0, sheet.width, self.under)
        ending = sum(len(text) for text, _ in self.right)
        room = sheet.width - ending - 1 if 0 < ending < sheet.width else sheet.width
        column = row = 0
        for text, role in self.pieces:
            if ending:
                column += sheet.text(column, 0, text[: max(room - column, 0)], role)
                continue
            for index, part in enumerate(wrapped(text, room - column, sheet.width)):
                column, row = (0, row + 1) if index else (column, row)
                column += sheet.text(column, row, part, role)
        if ending < sheet.width:
            start = sheet.width - ending
            for text, role in self.right:
                start += sheet.text(start, 0, text, role)


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
        for shown, name in self.pairs:
            if column + len(shown) + 1 + len(name) > sheet.width:
                return
            column += sheet.text(column, 0, shown, Role.STRONG) + 1
            column += sheet.text(column, 0, name, Role.DIM) + 2


def wrapped(text: str, room: int, width: int) -> list[str]:
    """Return the text cut at blanks: a first part for the room that is left, further ones for whole lines."""
    parts = []
    while len(text) > room:
        split = text.rfind(" ", 0, room + 1)
        if split < 0 and room == width:
            break  # one word longer than a line: the sheet cuts it off
        parts.append(text[: max(split, 0)])
        text, room = text[split + 1 :], width
    return [*parts, text]
