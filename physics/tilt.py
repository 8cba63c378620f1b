"""From tilt to offset: steps per metre of line, and their running sum for a stream of rows.

The tilts are true ones (see `calibration`), already freed from the lean of a moving line (see `moving`).
"""

from typing import Literal

import numpy as np
import numpy.typing as npt

from eastfall.physics.errors import ParameterError

Array = npt.NDArray[np.float64]


def increments(tilt_a: npt.ArrayLike, tilt_b: npt.ArrayLike, azimuth: npt.ArrayLike) -> tuple[Array, Array]:
    """Offset per metre of line.

    Parameters
    ----------
    tilt_a, tilt_b : array_like
        True tilts a, b of the axes [rad], positive where the lower end leans toward the positive axis; B is 90°
        clockwise from A seen from above. NaN gives NaN.
    azimuth : array_like
        α of the A axis, clockwise from true north [rad].

    Returns
    -------
    east, north : array
        [m/m], broadcast.

    Notes
    -----
    ΔN/Δs = sin a cos α - sin b sin α, ΔE/Δs = sin a sin α + sin b cos α: the horizontal axes A and B turned by α.
    """
    a, b = np.sin(np.asarray(tilt_a, dtype=np.float64)), np.sin(np.asarray(tilt_b, dtype=np.float64))
    s, c = np.sin(np.asarray(azimuth, dtype=np.float64)), np.cos(np.asarray(azimuth, dtype=np.float64))
    return a * s + b * c, a * c - b * s


def direction(inclination: npt.ArrayLike, azimuth: npt.ArrayLike) -> tuple[Array, Array]:
    """Offset per metre of a line of given inclination.

    Parameters
    ----------
    inclination : array_like
        From the vertical [rad], 0 to π/2.
    azimuth : array_like
        That the lower end leans to, clockwise from true north [rad].

    Returns
    -------
    east, north : array
        sin I sin A and sin I cos A [m/m], broadcast.
    """
    lean, toward = np.asarray(inclination, dtype=np.float64), np.asarray(azimuth, dtype=np.float64)
    return np.sin(lean) * np.sin(toward), np.sin(lean) * np.cos(toward)


def ratio_factor(first: Array, second: Array) -> Array:
    """(2/β) tan(β/2) for the angle β between unit vectors, shape (3, n) each; 1 for parallel ones.

    β comes from the chord, 2 arcsin(|t2 - t1|/2), which keeps its digits where cos β is close to 1.

    References
    ----------
    Taylor, H. L. & Mason, C. M. (1972), A systematic approach to well surveying calculations, SPE Journal 12(6).
    """
    half = np.arcsin(np.minimum(0.5 * np.sqrt(np.sum((second - first) ** 2, axis=0)), 1.0))
    safe = np.where(half == 0.0, 1.0, half)
    return np.where(half == 0.0, 1.0, np.tan(safe) / safe)


def _unit(east: Array, north: Array) -> Array:
    """Complete downward lines to unit vectors (east, north, down), shape (3, n)."""
    flat = east * east + north * north
    if np.any(flat > 1.0):
        raise ParameterError("east, north", float(np.nanmax(flat)) ** 0.5, "m/m", "together at most 1 m/m")
    return np.stack([east, north, np.sqrt(1.0 - flat)])


def spread_misclosure(
    depth: npt.ArrayLike, east: npt.ArrayLike, north: npt.ArrayLike, end_east: float, end_north: float
) -> tuple[Array, Array]:
    """Offsets bent so that the last one meets a known end.

    Parameters
    ----------
    depth : array_like, shape (n,)
        Of the stations in their order along the run [m]; the first and last differ.
    east, north : array_like, shape (n,)
        Measured offsets [m]; NaN stays NaN.
    end_east, end_north : float
        Known offset of the last station [m].

    Returns
    -------
    east, north : array, shape (n,)
        [m]; the first unchanged, the last the known one, the misclosure spread in proportion to depth: what a
        zero error of the instrument would have done.

    Raises
    ------
    ParameterError
        If the first and last depth are equal.
    """
    z = np.asarray(depth, dtype=np.float64)
    e, n = np.asarray(east, dtype=np.float64), np.asarray(north, dtype=np.float64)
    if z.size < 2 or z[-1] == z[0]:
        raise ParameterError("depth", depth, "m", "a last station at another depth than the first")
    share = (z - z[0]) / (z[-1] - z[0])
    return e + share * (end_east - e[-1]), n + share * (end_north - n[-1])


class OffsetSum:
    """Running offset of a stream of rows, from slopes and the depth along the line.

    Rows with a missing depth or slope are passed over: they give NaN, and the next good row is joined to the last
    good one. The result does not depend, to the last bit, on how the rows are cut into blocks. Copy it with
    `copy.deepcopy`.

    Parameters
    ----------
    start_east, start_north : float
        Offset at the first good row [m].
    method : {"average", "minimum-curvature"}
        How a step Δs is taken from the unit vectors t1, t2 along the line at its ends: ½ Δs (t1 + t2), or that times
        (2/β) tan(β/2), the arc of a circle, β the angle between them.
    """

    def __init__(
        self,
        start_east: float = 0.0,
        start_north: float = 0.0,
        method: Literal["average", "minimum-curvature"] = "average",
    ) -> None:
        if method not in ("average", "minimum-curvature"):
            raise ParameterError("method", method, "", "average or minimum-curvature")
        self.method = method
        self._sums = np.array([[start_east], [start_north], [0.0]])
        self._last: Array | None = None  # depth, east and north slope of the last good row
        self._step = 0.0

    def update(
        self, depth: npt.ArrayLike, north_slope: npt.ArrayLike, east_slope: npt.ArrayLike
    ) -> tuple[Array, Array, Array]:
        """Take rows, give the offset at each.

        Parameters
        ----------
        depth : array_like, shape (n,)
            Along the line [m], positive down; it may turn back.
        north_slope, east_slope : array_like, shape (n,)
            Offset per metre [m/m].

        Returns
        -------
        east, north : array, shape (n,)
            Offset from the start [m].
        weight_sum : array, shape (n,)
            Σ w² [m²] over the rows up to this one, w half of the two steps beside a row: times the variance of
            one slope it is the variance of the offset from random errors (average method).

        Raises
        ------
        ParameterError
            If the arrays differ in length, or a direction is longer than 1 (minimum curvature only).
        """
        given = [np.asarray(one, dtype=np.float64) for one in (depth, east_slope, north_slope)]
        shapes = tuple(one.shape for one in given)
        if len(set(shapes)) > 1:
            raise ParameterError("depth, east_slope, north_slope", shapes, "", "three of one shape")
        rows = np.array(given)
        finite = np.isfinite(rows)
        if finite.all() and finite.size:
            out = self._add(rows)
        else:
            good = finite.all(axis=0)
            out = np.full(rows.shape, np.nan)
            if good.any():
                out[:, good] = self._add(rows[:, good])
        return out[0], out[1], out[2]

    def _add(self, rows: Array) -> Array:
        first = rows[:, :1] if self._last is None else self._last
        joined = np.concatenate([first, rows], axis=1)
        step = joined[0, 1:] - joined[0, :-1]
        half = 0.5 * step
        terms = np.empty((3, step.size + 1))
        terms[:, 0] = self._sums[:, 0]
        np.multiply(half, joined[1:, 1:] + joined[1:, :-1], out=terms[:2, 1:])
        if self.method == "minimum-curvature":
            unit = _unit(joined[1], joined[2])
            terms[:2, 1:] *= ratio_factor(unit[:, :-1], unit[:, 1:])
        # A row's weight is complete when the next row is there: at row i the sum holds rows up to i - 1, and the
        # row itself adds half of its one step.
        before = np.concatenate([[0.5 * self._step], half[:-1]])
        terms[2, 1:] = (before + half) ** 2
        sums = np.cumsum(terms, axis=1)
        self._sums = sums[:, -1:].copy()
        self._step = float(step[-1])
        self._last = rows[:, -1:].copy()
        out = sums[:, 1:].copy()
        out[2] += half * half
        return out

    def jump(self, depth: float) -> None:
        """Let the next step begin at another depth [m], with the slopes of the last good row: nothing is summed."""
        if self._last is not None:
            self._last[0, 0] = depth
