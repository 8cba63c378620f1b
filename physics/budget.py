"""Uncertainty put together by the GUM: what each input contributes, combined, shared by two coordinates, expanded.

What an input contributes (a step of it through a model, a property of the instrument) is worked out where it is known;
a length is decided on in `verdict`.
"""

from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike, NDArray

Array = NDArray[np.float64]

COVERAGE_FACTOR = 2.0
"""k of the expanded uncertainty U = k u; about 95 % for a normal distribution (JCGM 100:2008, GUM, eq. 18 and 6.3)."""


def combined(parts: ArrayLike) -> Array:
    """Combine what uncorrelated inputs contribute.

    Parameters
    ----------
    parts : array_like, shape (k, ...)
        c u of each input: its standard uncertainty times the sensitivity, in the unit of the answer; NaN where the
        answer is not known.

    Returns
    -------
    array, shape (...)
        Combined standard uncertainty, in that unit; zero of none.

    References
    ----------
    JCGM 100:2008, Guide to the expression of uncertainty in measurement, eq. 10 and 11a.
    """
    return np.sqrt(np.sum(np.asarray(parts, dtype=np.float64) ** 2, axis=0))


def covariance(parts: ArrayLike) -> Array:
    """Give the covariance of two coordinates that the same inputs move together.

    Parameters
    ----------
    parts : array_like, shape (k, 2, n)
        c u of each input, its sign kept: one input moves both coordinates at once.

    Returns
    -------
    array, shape (n, 2, 2)
        In the square of the unit.

    References
    ----------
    JCGM 102:2011 (GUM Supplement 2), section 6.2.
    """
    shared = np.asarray(parts, dtype=np.float64)
    return np.einsum("kin,kjn->nij", shared, shared)


def joint(parts: ArrayLike, correlation: ArrayLike) -> Array:
    """Give the covariance of east and north alone, where not every input moves both of them as one cause.

    Parameters
    ----------
    parts : array_like, shape (k, 2, n)
        c u of each input, its sign kept.
    correlation : array_like, shape (k, n)
        Of what each input puts into east and into north: 1 of one cause that moves both, 0 of two that are independent.

    Returns
    -------
    array, shape (n,)
        In the square of the unit; zero of no inputs.

    References
    ----------
    JCGM 100:2008 (GUM), 5.2.2, eq. 13 and 14.
    """
    shares = np.asarray(parts, dtype=np.float64)
    terms = np.asarray(correlation) * shares[:, 0] * shares[:, 1]
    # One after the other: a plain sum takes a single column in another order than several.
    return np.add.accumulate(terms)[-1] if len(terms) else np.zeros(shares.shape[2:])


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class Budget:
    """What each input contributes to the uncertainty of an offset, by depth.

    Parameters
    ----------
    depth : ndarray, shape (m,)
        [m].
    names : tuple of str
        The inputs.
    parts : ndarray, shape (len(names), 2, m)
        Standard uncertainty from each alone [m], east and north; the sign is that of the sensitivity. Each is one
        cause, which moves east and north together.
    """

    depth: Array
    names: tuple[str, ...]
    parts: Array

    def at(self, depth: ArrayLike) -> Array:
        """Return the parts at depths, shape (n,) [m]: shape (len(names), 2, n) [m]."""
        z = np.atleast_1d(np.asarray(depth, dtype=float))
        rows = [np.interp(z, self.depth, row) for part in self.parts for row in part]
        return np.array(rows).reshape(len(self.names), 2, z.size)
