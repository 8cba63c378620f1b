"""The numbers that matter, three rows high, each with its name and unit beside it."""

from dataclasses import dataclass
from functools import lru_cache

from eastfall.tui.raster import Raster
from eastfall.tui.roles import Role
from eastfall.tui.widgets.cells import CellWidget

# Five dots high, two or three wide; drawn for this program, squarish so that 6, 8 and 0 differ on a wet screen.
_DOTS = {
    "0": ("###", "#.#", "#.#", "#.#", "###"),
    "1": (".#.", "##.", ".#.", ".#.", "###"),
    "2": ("###", "..#", "###", "#..", "###"),
    "3": ("###", "..#", ".##", "..#", "###"),
    "4": ("#.#", "#.#", "###", "..#", "..#"),
    "5": ("###", "#..", "###", "..#", "###"),
    "6": ("###", "#..", "###", "#.#", "###"),
    "7": ("###", "..#", ".#.", ".#.", ".#."),
    "8": ("###", "#.#", "###", "#.#", "###"),
    "9": ("###", "#.#", "###", "..#", "###"),
    ".": (".", ".", ".", ".", "#"),
    "-": ("..", "..", "##", "..", ".."),
    "+": ("...", ".#.", "###", ".#.", "..."),
    "–": ("...", "...", "###", "...", "..."),
    "°": ("###", "#.#", "###", "...", "..."),
    ":": (".", "#", ".", "#", "."),
    " ": (".", ".", ".", ".", "."),
    "N": ("#..#", "##.#", "#.##", "#..#", "#..#"),
    "E": ("###", "#..", "##.", "#..", "###"),
    "S": (".###", "#...", ".##.", "...#", "###."),
    "W": ("#...#", "#...#", "#.#.#", "##.##", "#...#"),
}
_BLOCKS = " ▀▄█"


@dataclass(frozen=True, slots=True, kw_only=True)
class Figure:
    """One number: its name, its text, its unit, and a second line in small print."""

    name: str
    value: str
    unit: str
    note: str = ""
    role: Role = Role.STRONG


def dots_of(value: str) -> tuple[str, ...]:
    """Return a number as five rows of dots, # and ., a column of blanks after each sign."""
    return tuple("".join(_DOTS.get(one, (".",) * 5)[row] + "." for one in value) for row in range(5))


@lru_cache(maxsize=512)
def large(value: str) -> tuple[str, str, str]:
    """Return a number as three rows of half blocks; a sign without a drawing is left out."""
    rows = ["", "", ""]
    for one in value:
        dots = (*_DOTS.get(one, (" ",) * 5), "." * len(_DOTS.get(one, (" ",))[0]))
        for row in range(3):
            pairs = zip(dots[2 * row], dots[2 * row + 1], strict=True)
            rows[row] += "".join(_BLOCKS[(up == "#") + 2 * (low == "#")] for up, low in pairs) + " "
    return rows[0], rows[1], rows[2]


class Figures(CellWidget):
    """Figures side by side; those that do not fit are left out from the right."""

    figures: tuple[Figure, ...] = ()

    def show(self, *figures: Figure) -> None:
        """Draw other figures."""
        if figures != self.figures:
            self.figures = figures
            self.redraw()

    def draw(self, sheet: Raster) -> None:
        """Write every figure with its name, unit and note: beside large ones, about those in plain letters."""
        column = 0
        for one in self.figures:
            parts = self._plain(one) if sheet.glyphs.name == "ascii" else self._large(one)
            width = max(at + len(words) for at, _, words, _ in parts)
            if column + width > sheet.width:
                break
            for at, row, words, role in parts:
                sheet.text(column + at, row, words, role)
            column += width + 2

    @staticmethod
    def _large(one: Figure) -> list[tuple[int, int, str, Role]]:
        """Return column, row, words and role of the parts of a figure three rows high."""
        rows = large(one.value)
        width = max(map(len, rows))
        parts = [(0, row, words, one.role) for row, words in enumerate(rows)]
        beside = ((one.name, Role.DIM), (one.unit, Role.STRONG), (one.note, Role.TEXT))
        return [*parts, *((width, row, words, role) for row, (words, role) in enumerate(beside))]

    def _plain(self, one: Figure) -> list[tuple[int, int, str, Role]]:
        """Return the same for one in plain letters: its name above, its note below."""
        value = self.letters(one.value)
        return [
            (0, 0, one.name, Role.DIM),
            (0, 1, value, one.role),
            (len(value) + 1, 1, self.letters(one.unit), Role.STRONG),
            (0, 2, one.note, Role.TEXT),
        ]
