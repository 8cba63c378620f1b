"""The decision on a residual against a limit, by the guard-band rule; lengths in metres."""

from collections.abc import Iterable

import numpy as np
from numpy.typing import ArrayLike, NDArray

from eastfall.physics.budget import COVERAGE_FACTOR
from eastfall.physics.findings import Verdict


def horizontal(
    east: ArrayLike, north: ArrayLike, u_east: ArrayLike, u_north: ArrayLike
) -> tuple[NDArray[np.float64], NDArray[np.float64]]:
    """Return the length of a horizontal offset and the standard uncertainty of that length.

    Parameters
    ----------
    east, north : array_like
        Offset [m], broadcast.
    u_east, u_north : array_like
        Their standard uncertainties [m], taken as uncorrelated.

    Returns
    -------
    length, u : ndarray
        [m]. By the law of propagation (GUM, eq. 10) u² = (e·u_e/r)² + (n·u_n/r)²; where r is not larger than the
        uncertainties themselves the derivative means nothing, and the larger of the two stands in.
    """
    east, north, u_east, u_north = np.broadcast_arrays(
        *(np.asarray(x, float) for x in (east, north, u_east, u_north))
    )
    length = np.hypot(east, north)
    largest = np.maximum(u_east, u_north)
    with np.errstate(divide="ignore", invalid="ignore"):
        along = np.hypot(east * u_east, north * u_north) / length
    return length, np.where(length > largest, along, largest)


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
