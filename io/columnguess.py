"""What a column of numbers may be, from how it behaves; the lines are cut into columns elsewhere."""

import re
from collections.abc import Sequence
from dataclasses import dataclass
from functools import partial
from itertools import pairwise

import numpy as np
from numpy.typing import NDArray

from eastfall.io.decoded import IGNORED, QUANTITIES

_NUMBER = re.compile(rb"[+-]?(?:\d++(?:\.\d*+)?|\.\d++)(?:[eE][+-]?\d++)?")
_NUMERIC = 0.9
"""Share of a column's fields that must be numbers."""
_EPOCH = 1e8
"""Seconds: a larger rising number counts from some calendar date."""
_SMOOTH = 0.08
"""Median step over the range, of a quantity that moves and does not merely flicker: noise has 0.2."""
_FEW = 1.6
"""The same, times the number of steps, where these are few: a steady walk has 1."""
_CLOCKLIKE = 0.01
"""Spread over size of the steps, below which a column may be a clock."""
_OTHER_CLOCK = 3.0
"""A column that runs faster or slower than the clock of this machine by this factor counts no seconds."""
_ABOVE_COLLAR = -5.0
"""Metres: what swings about zero goes farther to the other side than a depth goes above the collar."""

Column = NDArray[np.float64]


@dataclass(frozen=True, slots=True)
class Guess:
    """A name for a column, and why."""

    name: str
    why: str


@dataclass(frozen=True, slots=True)
class _Looks:
    """How one column behaves."""

    place: int
    values: Column
    """The numbers among its fields."""
    decimals: int
    empty: float
    """Share of empty fields."""
    words: float
    """Share of fields that are neither a number nor empty."""

    @property
    def numeric(self) -> bool:
        return self.values.size >= 2 and self.words <= 1.0 - _NUMERIC

    @property
    def span(self) -> float:
        return float(np.ptp(self.values))

    @property
    def size(self) -> float:
        return float(np.max(np.abs(self.values)))

    @property
    def steps(self) -> Column:
        return np.diff(self.values)

    @property
    def rises(self) -> bool:
        return bool(np.all(self.steps >= 0.0) and np.mean(self.steps > 0.0) >= _NUMERIC)

    @property
    def one_way(self) -> bool:
        return bool(np.all(self.steps >= 0.0) or np.all(self.steps <= 0.0))

    @property
    def unevenness(self) -> float:
        """Mean deviation of the steps from their median, over that; 0 for a clock."""
        middle = float(np.median(self.steps))
        return float(np.mean(np.abs(self.steps - middle))) / abs(middle) if middle else np.inf

    @property
    def smooth(self) -> bool:
        most = max(_SMOOTH, _FEW / max(self.steps.size, 1))
        return self.span == 0.0 or float(np.median(np.abs(self.steps))) <= most * self.span

    def inside(self, name: str) -> bool:
        """Whether the decoder would believe every value under this name."""
        one = QUANTITIES[name]
        believed = bool(np.all((self.values >= one.lowest) & (self.values <= one.highest)))
        return believed and (self.empty == 0.0 or not one.needed)


def numbers_in(rows: Sequence[Sequence[bytes]]) -> Column:
    """Return the numbers of rows of fields, shape (n, k), NaN where a field is none."""
    return np.array(
        [[float(one) if _NUMBER.fullmatch(one) else np.nan for one in row] for row in rows], dtype=float
    )


def guessed(table: Column, rows: Sequence[Sequence[bytes]], rate: float | None = None) -> list[Guess]:
    """Name the columns of a table.

    Parameters
    ----------
    table : ndarray, shape (n, k)
        Numbers; NaN where a field is none.
    rows : sequence of n rows of k fields
        The same as text.
    rate : float, optional
        Lines in a second, as they came.

    Returns
    -------
    list of Guess
        One for each column; no name but "-" comes twice.
    """
    left = [_looks(table, rows, place) for place in range(table.shape[1])]
    named = {one.place: Guess(IGNORED, "not a number") for one in left if not one.numeric}
    left = [one for one in left if one.numeric]
    for rule in (_face, partial(_time, rate=rate), _depth, _sideways, _azimuth, _temperature, _supply):
        named |= rule(left)
        left = [one for one in left if one.place not in named]
    named |= {one.place: Guess(IGNORED, "not recognised: name it if it is needed") for one in left}
    return [named[place] for place in range(table.shape[1])]


def _looks(table: Column, rows: Sequence[Sequence[bytes]], place: int) -> _Looks:
    fields = [row[place] for row in rows]
    column = table[:, place]
    values = column[np.isfinite(column)]
    empty = sum(not one for one in fields) / len(fields)
    decimals = max((len(one.partition(b".")[2]) for one in fields if _NUMBER.fullmatch(one)), default=0)
    return _Looks(place, values, decimals, empty, 1.0 - empty - values.size / len(fields))


Named = dict[int, Guess]


def _face(left: list[_Looks]) -> Named:
    for one in left:
        seen = set(one.values.tolist())
        if seen in ({0.0, 180.0}, {180.0}):
            return {one.place: Guess("face_deg", "only 0 and 180 stand there")}
    return {}


def _time(left: list[_Looks], rate: float | None) -> Named:
    """Take the column that rises most evenly, if another is left that may be the depth and it counts seconds."""
    rising = [one for one in left if one.rises and one.inside("time_s")]
    if not rising:
        return {}
    best = min(rising, key=lambda one: (one.size < _EPOCH, round(one.unevenness, 9), one.place))
    others = [one for one in left if one is not best and _may_be_depth(one)]
    a_second = float(np.mean(best.steps)) * rate if rate else 1.0
    if (others or best.size >= _EPOCH) and not 1.0 / _OTHER_CLOCK <= a_second <= _OTHER_CLOCK:
        return {
            best.place: Guess(IGNORED, f"rises by {a_second:.3g} a second: a counter, or no clock in seconds")
        }
    if best.size >= _EPOCH:
        return {best.place: Guess("time_s", "rises, counted from a calendar date")}
    if not others:
        return {}  # a run can do without a clock of the instrument's own, but not without depth
    step = float(np.median(best.steps))
    return {best.place: Guess("time_s", f"rises evenly, by {step:.4g} each line")}


def _may_be_depth(one: _Looks) -> bool:
    large = one.span >= 1.0 or (one.span == 0.0 and (one.size >= 1.0 or one.decimals > 0))
    return one.inside("depth_m") and one.smooth and large and one.values.min() >= _ABOVE_COLLAR


def _depth(left: list[_Looks]) -> Named:
    """Take the smooth column that goes farthest, or one that stands quite still ahead of all others."""
    able = [one for one in left if _may_be_depth(one)]
    first = [one for one in able if one.place == min(other.place for other in left)]
    standing = [one for one in first if one.span == 0.0 and one.decimals > 0]
    moving = [one for one in able if one.span >= 1.0]
    if moving:
        best = max(moving, key=lambda one: (one.one_way, one.span, -one.place))
        # A plumb line that swings at one depth moves smoothly too, but never as far as that depth.
        if not standing or best.span > standing[0].size > 0.0:
            doubt = "; or is it a clock?" if best.rises and best.unevenness < _CLOCKLIKE else ""
            return {best.place: Guess("depth_m", f"moves smoothly over {best.span:.4g}{doubt}")}
    for one in standing or [one for one in first if one.span == 0.0]:
        return {one.place: Guess("depth_m", "stands still ahead of the others: a probe at rest")}
    return {}


def _sideways(left: list[_Looks]) -> Named:
    """Take the first two neighbours that are written alike and differ little in size: tilts, or offsets."""
    able = [one for one in left if one.empty == 0.0 and one.span > 0.0]
    pairs = [(a, b) for a, b in pairwise(able) if b.place == a.place + 1 and _alike(a, b)]
    if not pairs:
        single = [one for one in able if one.size <= 45.0 and one.decimals >= 3]
        return {one.place: Guess("tilt_a_deg", "small and finely written") for one in single[:1]}
    a, b = max(pairs, key=lambda pair: (pair[0].decimals, -pair[0].place))
    together = "two alike side by side"
    if max(a.size, b.size) <= 45.0 and a.decimals >= 3:
        names, why = ("tilt_a_deg", "tilt_b_deg"), f"{together}, small and finely written"
    elif a.inside("east_mm") and b.inside("north_mm"):
        names, why = ("east_mm", "north_mm"), f"{together}, too large or too coarse for tilts in degrees"
    else:
        return {}
    return {one.place: Guess(name, why) for one, name in zip((a, b), names, strict=True)}


def _alike(a: _Looks, b: _Looks) -> bool:
    small, large = sorted((max(a.size, 1e-12), max(b.size, 1e-12)))
    return a.decimals == b.decimals and a.decimals > 0 and large <= 1000.0 * small


def _azimuth(left: list[_Looks]) -> Named:
    able = [one for one in left if one.inside("azimuth_deg") and one.size > 90.0 and one.span > 0.0]
    return {one.place: Guess("azimuth_deg", "an angle of up to 360") for one in able[:1]}


def _temperature(left: list[_Looks]) -> Named:
    able = [one for one in left if one.values.min() >= -60.0 and one.size <= 80.0 and one.decimals <= 2]
    return {one.place: Guess("temperature_c", "slow, with few decimals") for one in able[:1]}


def _supply(left: list[_Looks]) -> Named:
    able = [one for one in left if one.values.min() >= 2.0 and one.size <= 60.0 and one.decimals <= 2]
    return {one.place: Guess("supply_v", "positive and nearly constant") for one in able[:1]}
