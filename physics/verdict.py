"""The decision on a residual against a limit, by the guard-band rule; lengths in metres."""

from collections.abc import Iterable
from math import atan2, cos, hypot, sin

import numpy as np
from numpy.typing import ArrayLike, NDArray

from eastfall.physics.budget import COVERAGE_FACTOR
from eastfall.physics.findings import Verdict


def horizontal(
    east: ArrayLike, north: ArrayLike, u_east: ArrayLike, u_north: ArrayLike, covariance: ArrayLike = 0.0
) -> tuple[NDArray[np.float64], NDArray[np.float64]]:
    """Return the length of a horizontal offset and the standard uncertainty of that length.

    Parameters
    ----------
    east, north : array_like
        Offset [m], broadcast.
    u_east, u_north : array_like
        Their standard uncertainties [m].
    covariance : array_like
        Of the two [m²].

    Returns
    -------
    length, u : ndarray
        [m]. By the law of propagation u² = (e² u_e² + n² u_n² + 2 e n u_en)/r²; where r is not larger than the
        uncertainties themselves the derivative means nothing, and that in the direction known worst stands in: without
        covariance the larger of the two.

    References
    ----------
    JCGM 100:2008 (GUM), eq. 13.
    """
    east, north, u_east, u_north, shared = (
        np.asarray(x, float) for x in (east, north, u_east, u_north, covariance)
    )
    length = np.hypot(east, north)
    largest = _largest(u_east, u_north, shared)
    square = (east * u_east) ** 2 + (north * u_north) ** 2 + 2.0 * east * north * shared
    with np.errstate(divide="ignore", invalid="ignore"):
        along = np.sqrt(np.maximum(square, 0.0)) / length  # below zero by rounding only
    u = np.where(length > largest, along, largest)
    return length if length.shape == u.shape else np.broadcast_to(length, u.shape), u


def _largest(u_east: ArrayLike, u_north: ArrayLike, shared: ArrayLike) -> NDArray[np.float64]:
    """Return the longer half axis of the ellipse of one standard uncertainty [m]."""
    first, second = np.square(u_east), np.square(u_north)
    return np.sqrt(0.5 * (first + second) + np.hypot(0.5 * (first - second), shared))


def direction(
    east: float, north: float, u_east: float, u_north: float, covariance: float = 0.0
) -> tuple[float, float]:
    """Return the direction in which `horizontal` takes the uncertainty: a unit vector, east and north.

    That of the offset, or of the longer axis of the ellipse of its uncertainty where the offset is not larger.
    """
    length = hypot(east, north)
    if length > _largest(u_east, u_north, covariance):
        return east / length, north / length
    turned = 0.5 * atan2(2.0 * covariance, u_east**2 - u_north**2)
    return cos(turned), sin(turned)


def verdicts(length: ArrayLike, u: ArrayLike, limit: ArrayLike) -> list[Verdict]:
    """Decide on lengths against limits.

    Parameters
    ----------
    length : array_like, shape (n,)
        Of the horizontal residual [m], not negative.
    u : array_like, shape (n,)
        Its standard uncertainty [m].
    limit : array_like, shape (n,)
        [m].

    Returns
    -------
    list of {"within", "over", "undecided"}
        With the guard band w = U = 2u: within if length + w ≤ limit, over if length − w > limit, else undecided; a NaN
        anywhere is undecided.

    References
    ----------
    JCGM 106:2012, 8.3; ISO 14253-1:2017.
    """
    size, guard, bound = np.atleast_1d(length), COVERAGE_FACTOR * np.atleast_1d(u), np.atleast_1d(limit)
    words: list[Verdict] = ["undecided", "within", "over"]
    return [words[one] for one in ((size + guard <= bound) + 2 * (size - guard > bound)).tolist()]


def worst(found: Iterable[Verdict]) -> Verdict | None:
    """Return the worst of several verdicts; None of none."""
    told = set(found)
    order: tuple[Verdict, ...] = ("over", "undecided", "within")
    return next((one for one in order if one in told), None)


def verdict(length: float, u: float, limit: float) -> Verdict:
    """Decide on one length against one limit; see `verdicts`."""
    return verdicts(length, u, limit)[0]
