"""Means that a few bad readings do not spoil; when readings belong together is decided elsewhere."""

from typing import NamedTuple

import numpy as np
import numpy.typing as npt

Array = npt.NDArray[np.float64]

MAD_TO_SIGMA = 1.482602218505602
"""1/Φ⁻¹(3/4): median absolute deviation to standard deviation, for the normal distribution."""
TUNING = 1.345
"""k of Huber's ψ: 95 % efficiency where the errors are normal; Huber, P. J. (1981), Robust Statistics, chapter 4."""
EFFICIENCY = 0.95
_STEPS = 30


class RobustMean(NamedTuple):
    """A mean, how single readings scatter about it, and its standard uncertainty, in the unit of the readings."""

    mean: float
    scatter: float
    u: float
    readings: int


def huber_mean(values: npt.ArrayLike) -> RobustMean:
    """Huber's M-estimate of location, scale held at the scaled median absolute deviation.

    Parameters
    ----------
    values : array_like, shape (n,)
        In any unit; NaN is left out.

    Returns
    -------
    RobustMean
        Mean, robust standard deviation of one reading, u = scatter/√(0.95 n), and n. NaN from no reading; scatter and
        u are NaN from one. Where more than half agree to the last digit the scale is the standard deviation, and
        the mean the plain one.

    Notes
    -----
    Iterated weights w = min(1, k s/|x - m|), k = 1.345, from the median; Huber (1964), Ann. Math. Statist. 35(1).
    """
    x = np.asarray(values, dtype=np.float64).ravel()
    x = x[np.isfinite(x)]
    if x.size < 2:
        return RobustMean(float(x[0]) if x.size else np.nan, np.nan, np.nan, x.size)
    middle = float(np.median(x))
    scatter = MAD_TO_SIGMA * float(np.median(np.abs(x - middle)))
    if scatter == 0.0:
        # A coarse or idle instrument: without a scale nothing can be called far off.
        middle, scatter = float(x.mean()), float(x.std(ddof=1))
    else:
        middle = _weighted(x, middle, TUNING * scatter)
    return RobustMean(middle, scatter, scatter / float(np.sqrt(EFFICIENCY * x.size)), x.size)


def _weighted(x: Array, middle: float, reach: float) -> float:
    """Iterate the weighted mean until it stands still."""
    for _ in range(_STEPS):
        away = np.abs(x - middle)
        weight = reach / np.maximum(away, reach)
        new = float(np.sum(weight * x) / np.sum(weight))
        if abs(new - middle) <= 1e-9 * reach:
            return new
        middle = new
    return middle
