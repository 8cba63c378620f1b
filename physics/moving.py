"""A line or probe that runs down a turning Earth: how fast it goes, and how far the felt vertical leans for it.

Turning tilts into offsets is `tilt`; deciding what stands still is the engine's business.
"""

from typing import Any

import numpy as np
import numpy.typing as npt

from eastfall.physics.binning import Bins, TimeBins
from eastfall.physics.earth import EARTH_ROTATION
from eastfall.physics.errors import ParameterError
from eastfall.physics.steps import steps_from

Array = npt.NDArray[np.float64]

KNOT = 0.2
"""Rows this close in time [s] share a knot."""
GROUP = 3
"""Knots in each of the three groups of a full estimate."""
LONGEST_GAP = 10.0
"""A pause longer than this [s] starts the estimate afresh, unless told otherwise: nothing is known of the speed
inside it."""
_MEMORY = 3 * GROUP - 1
_CHUNK = 16384  # rows handled at a time, so that the work stays in the cache


def lean(speed: npt.ArrayLike, latitude: npt.ArrayLike, gravity: npt.ArrayLike) -> Array:
    """Angle by which the felt vertical leans east in a frame that moves along the line.

    Parameters
    ----------
    speed : array_like
        v [m/s], down positive; NaN gives NaN.
    latitude : array_like
        φ [rad], -π/2 to π/2.
    gravity : array_like
        g [m/s²], more than 0. While the line speeds up by a along itself the felt gravity is g - a: give that.

    Returns
    -------
    array
        ε [rad], broadcast; east positive, so positive on the way down and negative on the way up. A plumb guide
        seems to lean west by ε: add ε to the east tilt to correct a reading.

    Raises
    ------
    ParameterError
        If gravity is not positive or a latitude is outside its range.

    Notes
    -----
    ε = 2 ω v cos φ/g, the Coriolis acceleration of the moving line against gravity; terms of (2 ω v/g)² (1e-8 at
    10 m/s) are left out.

    References
    ----------
    Goldstein, H. (1980), Classical Mechanics, 2nd ed., section 4-10 (the Coriolis acceleration).
    """
    g = np.asarray(gravity, dtype=np.float64)
    phi = np.asarray(latitude, dtype=np.float64)
    if (g <= 0.0).any():
        raise ParameterError("gravity", gravity, "m/s²", "more than 0 m/s²")
    if (np.abs(phi) > np.pi / 2).any():
        raise ParameterError("latitude", latitude, "rad", "-pi/2 to pi/2")
    angle: Array = 2.0 * EARTH_ROTATION * np.asarray(speed, dtype=np.float64) * np.cos(phi) / g
    return angle


class LineSpeed:
    """Speed and acceleration along the line from depth and time, row by row, without looking ahead.

    Rows are averaged into knots of `KNOT` seconds; the last nine knots form three groups, and a parabola of depth
    over time is laid through the three group means and read at the row. A parabola has no lag at constant
    speed or constant acceleration, whatever the spacing of the rows. Until nine knots have closed the groups are
    smaller; two knots give a speed with acceleration zero; fewer give NaN, as do rows with a missing or
    earlier time or a missing depth (these are left out of the estimate too), and rows after a pause longer than
    `longest_gap` until two knots have closed again.

    The estimate of a row uses only rows before it, and does not depend, to the last bit, on how the rows
    are cut into blocks. Copy it with `copy.deepcopy`.

    Parameters
    ----------
    longest_gap : float
        A pause longer than this starts the estimate afresh [s].

    Notes
    -----
    Independent errors σ of the knots, spaced by T, give a speed at the newest knot with standard deviation
    0.80 σ/T and an acceleration with 0.16 σ/T². At 10 Hz and depth in steps of 10 mm (σ = 2 mm in a knot of two
    rows) that is 8 mm/s, or 0.1 µrad of lean, and 8 mm/s².
    """

    def __init__(self, longest_gap: float = LONGEST_GAP) -> None:
        self._longest_gap = longest_gap
        self._bins = TimeBins(KNOT, 1)
        self._latest = -np.inf
        self._run = 0
        self._knots = np.empty((4, 0))  # run, time, spread, depth of the last knots
        self._fit = np.full((4, 1), np.nan)  # run, time, speed, acceleration at the newest knot

    def update(self, time: npt.ArrayLike, depth: npt.ArrayLike) -> tuple[Array, Array]:
        """Take rows, give the speed at each.

        Parameters
        ----------
        time : array_like, shape (n,)
            [s]; NaN, and rows earlier than one before them, give NaN.
        depth : array_like, shape (n,)
            [m], positive down; NaN gives NaN.

        Returns
        -------
        speed, acceleration : array, shape (n,)
            [m/s] and [m/s²], down positive.

        Raises
        ------
        ParameterError
            If the two differ in length.
        """
        t = np.asarray(time, dtype=np.float64)
        z = np.asarray(depth, dtype=np.float64)
        if t.ndim != 1 or t.shape != z.shape:
            raise ParameterError("depth", z.shape, "", f"the shape of time, {t.shape}")
        out = np.full((2, t.size), np.nan)
        for start in range(0, t.size, _CHUNK):
            part = slice(start, start + _CHUNK)
            self._update(t[part], z[part], out[:, part])
        return out[0], out[1]

    def _update(self, time: Array, depth: Array, out: Array) -> None:
        steps = steps_from(self._latest, time)
        if steps.min() >= 0.0 and np.isfinite(depth).all() and time[-1] < np.inf:
            self._rows(time, depth, steps, out)
            return
        good = np.isfinite(time) & np.isfinite(depth)
        highest = np.maximum.accumulate(np.where(good, time, -np.inf))
        good &= time >= np.maximum(highest, self._latest)
        if good.any():
            kept = np.empty((2, np.count_nonzero(good)))
            self._rows(time[good], depth[good], steps_from(self._latest, time[good]), kept)
            out[:, good] = kept

    def _rows(self, time: Array, depth: Array, steps: Array, out: Array) -> None:
        index, closed = self._bins.add(time, depth[None])
        runs = None
        if steps.max() > self._longest_gap:
            runs = self._run + np.cumsum(steps > self._longest_gap)
        fits = self._fits(closed, self._runs_of(closed, index, runs)) if closed.rows.size else self._fit
        self._latest = float(time[-1])
        self._run = self._run if runs is None else int(runs[-1])
        run, at, speed, acceleration = fits
        if runs is not None:
            rate = np.where(run[index] == runs, acceleration[index], np.nan)
        elif run[0] == run[-1] == self._run:
            rate = acceleration[index]
        else:
            rate = np.where(run == self._run, acceleration, np.nan)[index]
        out[1] = rate
        rate *= time - (at + self._bins.origin)[index]
        np.add(speed[index], rate, out=out[0])

    def _runs_of(
        self, closed: Bins, index: npt.NDArray[np.intp], runs: npt.NDArray[np.intp] | None
    ) -> Array | float:
        """Run of each closed knot: that of its last row, the row before the one that closed it."""
        if runs is None:
            return float(self._run)
        closers = np.searchsorted(index, np.arange(1, closed.rows.size + 1))
        before = np.concatenate([[self._run], runs])
        return before[closers].astype(np.float64)

    def _fits(self, closed: Bins, runs: Array | float) -> Array:
        """Fits at the newest knot before this block, then at each closed knot: run, time, speed, acceleration."""
        old = self._knots.shape[1]
        knots = np.empty((4, old + closed.time.size))
        knots[:, :old] = self._knots
        knots[0, old:], knots[1, old:], knots[2, old:], knots[3, old:] = (
            runs,
            closed.time,
            closed.spread,
            closed.means[0],
        )
        fits = np.concatenate([self._fit, _parabolas(knots, closed.time.size)], axis=1)
        self._knots = knots[:, -_MEMORY:].copy()
        self._fit = fits[:, -1:].copy()
        return fits


def _parabolas(knots: Array, wanted: int) -> Array:
    """Run, time, speed and acceleration at each of the last `wanted` knots, by the largest groups there are."""
    total = knots.shape[1]
    if total == _MEMORY + wanted and knots[0, 0] == knots[0, -1]:
        result = np.empty((4, wanted))
        result[:2] = knots[:2, _MEMORY:]
        if wanted == 1:
            result[2, 0], result[3, 0] = _newest(knots[1:])
        else:
            result[2:] = _grouped(knots[1:], GROUP)
        return result
    result = np.full((4, wanted), np.nan)
    result[:2] = knots[:2, total - wanted :]
    open_ones = np.ones(wanted, dtype=bool)
    for size in (*range(GROUP, 0, -1), 0):
        span = 3 * size - 1 if size else 1
        first = max(total - wanted, span)  # the first knot with enough knots before it
        if first >= total:
            continue
        usable = open_ones.copy()
        usable[: first - (total - wanted)] = False
        usable[first - (total - wanted) :] &= knots[0, first:] == knots[0, first - span : total - span]
        if usable.any():
            found = _grouped(knots[1:, first - span :], size) if size else _chords(knots[1:, first - span :])
            result[2:, usable] = found[:, usable[first - (total - wanted) :]]
            open_ones &= ~usable
        if not open_ones.any():
            break
    return result


def _chords(knots: Array) -> Array:
    """Speed between each knot and the one before it, with no acceleration."""
    speed = np.diff(knots[2]) / np.diff(knots[0])
    return np.stack([speed, np.zeros_like(speed)])


def _running_mean(values: Array, size: int) -> Array:
    """Mean of every `size` neighbours along the last axis."""
    if size == 1:
        return values
    last = values.shape[-1] - size + 1
    total = values[..., :last] + values[..., 1 : last + 1]
    for shift in range(2, size):
        total += values[..., shift : last + shift]
    total /= size
    return total


def _grouped(knots: Array, size: int) -> Array:
    """Speed and acceleration at the newest of every 3 `size` consecutive knots."""
    means = _running_mean(knots, size)
    if size > 1:
        centre = means[0]
        for shift in range(size):
            away = knots[0, shift : shift + centre.size] - centre
            away *= away
            away /= size
            means[1] += away
    last = means.shape[1] - size
    groups = (means[:, : last - size], means[:, size:last], means[:, 2 * size :])
    out = np.empty((2, last - size))
    out[0], out[1] = _parabola(*groups, knots[0, 3 * size - 1 :])
    return out


def _newest(knots: Array) -> tuple[float, float]:
    """Do what `_grouped` does for the nine newest knots alone, in numbers: in the same order, so to the same bits."""
    rows = knots[:, -3 * GROUP :].tolist()
    groups = []
    for first in range(0, 3 * GROUP, GROUP):
        mean = [((row[first] + row[first + 1]) + row[first + 2]) / GROUP for row in rows]
        for time in rows[0][first : first + GROUP]:
            away = time - mean[0]
            mean[1] += away * away / GROUP
        groups.append(mean)
    oldest, middle, newest = groups
    speed, acceleration = _parabola(oldest, middle, newest, rows[0][-1])
    return float(speed), float(acceleration)


def _parabola(oldest: Any, middle: Any, newest: Any, at: Any) -> tuple[Any, Any]:
    """Speed and acceleration at a time from the means of three groups, numbers or arrays alike.

    A group is its mean time T, the variance q of its times and its mean depth. The mean of z = z0 + v τ + ½ a τ²
    over it is z0 + v T + ½ a (T² + q); the differences of three groups give v and a.
    """
    steps = [
        [right - left for left, right in zip(*pair, strict=True)]
        for pair in ((oldest, middle), (middle, newest))
    ]
    (step1, spread1, rise1), (step2, spread2, rise2) = steps
    chord1, chord2 = rise1 / step1, rise2 / step2
    lever1 = spread1 / step1 + (middle[0] + oldest[0])
    lever2 = spread2 / step2 + (newest[0] + middle[0])
    half = (chord2 - chord1) / (lever2 - lever1)
    return chord2 - half * (lever2 - 2.0 * at), 2.0 * half
