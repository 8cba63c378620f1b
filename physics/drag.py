"""Drag coefficients of a smooth sphere by published correlations, and where they are doubtful.

The program uses Morrison's, because it goes through the drag crisis; Haider and Levenspiel's stands beside it. How the
coefficient acts on a moving body is in `motion`.
"""

import numpy as np
import numpy.typing as npt

from eastfall.physics.earth import Array

CRISIS_REYNOLDS = 1.0e5
"""Above it the surface and the spin of a sphere matter: roughness brings the crisis from about 3e5 to below 1e5.

Achenbach, E. (1974), The effects of surface roughness and tunnel blockage on the flow past spheres, J. Fluid Mech. 65,
113-125 (from memory, unconfirmed).
"""

HIGHEST_REYNOLDS = 1.0e6
"""End of the domain of Morrison's correlation."""

_CRISIS = 2.63e5
# Re = 0 has a drag force (none) but no coefficient; the floor keeps the logarithm finite and changes nothing above it.
_LOWEST = 1.0e-30
_WORTHWHILE = 64
"""Members from which on a polynomial per row is cheaper than the formula."""
_DEGREE = 6
_POINTS = np.cos(np.pi * (np.arange(_DEGREE + 1) + 0.5) / (_DEGREE + 1))
_TO_POWERS = np.linalg.inv(np.vander(_POINTS, increasing=True)).T


def haider_levenspiel(reynolds: npt.ArrayLike) -> Array:
    """Drag coefficient of a smooth sphere below the drag crisis.

    Parameters
    ----------
    reynolds : array_like
        Re [1], more than 0 to 2e5.

    Returns
    -------
    array
        Cd = (24/Re)(1 + 0.1806 Re^0.6459) + 0.4251/(1 + 6880.95/Re) [1], on the cross-section.

    References
    ----------
    Haider, A. & Levenspiel, O. (1989), Powder Technology 58, 63-70, doi:10.1016/0032-5910(89)80008-7.
    """
    re = np.asarray(reynolds, dtype=np.float64)
    coefficient: Array = 24.0 / re * (1.0 + 0.1806 * re**0.6459) + 0.4251 / (1.0 + 6880.95 / re)
    return coefficient


def morrison(reynolds: npt.ArrayLike) -> Array:
    """Drag coefficient of a smooth sphere from creeping flow through the drag crisis.

    Parameters
    ----------
    reynolds : array_like
        Re [1], more than 0 to 1e6.

    Returns
    -------
    array
        Cd = 24/Re + 2.6 (Re/5)/(1 + (Re/5)^1.52) + 0.411 q^-7.94/(1 + q^-8) + Re^0.8/461000 [1], q = Re/263000,
        on the cross-section.

    Notes
    -----
    Between Re 1e5 and 1e6 measured spheres differ from one another by far more than this curve's own error: the
    place of the crisis depends on surface, spin and turbulence. Below it the curve lies up to 13 % under measured
    spheres (Re 6e4) and 15 % at Re 3; the tests hold it to that.

    References
    ----------
    Morrison, F. A. (2013), An Introduction to Fluid Mechanics, Cambridge University Press; as compared by Barati, R.
    et al. (2014), Powder Technology 257, 11-19, doi:10.1016/j.powtec.2014.02.045.
    """
    re = np.asarray(reynolds, dtype=np.float64)
    coefficient: Array = scaled_morrison(re) / re
    return coefficient


def scaled_morrison(reynolds: Array) -> Array:
    """Cd·Re of `morrison` [1], finite down to Re = 0, from one logarithm and three exponentials.

    The crisis term is written q^0.06/(1 + q^8), which is the same number and does not overflow at small Re.
    """
    log_re = np.log(np.maximum(reynolds, _LOWEST))
    fall = np.exp(1.52 * log_re - 1.52 * np.log(5.0))
    squared = np.square(reynolds * (1.0 / _CRISIS))
    fourth = np.square(squared)
    crisis = np.exp(0.06 * log_re - 0.06 * np.log(_CRISIS)) / (1.0 + np.square(fourth))
    tail = np.exp(0.8 * log_re)
    scaled: Array = 24.0 + reynolds * (
        0.52 * reynolds / (1.0 + fall) + 0.411 * crisis + tail * (1.0 / 461000.0)
    )
    return scaled


def scaled_morrison_rows(reynolds: Array) -> Array:
    """Cd·Re of `morrison` [1] for rows of nearly equal Reynolds numbers, shape (nodes, members).

    Where all members of every row lie within a tenth of its middle, the curve is replaced over that range by the
    polynomial of degree 6 through Chebyshev points, which is within 1e-6 of it also in the drag crisis and takes a
    fifth of the time; otherwise the formula itself is evaluated.
    """
    if reynolds.ndim != 2 or reynolds.shape[1] < _WORTHWHILE:
        return scaled_morrison(reynolds)
    low, high = reynolds.min(axis=1, keepdims=True), reynolds.max(axis=1, keepdims=True)
    middle, half = 0.5 * (low + high), 0.5 * (high - low)
    # A comparison that NaN fails, so that NaN takes the exact way as well.
    if not np.all(half <= 0.1 * middle):
        return scaled_morrison(reynolds)
    half = np.maximum(half, 1e-9 * middle + _LOWEST)
    coefficients = scaled_morrison(middle + half * _POINTS) @ _TO_POWERS
    x = (reynolds - middle) / half
    value: Array = coefficients[:, -1:] * x
    for power in range(_DEGREE - 1, 0, -1):
        value += coefficients[:, power : power + 1]
        value *= x
    value += coefficients[:, :1]
    return value
