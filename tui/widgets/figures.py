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
        """Write every figure with its name above its unit at its right."""
        column = 0
        for one in self.figures:
            rows = (
                large(one.value)
                if sheet.glyphs.name != "ascii"
                else ("", one.value.removesuffix("°") + " ", "")
            )
            width = max(map(len, rows))
            beside = max(len(one.name), len(one.unit), len(one.note))
            if column + width + beside > sheet.width:
                break
            for row, words in enumerate(rows):
                sheet.text(column, row, words, one.role)
            for row, (words, role) in enumerate(
                ((one.name, Role.DIM), (one.unit, Role.STRONG), (one.note, Role.TEXT))
            ):
                sheet.text(column + width, row, words, role)
            column += width + beside + 2
