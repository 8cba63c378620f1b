"""From values to dots: ranges that do not jitter, round ticks, and the labels beside them; knows no screen."""

from dataclasses import dataclass
from math import ceil, floor, isfinite, log10

import numpy as np
from numpy.typing import ArrayLike, NDArray

_STEPS = (1.0, 2.0, 5.0, 10.0)


def round_step(span: float, most: int) -> float:
    """Return the smallest 1-2-5 step that cuts `span` into at most `most` parts."""
    least = span / max(1, most)
    if not (isfinite(least) and least > 0.0):
        return 1.0
    decade = 10.0 ** floor(log10(least))
    return next(step * decade for step in _STEPS if step * decade >= least * (1.0 - 1e-9))


@dataclass(frozen=True, slots=True, kw_only=True)
class Axis:
    """A stretch of values laid over dots.

    Parameters
    ----------
    low, high : float
        Values at the first and past the last dot.
    dots : int
        Number of dots between.
    """

    low: float
    high: float
    dots: int

    def dot(self, values: ArrayLike) -> NDArray[np.float64]:
        """Return the position in dots; outside values lie outside 0 to `dots`."""
        return (np.asarray(values, dtype=float) - self.low) * (self.dots / (self.high - self.low))

    def ticks(self, most: int, size: float = 1.0) -> list[float]:
        """Return values round in a unit of a size, at most `most` + 1 of them, zero among them when it is inside."""
        step = round_step((self.high - self.low) / size, most) * size
        first, last = ceil(self.low / step - 1e-9), floor(self.high / step + 1e-9)
        return [index * step for index in range(first, last + 1)]


def symmetric(values: ArrayLike, least: float) -> tuple[float, float]:
    """Return bounds about zero that hold all finite values with room to spare, rounded so that they seldom move.

    Parameters
    ----------
    values : array_like
        NaN and infinite ones do not count.
    least : float
        Half-range that is kept at least.
    """
    finite = np.asarray(values, dtype=float)
    finite = finite[np.isfinite(finite)]
    reach = max(least, float(np.abs(finite).max()) if finite.size else 0.0) * 1.05
    step = round_step(reach, 5) if reach > 0.0 else 1.0
    half = step * ceil(reach / step - 1e-9)
    return -half, half


def around(values: ArrayLike, least: float) -> tuple[float, float]:
    """Return rounded bounds that hold all finite values and zero, at least `least` to each side of their middle."""
    finite = np.asarray(values, dtype=float)
    finite = finite[np.isfinite(finite)]
    low = min(0.0, float(finite.min())) if finite.size else 0.0
    high = max(0.0, float(finite.max())) if finite.size else 0.0
    middle, half = (low + high) / 2.0, max((high - low) / 2.0 * 1.05, least)
    step = round_step(2.0 * half, 8)
    return step * floor((middle - half) / step + 1e-9), step * ceil((middle + half) / step - 1e-9)


def label(value: float, step: float, *, signed: bool) -> str:
    """Return a tick's text with the digits that the step needs; `signed` writes + before positive ones."""
    places = max(0, -floor(log10(step) + 1e-9)) if step > 0.0 else 0
    shown = 0.0 if abs(value) < step * 1e-6 else value
    return f"{shown:+.{places}f}" if signed and shown else f"{shown:.{places}f}"
