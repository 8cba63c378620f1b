"""Readings in two faces gathered by depth while they come, in bounded memory; pairing them is `calibration`."""

from math import pi

import numpy as np
from numpy.typing import NDArray

from eastfall.physics.calibration import FacePairs, pair_faces
from eastfall.physics.findings import FaceSums

Array = NDArray[np.float64]

_TILTED = 0.35
"""A face this far from 0 or π is neither [rad]."""
_FIELDS = 4
"""Kept a bin: weight, weighted a and b, rows."""


def face_of(face: Array) -> Array:
    """Return 0 or 1 (turned by π) for face angles [rad]; NaN where it is neither."""
    turned = np.abs((face + pi) % (2.0 * pi) - pi)
    return np.where(turned <= _TILTED, 0.0, np.where(turned >= pi - _TILTED, 1.0, np.nan))


class FaceBins:
    """Sums of the axes' readings, a bin a station depth and face; the same however rows are cut into blocks.

    Parameters
    ----------
    every : float
        Spacing of stations [m].
    deepest : float
        Of the run [m].
    """

    def __init__(self, every: float, deepest: float) -> None:
        self._every = every
        self._count = int(deepest / every) + 2
        self._sums: Array | None = None

    def add(self, depth: Array, weight: Array, tilts: Array, face: Array) -> None:
        """Add rows.

        Parameters
        ----------
        depth : ndarray, shape (n,)
            [m].
        weight : ndarray, shape (n,)
            Not negative; the path a row stands for [m].
        tilts : ndarray, shape (2, n)
            A and B [rad], freed from the lean of the moving line; NaN is left out.
        face : ndarray, shape (n,)
            [rad].
        """
        side = face_of(face)
        good = np.isfinite(side) & np.isfinite(tilts).all(axis=0) & (weight > 0.0)
        if not good.any():
            return
        if self._sums is None:
            self._sums = np.zeros((_FIELDS, 2 * self._count))
        number = np.rint(depth[good] / self._every).astype(np.intp)
        place = 2 * np.clip(number, 0, self._count - 1) + side[good].astype(np.intp)
        w = weight[good]
        # Unbuffered and in the order of the rows, so that every bit is theirs alone.
        for row, values in zip(
            self._sums, (w, w * tilts[0, good], w * tilts[1, good], np.ones(w.size)), strict=True
        ):
            np.add.at(row, place, values)

    def sums(self, u_tilt: float) -> FaceSums | None:
        """Pair what there is; None unless some depth was seen in both faces.

        Parameters
        ----------
        u_tilt : float
            Standard uncertainty of one reading [rad].
        """
        if self._sums is None:
            return None
        weight = self._sums[0].reshape(-1, 2)
        with np.errstate(invalid="ignore", divide="ignore"):
            mean = (self._sums[1:3] / self._sums[0]).reshape(2, -1, 2)
        depth = self._every * np.arange(self._count)
        seen = weight > 0.0
        rows = self._sums[3].reshape(-1, 2)[seen]
        u = u_tilt / float(np.sqrt(np.median(rows)))
        a, b = (
            pair_faces(
                depth[seen[:, 0]],
                one[seen[:, 0], 0],
                depth[seen[:, 1]],
                one[seen[:, 1], 1],
                within=0.25 * self._every,
                u_tilt=u,
            )
            for one in mean
        )
        return _told(a, b) if a.depth.size else None


def _told(a: FacePairs, b: FacePairs) -> FaceSums:
    return FaceSums(
        depth=tuple(a.depth.tolist()),
        sum_a=tuple(a.face_sum.tolist()),
        sum_b=tuple(b.face_sum.tolist()),
        suspect=tuple((a.suspect | b.suspect).tolist()),
        mean_a=a.mean,
        mean_b=b.mean,
        spread_a=a.spread,
        spread_b=b.spread,
        zero_a=a.zero,
        zero_b=b.zero,
        u_zero_a=a.u_zero,
        u_zero_b=b.u_zero,
        unpaired=a.unpaired,
    )
