"""Curves into planes of dots: clipped lines, many points as one mark a dot, dashes, rings; knows no screen.

A plane is a boolean array of dots, row 0 at the top. Curves come in dot coordinates as floats; NaN breaks them.
"""

from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike, NDArray

from eastfall.tui.raster import Floats, Plane

_FAR = 1e7  # dots; coordinates are cut here before they become integers, far outside any screen


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
