"""How sure the difference of two passes of one run is, from what makes each of them uncertain; pure."""

from collections.abc import Mapping, Sequence
from math import pi

import numpy as np
from numpy.typing import NDArray

from eastfall.physics.budget import combined, joint
from eastfall.physics.combine import OWN
from eastfall.physics.findings import Station
from eastfall.physics.kinds.shares import ZERO

Array = NDArray[np.float64]


def in_opposite_faces(first: Sequence[Station], second: Sequence[Station]) -> bool:
    """Return whether each pass kept to one face, and the two faces are opposite."""
    faces = [{one.face for one in stations} for stations in (first, second)]
    if any(len(each) != 1 or None in each for each in faces):
        return False
    apart = abs(float(faces[0].pop() or 0.0) - float(faces[1].pop() or 0.0))
    return abs(apart - pi) < pi / 4.0


def u_apart(
    first: Mapping[str, Array],
    second: Mapping[str, Array],
    correlations: Mapping[str, Array] | None = None,
    *,
    opposite: bool = False,
) -> tuple[Array, Array]:
    """Return the standard uncertainty of the difference of two passes of one run, and its covariance.

    Parameters
    ----------
    first, second : mapping of str to ndarray, shape (2, n)
        Parts of the uncertainty of each pass at n depths, east and north, by input [m].
    correlations : mapping of str to ndarray, shape (n,), optional
        Of the two parts of each input; 0 where it is not told.
    opposite : bool
        Whether the passes were made in opposite faces.

    Returns
    -------
    u : ndarray, shape (2, n)
        East and north [m].
    covariance : ndarray, shape (n,)
        Of the two [m²].

    Notes
    -----
    An input that both passes share, such as scale, azimuth or what is expected, errs by the same amount in both, and
    of its parts only the difference shows; a zero offset turns with the face, and in opposite faces its parts add.
    What a pass gathers for itself is taken as independent. Where the second pass goes on with the sum of the first
    that is too large, at most by the root of 2 at the turn: their sum is common, and only what came since is not.
    """
    some = next(iter({**first, **second}.values()))
    none = np.zeros(some.shape)
    told = correlations or {}
    parts: list[Array] = []
    together: list[Array] = []
    for name in dict.fromkeys([*first, *second]):
        one, other = first.get(name, none), second.get(name, none)
        difference = one + other if opposite and name == ZERO else other - one
        found = [one, other] if name in OWN else [difference]
        parts += found
        together += [told.get(name, none[0])] * len(found)
    return combined(np.stack(parts)), joint(np.stack(parts), np.stack(together))
