"""Dots into character cells: numpy planes of dots, packed to braille, half-block or ASCII glyphs; knows no screen.

A plane is a boolean array of dots, row 0 at the top. Curves come in dot coordinates as floats; NaN breaks them.
"""

import unicodedata
from collections.abc import Callable, Hashable
from dataclasses import dataclass
from functools import lru_cache
from typing import Literal, Self

import numpy as np
from numpy.typing import ArrayLike, NDArray

from eastfall.tui.roles import Role

Floats = NDArray[np.float64]
Plane = NDArray[np.bool_]
Packed = NDArray[np.uint16]

_BLANK = ord(" ")
_BRAILLE_WEIGHTS = np.array([[1, 8], [2, 16], [4, 32], [64, 128]], dtype=np.uint16)
_HALF_WEIGHTS = np.array([[1], [2]], dtype=np.uint16)
_LONE_WEIGHTS = np.array([[1]], dtype=np.uint16)
_BRAILLE_TABLE = np.arange(0x2800, 0x2900, dtype=np.int32)
_BRAILLE_TABLE[0] = _BLANK
_HALF_TABLE = np.array([ord(c) for c in " ▀▄█"], dtype=np.int32)
_ASCII_OF_ROLE = {
    Role.MEASURED: "#",
    Role.PAST: "-",
    Role.EXPECTED: ":",
    Role.BAND: ".",
    Role.WARNING: "'",
    Role.ACTION: "|",
    Role.WALL: "%",
    Role.BOB: "b",
    Role.FALL: "d",
    Role.DIM: ".",
}
_IN_ASCII = str.maketrans(
    {"±": "+-", "°": " deg", "–": "-", "↑": "up", "↓": "down", "←": "left", "→": "right", "²": "2", "³": "3"}
)
FILLER = 0xE000
"""Second column of a wide letter; left out when the row becomes text."""
_UNPRINTABLE = ord("·")
_FAR = 1e7  # dots; coordinates are cut here before they become integers, far outside any screen


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class Glyphs:
    """One way to show dots with characters."""

    name: Literal["braille", "half", "ascii"]
    across: int
    down: int
    weights: NDArray[np.uint16]
    table: NDArray[np.int32]
    measured: str
    expected: str
    here: str
    rule: str
    bar: str
    """Marks for single points, the depth in view, and the rules between parts."""
    samples: tuple[str, str, str, str, str]
    """What a solid, a dashed, a dotted, a broken and a heavy line look like, for legends."""


BRAILLE = Glyphs(
    name="braille",
    across=2,
    down=4,
    weights=_BRAILLE_WEIGHTS,
    table=_BRAILLE_TABLE,
    measured="●",
    expected="○",
    here="▶",
    rule="─",
    bar="│",
    samples=("─", "╌", "┈", "╎", "┃"),
)
HALF = Glyphs(
    name="half",
    across=1,
    down=2,
    weights=_HALF_WEIGHTS,
    table=_HALF_TABLE,
    measured="@",
    expected="o",
    here=">",
    rule="─",
    bar="│",
    samples=("─", "╌", "┈", "╎", "┃"),
)
ASCII = Glyphs(
    name="ascii",
    across=1,
    down=1,
    weights=_LONE_WEIGHTS,
    table=np.array([_BLANK, ord("#")], dtype=np.int32),
    measured="@",
    expected="o",
    here=">",
    rule="-",
    bar="|",
    samples=("#", ":", ".", "'", "|"),
)
GLYPHS: dict[str, Glyphs] = {one.name: one for one in (BRAILLE, HALF, ASCII)}


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
            chars=np.full((height, width), _BLANK, dtype=np.int32),
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
        down, across = self.glyphs.down, self.glyphs.across
        blocks = plane.reshape(plane.shape[0] // down, down, plane.shape[1] // across, across)
        return np.einsum("ijkl,jl->ik", blocks, self.glyphs.weights, dtype=np.uint16, casting="unsafe")

    def put(self, packed: Packed, role: Role, column: int = 0, row: int = 0) -> None:
        """Add a packed plane, as `stamp` does."""
        hit = packed > 0
        part = (slice(row, row + packed.shape[0]), slice(column, column + packed.shape[1]))
        self._bits[part] |= packed
        self._cells.ink[part][hit] = role
        if self.glyphs.name == "ascii":
            self._letters[part][hit] = ord(_ASCII_OF_ROLE.get(role, "#"))

    def tint(self, plane: Plane, role: Role) -> None:
        """Colour the ground of every cell in which the plane has a dot."""
        blocks = plane.reshape(self.height, self.glyphs.down, self.width, self.glyphs.across)
        self._cells.ground[blocks.any(axis=(1, 3))] = role

    def text(self, column: int, row: int, words: str, role: Role) -> int:
        """Write over whatever is there, leave out what falls outside, and return how many columns the words take."""
        codes = columns(words.translate(_IN_ASCII) if self.glyphs.name == "ascii" else words)
        shown = codes[max(0, -column) : max(0, self.width - column)]
        if 0 <= row < self.height and len(shown):
            start = max(column, 0)
            self._letters[row, start : start + len(shown)] = shown
            self._cells.ink[row, start : start + len(shown)] = role
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


def _clip(start: Floats, stop: Floats, high: float) -> tuple[Floats, Floats]:
    """Return the entering and leaving parameter of segments against 0 <= value <= high (Liang and Barsky 1984)."""
    step = stop - start
    with np.errstate(divide="ignore", invalid="ignore"):
        first, second = -start / step, (high - start) / step
    level = step == 0.0
    outside = level & ((start < 0.0) | (start > high))
    enter = np.where(level, 0.0, np.minimum(first, second))
    leave = np.where(level, 1.0, np.maximum(first, second))
    return np.where(outside, 2.0, enter), np.where(outside, -1.0, leave)


def segments(plane: Plane, x0: ArrayLike, y0: ArrayLike, x1: ArrayLike, y1: ArrayLike) -> None:
    """Draw straight lines, given in dots; one with a NaN or infinite end is left out, the rest is clipped.

    Parameters
    ----------
    plane : ndarray of bool, shape (rows, columns)
        Drawn on in place.
    x0, y0, x1, y1 : array_like, shape (n,)
        Ends: column and row, in dots; a dot with index i covers i to i + 1.
    """
    ends = np.array([x0, y0, x1, y1], dtype=float).reshape(4, -1)
    if not ends.size or not plane.size:
        return
    rows, columns = plane.shape
    ends = np.clip(ends[:, np.isfinite(ends).all(axis=0)], -_FAR, _FAR)
    if not ends.size:
        return
    least, most = ends.min(axis=1), ends.max(axis=1)
    if (least >= 0.0).all() and max(most[0], most[2]) < columns and max(most[1], most[3]) < rows:
        _walk(plane, ends[:2], ends[2:] - ends[:2])
        return
    enter_x, leave_x = _clip(ends[0], ends[2], columns - 1e-6)
    enter_y, leave_y = _clip(ends[1], ends[3], rows - 1e-6)
    enter = np.maximum(0.0, np.maximum(enter_x, enter_y))
    leave = np.minimum(1.0, np.minimum(leave_x, leave_y))
    seen = enter <= leave
    start, step = ends[:2, seen], ends[2:, seen] - ends[:2, seen]
    _walk(plane, start + enter[seen] * step, (leave - enter)[seen] * step)


def _walk(plane: Plane, start: Floats, step: Floats) -> None:
    """Set the dots along segments inside the plane, from `start` by `step` (column, row): one a dot, lengthwise."""
    if not start.size:
        return
    count = np.abs(step).max(axis=0).astype(np.intp) + 2
    index = np.repeat(np.arange(count.size), count)
    along = np.arange(index.size) - np.repeat(np.cumsum(count) - count, count)
    part = along / (count - 1)[index]
    column, row = (start[:, index] + part * step[:, index]).astype(np.intp)
    # Rounding may carry a clipped end a hair over the edge.
    np.clip(row, 0, plane.shape[0] - 1, out=row)
    np.clip(column, 0, plane.shape[1] - 1, out=column)
    plane[row, column] = True


def polyline(plane: Plane, x: ArrayLike, y: ArrayLike) -> None:
    """Draw a line through points, shape (n,), in dots; a NaN breaks it, a lone point is a dot."""
    across, along = np.atleast_1d(np.asarray(x, dtype=float)), np.atleast_1d(np.asarray(y, dtype=float))
    segments(plane, across[:-1], along[:-1], across[1:], along[1:])
    known = np.isfinite(across) & np.isfinite(along)
    if across.size > 1 and known.all():
        return
    alone = known.copy()
    alone[1:] &= ~known[:-1]
    alone[:-1] &= ~known[1:]
    segments(plane, across[alone], along[alone], across[alone], along[alone])


@dataclass(frozen=True, slots=True, eq=False)
class Runs:
    """Neighbouring points that share one dot along the main axis, so that many points cost one mark a dot.

    Parameters
    ----------
    starts : ndarray of int, shape (m,)
        Where each run begins.
    length : int
        Number of points.
    """

    starts: NDArray[np.intp]
    length: int

    @classmethod
    def of(cls, along: Floats, breaks: NDArray[np.intp] | None = None) -> "Runs":
        """Group points by the dot that `along` (in dots, shape (n,)) falls in; NaN forms runs of its own."""
        n = along.shape[0]
        if not n:
            return cls(np.empty(0, dtype=np.intp), 0)
        with np.errstate(invalid="ignore"):
            dots = np.where(np.isfinite(along), np.clip(np.floor(along), -_FAR, _FAR), -2 * _FAR)
        edges = np.flatnonzero(np.diff(dots)) + 1
        if breaks is not None and breaks.size:
            edges = np.union1d(edges, breaks)
        return cls(np.concatenate([np.zeros(1, dtype=np.intp), edges]), n)

    def first(self, values: Floats) -> Floats:
        """Return the first value of each run."""
        return values[self.starts]

    def last(self, values: Floats) -> Floats:
        """Return the last value of each run."""
        if not self.length:
            return values[:0]
        return np.concatenate([values[self.starts[1:] - 1], values[-1:]])

    def span(self, values: Floats) -> tuple[Floats, Floats]:
        """Return the smallest and largest value of each run; NaN samples are left out, all NaN gives NaN."""
        if not self.length:
            return values[:0], values[:0]
        return np.fmin.reduceat(values, self.starts), np.fmax.reduceat(values, self.starts)


def trace(plane: Plane, runs: Runs, along: Floats, across: Floats, *, upright: bool) -> None:
    """Draw many points as first, smallest, largest and last of each run, so that no spike is lost.

    Parameters
    ----------
    plane : ndarray of bool
        Drawn on in place.
    runs : Runs
        The grouping of `along`.
    along, across : ndarray, shape (n,)
        Position along the main axis and across it, in dots; NaN breaks the curve.
    upright : bool
        True when the main axis runs down the plane, False when it runs to the right.
    """
    if not runs.length:
        return
    low, high = runs.span(across)
    first, last = runs.first(across), runs.last(across)
    place = runs.first(along)
    broken = np.isnan(first[1:]) | np.isnan(last[:-1])
    joint = np.where(broken, np.nan, last[:-1])
    near = np.concatenate([low, joint])
    far = np.concatenate([high, first[1:]])
    start, stop = np.concatenate([place, place[:-1]]), np.concatenate([place, place[1:]])
    if upright:
        segments(plane, near, start, far, stop)
    else:
        segments(plane, start, near, stop, far)


def rhythm(plane: Plane, on: int, off: int, *, upright: bool) -> Plane:
    """Return the plane with a dash of `on` dots and a gap of `off` dots along the main axis, fixed to the sheet."""
    length = plane.shape[0] if upright else plane.shape[1]
    keep = np.arange(length) % (on + off) < on
    return plane & (keep[:, None] if upright else keep[None, :])


def ring(plane: Plane, centre: tuple[float, float], radius: tuple[float, float], *, gaps: int = 0) -> None:
    """Draw an ellipse with axes along the sheet, in dots; `gaps` > 0 leaves that many gaps as long as the dashes."""
    x, y = _circle(radius, gaps)
    polyline(plane, centre[0] + radius[0] * x, centre[1] + radius[1] * y)


def _circle(radius: tuple[float, float], gaps: int) -> tuple[Floats, Floats]:
    """Return points of the unit circle, closed, NaN in the gaps."""
    count = int(np.clip(max(radius) * 3.0, 24, 720))
    turn = np.linspace(0.0, 2.0 * np.pi, count + 1)
    x, y = np.cos(turn), np.sin(turn)
    if gaps:
        x = np.where((turn * gaps / (2.0 * np.pi)) % 1.0 < 0.5, x, np.nan)
    return x, y


class Kept:
    """Packed planes that seldom change, kept by what they were drawn from.

    Parameters
    ----------
    most : int
        How many; beyond that all are forgotten.
    """

    def __init__(self, most: int = 48) -> None:
        self._most = most
        self._packed: dict[Hashable, Packed] = {}

    def packed(self, key: Hashable, draw: Callable[[], Packed]) -> Packed:
        """Return what belongs to a key, drawn when it is not kept."""
        found = self._packed.get(key)
        if found is None:
            if len(self._packed) >= self._most:
                self._packed.clear()
            found = self._packed[key] = draw()
        return found
