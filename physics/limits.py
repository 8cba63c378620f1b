"""The limits in force at a depth; deciding against them is `verdict`, alarming on them is the engine."""

import numpy as np
from numpy.typing import NDArray

from eastfall.physics.settings import Limits


def limits_at(limits: Limits, depth: NDArray[np.float64]) -> tuple[NDArray[np.float64], NDArray[np.float64]]:
    """Return the warning and action limit at depths.

    Parameters
    ----------
    limits : Limits
        With a table: linear between its depths and level beyond its ends. Else the action limit is the larger of
        `action` and depth/`ratio`, and the warning limit grows with it in proportion.
    depth : ndarray, shape (n,)
        [m]; NaN gives NaN.

    Returns
    -------
    warning, action : ndarray, shape (n,)
        On the length of the horizontal residual [m].
    """
    if limits.table:
        depths, warning, action = np.array(limits.table, dtype=float).T
        return np.interp(depth, depths, warning), np.interp(depth, depths, action)
    action = np.maximum(limits.action, depth / limits.ratio) if limits.ratio else limits.action + 0.0 * depth
    return action * (limits.warning / limits.action), action
