"""Integration matrices on Gauss-Legendre nodes, for solving an ordinary differential equation a whole stretch at once.

Which equation, and where the stretches end, is up to the caller.
"""

from dataclasses import dataclass

import numpy as np
from numpy.polynomial import chebyshev, legendre

from eastfall.physics.earth import Array


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class Rule:
    """Gauss-Legendre nodes on [-1, 1] with their integration matrices.

    Parameters
    ----------
    nodes, weights : array, shape (n,)
        Of the quadrature.
    to_nodes : array, shape (n, n)
        Values of a function at the nodes to those of its integral from -1.
    to_series : array, shape (n + 1, n)
        The same to the Chebyshev coefficients of that integral.
    """

    nodes: Array
    weights: Array
    to_nodes: Array
    to_series: Array


def gauss_rule(count: int) -> Rule:
    """Nodes and integration matrices of `count` Gauss-Legendre points.

    Parameters
    ----------
    count : int
        n, at least 2.

    Returns
    -------
    Rule
        Exact for polynomials of degree n - 1, and of degree 2n - 1 over the whole interval.

    References
    ----------
    Hairer, E., Nørsett, S. P. & Wanner, G. (1993), Solving Ordinary Differential Equations I, section II.7
    (collocation).
    """
    nodes, weights = (np.asarray(one, dtype=np.float64) for one in legendre.leggauss(count))
    # Values at the nodes to Legendre coefficients, by the discrete orthogonality of the Gauss points.
    degree = np.arange(count)
    to_legendre = (2 * degree[:, None] + 1) / 2 * legendre.legvander(nodes, count - 1).T * weights
    integral = legendre.legint(to_legendre, lbnd=-1, axis=0)
    points = chebyshev.chebpts1(count + 1)
    to_chebyshev = np.linalg.inv(chebyshev.chebvander(points, count)).astype(np.float64, copy=False)
    to_series = to_chebyshev @ (legendre.legvander(points, count) @ integral)
    to_nodes = legendre.legvander(nodes, count) @ integral
    for array in (nodes, weights, to_nodes, to_series):
        array.setflags(write=False)
    return Rule(nodes=nodes, weights=weights, to_nodes=to_nodes, to_series=to_series)
