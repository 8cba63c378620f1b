"""Standard uncertainties combined by the GUM, and the table that says which input contributes what.

Where each contribution comes from (a step of one input in a model) is known to the callers.
"""

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
import numpy.typing as npt

from eastfall.physics.errors import ParameterError

Array = npt.NDArray[np.float64]

COVERAGE = 2.0
"""k of the expanded uncertainty; JCGM 100:2008 (GUM), 6.3.3: about 95 % where the degrees of freedom are many."""


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class Contribution:
    """What one input puts into the uncertainty of an offset.

    Parameters
    ----------
    name : str
        The input.
    east, north : array_like
        c u of each coordinate [m]: standard uncertainty of the input times the sensitivity, its sign kept. A number
        or one value per depth; NaN where the offset is not known.
    """

    name: str
    east: npt.ArrayLike
    north: npt.ArrayLike


@dataclass(frozen=True, slots=True, kw_only=True)
class Row:
    """One input in a budget.

    Parameters
    ----------
    name : str
    east, north : float
        Its standard uncertainty in each coordinate [m], without sign.
    share : float
        Of the variance of both coordinates together [1], 0 to 1.
    """

    name: str
    east: float
    north: float
    share: float


@dataclass(frozen=True, slots=True, kw_only=True)
class Budget:
    """The uncertainty of one offset, input by input.

    Parameters
    ----------
    rows : tuple of Row
        The largest share first.
    east, north : float
        Combined standard uncertainty [m].
    expanded_east, expanded_north : float
        Expanded uncertainty, twice that [m].
    """

    rows: tuple[Row, ...]
    east: float
    north: float
    expanded_east: float
    expanded_north: float


def combine(contributions: Sequence[Contribution]) -> tuple[Array, Array]:
    """Combine contributions of independent inputs.

    Parameters
    ----------
    contributions : sequence of Contribution
        Their components broadcast against each other; none gives zero.

    Returns
    -------
    east, north : array
        Combined standard uncertainty [m], the root sum of squares.

    References
    ----------
    JCGM 100:2008, Guide to the expression of uncertainty in measurement, eq. 10 and 11a.
    """
    total_east, total_north = np.zeros(()), np.zeros(())
    for one in contributions:
        total_east = total_east + np.square(np.asarray(one.east, dtype=np.float64))
        total_north = total_north + np.square(np.asarray(one.north, dtype=np.float64))
    return np.sqrt(total_east), np.sqrt(total_north)


def covariance(contributions: Sequence[Contribution]) -> Array:
    """Covariance of east and north.

    Parameters
    ----------
    contributions : sequence of Contribution
        One input moves both coordinates together, so the signs of its components count.

    Returns
    -------
    array, shape (..., 2, 2)
        East first [m²].

    References
    ----------
    JCGM 102:2011 (GUM Supplement 2), section 6.2.
    """
    total = np.zeros((2, 2))
    for one in contributions:
        pair = np.stack(
            np.broadcast_arrays(np.asarray(one.east, np.float64), np.asarray(one.north, np.float64)), axis=-1
        )
        total = total + pair[..., :, None] * pair[..., None, :]
    return total


def expanded(u: npt.ArrayLike) -> Array:
    """Expand a standard uncertainty to U = 2 u, in the same unit and shape.

    References
    ----------
    JCGM 100:2008, eq. 18.
    """
    U: Array = COVERAGE * np.asarray(u, dtype=np.float64)
    return U


def budget(contributions: Sequence[Contribution], at: int | None = None) -> Budget:
    """Table of the contributions at one depth.

    Parameters
    ----------
    contributions : sequence of Contribution
    at : int, optional
        Index of the depth; not needed where every component is a single number.

    Returns
    -------
    Budget

    Raises
    ------
    ParameterError
        If a component has several values and `at` is not given.
    """
    parts = [(one.name, _value(one, one.east, at), _value(one, one.north, at)) for one in contributions]
    variance = sum(east**2 + north**2 for _, east, north in parts)
    rows = [
        Row(
            name=name,
            east=abs(east),
            north=abs(north),
            share=(east**2 + north**2) / variance if variance else 0.0,
        )
        for name, east, north in parts
    ]
    east = sum(row.east**2 for row in rows) ** 0.5
    north = sum(row.north**2 for row in rows) ** 0.5
    return Budget(
        rows=tuple(sorted(rows, key=lambda row: -row.share)),
        east=east,
        north=north,
        expanded_east=COVERAGE * east,
        expanded_north=COVERAGE * north,
    )


def _value(one: Contribution, component: npt.ArrayLike, at: int | None) -> float:
    values = np.asarray(component, dtype=np.float64)
    if values.ndim == 0:
        return float(values)
    if at is None:
        raise ParameterError(
            "at", at, "", f"the index of a depth, because {one.name!r} has {values.size} values"
        )
    return float(values[at])
