"""A sheet of character cells that planes of dots and then texts are put on; knows no screen.

A plane is a boolean array of dots, row 0 at the top; `strokes` draws curves on it, `glyphs` says how it looks.
"""

import unicodedata
from collections.abc import Callable, Hashable
from dataclasses import dataclass
from functools import lru_cache
from typing import Any, Self

import numpy as np
from numpy.typing import NDArray

from eastfall.tui.glyphs import ASCII_OF_ROLE, BLANK, Glyphs
from eastfall.tui.letters import in_ascii
from eastfall.tui.roles import Role

Floats = NDArray[np.float64]
Plane = NDArray[np.bool_]
Packed = NDArray[np.uint16]

FILLER = 0xE000
"""Second column of a wide letter; left out when the row becomes text."""
_UNPRINTABLE = ord("·")
_LAST_ASCII = 126


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class Cells:
    """A finished picture: code points, style of the glyph and style of the ground, each of shape (height, width)."""

    chars: NDArray[np.int32]
    ink: NDArray[np.uint8]
    ground: NDArray[np.uint8]

    @classmethod
    def blank(cls, width: int, height: int) -> Self:
        """Return an empty picture."""
        return cls(
            chars=np.full((height, width), BLANK, dtype=np.int32),
            ink=np.zeros((height, width), dtype=np.uint8),
            ground=np.zeros((height, width), dtype=np.uint8),
        )

    def rows_that_differ(self, other: "Cells") -> NDArray[np.intp]:
        """Return the rows in which two pictures of one size differ."""
        same = (self.chars == other.chars) & (self.ink == other.ink) & (self.ground == other.ground)
        return np.flatnonzero(~same.all(axis=1))

    def lines(self) -> list[str]:
        """Return the characters as text, one string a row."""
        return ["".join(map(chr, row)).replace(chr(FILLER), "") for row in self.chars]


@lru_cache(maxsize=4096)
def columns(words: str) -> NDArray[np.int32]:
    """Return one code point a column: a wide letter takes two, what has no width or is a control is made plain."""
    if words.isascii() and words.isprintable():
        return np.frombuffer(words.encode(), dtype=np.uint8).astype(np.int32)
    codes: list[int] = []
    for one in words:
        if unicodedata.category(one) in {"Mn", "Me"}:
            continue
        codes.append(ord(one) if one.isprintable() else _UNPRINTABLE)
        if unicodedata.east_asian_width(one) in "WF":
            codes.append(FILLER)
    return np.array(codes, dtype=np.int32)


class Raster:
    """A sheet of cells that planes of dots and then texts are put on.

    Parameters
    ----------
    width, height : int
        Size in cells.
    glyphs : Glyphs
        How dots become characters.
    """

    def __init__(self, width: int, height: int, glyphs: Glyphs) -> None:
        self.width, self.height, self.glyphs = width, height, glyphs
        self._bits = np.zeros((height, width), dtype=np.uint16)
        self._letters = np.zeros((height, width), dtype=np.int32)
        self._cells = Cells.blank(width, height)

    def plane(self) -> Plane:
        """Return an empty plane of this sheet's dots."""
        return np.zeros((self.height * self.glyphs.down, self.width * self.glyphs.across), dtype=np.bool_)

    def stamp(self, plane: Plane, role: Role, column: int = 0, row: int = 0) -> None:
        """Add a plane's dots: none that stand already vanish, the style of a shared cell is the later one's.

        Parameters
        ----------
        plane : ndarray of bool
            As many dots as some whole cells have, and no larger than what is left of the sheet.
        role : Role
            How its cells are drawn.
        column, row : int
            The cell of its upper left corner.
        """
        self.put(self.packed(plane), role, column, row)

    def packed(self, plane: Plane) -> Packed:
        """Return a plane as one number a cell, ready to be put."""
        dots = plane.view(np.uint8)
        down, across = self.glyphs.down, self.glyphs.across
        packed = np.zeros((plane.shape[0] // down, plane.shape[1] // across), dtype=np.uint8)
        for row in range(down):
            for column in range(across):
                packed |= dots[row::down, column::across] * self.glyphs.weights[row, column]
        return packed.astype(np.uint16)

    def put(self, packed: Packed, role: Role, column: int = 0, row: int = 0) -> None:
        """Add a packed plane, as `stamp` does."""
        hit = packed > 0
        part = (slice(row, row + packed.shape[0]), slice(column, column + packed.shape[1]))
        self._bits[part] |= packed
        np.copyto(self._cells.ink[part], int(role), where=hit)
        if self.glyphs.name == "ascii":
            np.copyto(self._letters[part], ord(ASCII_OF_ROLE.get(role, "#")), where=hit)

    def text(self, column: int, row: int, words: str, role: Role) -> int:
        """Write over whatever is there, leave out what falls outside, and return how many columns the words take."""
        plain = self.glyphs.name == "ascii"
        codes = columns(in_ascii(words) if plain else words)
        if plain and codes.size and codes.max() > _LAST_ASCII:
            codes = np.where(codes > _LAST_ASCII, ord("?"), codes).astype(np.int32)
        start, stop = max(column, 0), min(column + len(codes), self.width)
        if start < stop and 0 <= row < self.height:
            self._letters[row, start:stop] = codes[start - column : stop - column]
            self._cells.ink[row, start:stop] = role
        return len(codes)

    def ground(self, row: int, start: int, stop: int, role: Role) -> None:
        """Colour the ground of part of a row."""
        if 0 <= row < self.height:
            self._cells.ground[row, max(start, 0) : max(stop, 0)] = role

    def cells(self) -> Cells:
        """Return the finished picture."""
        glyphs = self.glyphs.table[self._bits]
        chars = np.where(self._letters > 0, self._letters, glyphs).astype(np.int32)
        return Cells(chars=chars, ink=self._cells.ink, ground=self._cells.ground)


class Kept:
    """What seldom changes from one picture to the next, kept by what it was made from.

    Parameters
    ----------
    most : int
        How many things; beyond that the older half is forgotten.
    """

    def __init__(self, most: int = 64) -> None:
        self._most = most
        self._made: dict[Hashable, Any] = {}

    def packed(self, key: Hashable, draw: Callable[[], Packed]) -> Packed:
        """Return the packed plane that belongs to a key, drawn when it is not kept."""
        found: Packed = self.made(key, draw)
        return found

    def made(self, key: Hashable, make: Callable[[], Any]) -> Any:
        """Return what belongs to a key, made when it is not kept."""
        found = self._made.get(key)
        if found is None:
            if len(self._made) >= self._most:
                for old in list(self._made)[: self._most // 2]:
                    del self._made[old]
            found = self._made[key] = make()
        return found
