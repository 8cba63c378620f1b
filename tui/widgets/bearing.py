"""The steering line for reading across the collar: an arrow, the distance and the direction as large as they fit."""

from math import cos, sin

import numpy as np

from eastfall.tui.raster import Plane, Raster
from eastfall.tui.roles import Role
from eastfall.tui.steering import Steer
from eastfall.tui.strokes import ring
from eastfall.tui.widgets.cells import CellWidget
from eastfall.tui.widgets.figures import dots_of, large
from eastfall.tui.widgets.line import wrapped

_ROLES = {
    "OVER": Role.ACTION,
    "UNDECIDED": Role.WARNING,
    "WITHIN": Role.OK,
    "WITHIN, PAST WARNING": Role.WARNING,
}
_SHAFT, _NECK, _HEAD = 0.13, 0.15, 0.5
"""Of the arrow, in half-lengths: half width of its shaft, where its head begins, half width of the head."""


def arrow(size: tuple[int, int], squash: float, angle: float) -> Plane:
    """Return an arrow in a plane of rows and columns of dots, clockwise from upward [rad].

    Parameters
    ----------
    size : tuple of int
        Rows and columns.
    squash : float
        Height of a dot over its width.
    angle : float
        [rad].
    """
    rows, columns = size
    half = 0.92 * min(rows * squash, columns) / 2.0
    x = (np.arange(columns) + 0.5 - columns / 2.0)[None, :] / half
    y = (rows / 2.0 - np.arange(rows) - 0.5)[:, None] * squash / half
    along = x * sin(angle) + y * cos(angle)
    off = np.abs(x * cos(angle) - y * sin(angle))
    shaft = (off <= _SHAFT) & (along >= -1.0) & (along <= _NECK)
    head = (along > _NECK) & (off <= _HEAD * (1.0 - along) / (1.0 - _NECK))
    found: Plane = shaft | head
    return found


def enlarged(words: str, size: int) -> list[str]:
    """Return large figures as rows of text: 3 rows high at size 0, 5 rows a size from 1 on."""
    if size == 0:
        return list(large(words))
    rows = []
    for row in dots_of(words):
        line = "".join(("█" if dot == "#" else " ") * (2 * size) for dot in row)
        rows += [line] * size
    return rows


def fitting(words: str, width: int, height: int, least: int = 0) -> list[str]:
    """Return large figures as large as a place allows, `least` size at least; where none fit, the words as they are."""
    for size in range(height // 5, least - 1, -1):
        rows = enlarged(words, size)
        if len(rows) <= height and max(map(len, rows), default=0) <= width:
            return rows
    return [words]


class BearingView(CellWidget):
    """The arrow at the left; distance, direction and verdict at the right."""

    steer: Steer = Steer()
    aspect: float = 2.0

    def show(self, steer: Steer) -> None:
        """Draw another one."""
        if steer != self.steer:
            self.steer = steer
            self.redraw()

    def draw(self, sheet: Raster) -> None:
        """Put arrow and figures on the sheet; without a number only the sentence."""
        told = self.steer
        foot = wrapped(self.letters(told.line), sheet.width, sheet.width)[: min(3, sheet.height)]
        room = sheet.height - len(foot) - 1
        for row, words in enumerate(foot):
            sheet.text(0, sheet.height - len(foot) + row, words, Role.STRONG)
        if not told.distance or room < 3:
            return
        role = _ROLES.get(told.verdict, Role.STRONG)
        left = min(int(room * self.aspect), sheet.width * 2 // 5)
        self._compass(sheet, left, room, role)
        self._figures(sheet, left + 2, room, role)

    def _compass(self, sheet: Raster, width: int, height: int, role: Role) -> None:
        across, down = sheet.glyphs.across, sheet.glyphs.down
        squash = self.aspect * across / down
        plane = np.zeros((height * down, width * across), dtype=np.bool_)
        half = 0.98 * min(plane.shape[0] * squash, plane.shape[1]) / 2.0
        ring(plane, (plane.shape[1] / 2.0, plane.shape[0] / 2.0), (half, half / squash), gaps=24)
        sheet.stamp(plane, Role.DIM)
        if self.steer.angle is not None:
            sheet.stamp(arrow((plane.shape[0], plane.shape[1]), squash, self.steer.angle), role)
        else:
            words = "LEAVE IT" if self.steer.verdict == "WITHIN" else "DO NOT MOVE"
            sheet.text(max(0, (width - len(words)) // 2), height // 2, words, role)
        sheet.text(width // 2, 0, "N", Role.STRONG)

    def _figures(self, sheet: Raster, column: int, room: int, role: Role) -> None:
        told, width = self.steer, sheet.width - column
        sheet.text(column, 0, f"{told.verdict}   {told.distance} {told.unit}", role)
        way = f"{told.wind} {told.bearing}".strip()
        plain = sheet.glyphs.name == "ascii"
        lower = fitting(way, width, (room - 2) * 2 // 5, int(plain)) if way else []
        upper = fitting(told.distance, width, room - 2 - len(lower), int(plain))
        solid = "#" if plain else "█"
        for row, words in enumerate([*upper, "", *lower]):
            sheet.text(column, 1 + row, words.replace("█", solid), role if row < len(upper) else Role.STRONG)
