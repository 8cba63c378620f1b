"""What an instrument shows and what it means: corrections and pairs of faces; reading the constants is for `io`."""

from dataclasses import dataclass

import numpy as np
import numpy.typing as npt

from eastfall.physics.errors import ParameterError
from eastfall.physics.robust import MAD_TO_SIGMA
from eastfall.physics.settings import Instrument

Array = npt.NDArray[np.float64]

_SUSPECT = 3.5
"""Robust deviations; Iglewicz, B. & Hoaglin, D. C. (1993), How to Detect and Handle Outliers, section 3."""


def corrected(
    tilt_a: npt.ArrayLike, tilt_b: npt.ArrayLike, temperature: npt.ArrayLike | None, instrument: Instrument
) -> tuple[Array, Array]:
    """Correct shown tilts to true ones.

    Parameters
    ----------
    tilt_a, tilt_b : array_like
        As the instrument shows them [rad]; NaN gives NaN.
    temperature : array_like or None
        Of the probe [K]; None stands for the reference temperature. NaN gives NaN where a temperature
        coefficient is set, and is of no consequence where none is.
    instrument : settings.Instrument

    Returns
    -------
    a, b : array
        True tilts [rad], broadcast.

    Raises
    ------
    ParameterError
        If the scales and cross terms do not let the true tilts be found.

    Notes
    -----
    The inverse of `shown`, whose equations are solved exactly.
    """
    zero_a, zero_b, scale_a, scale_b = _constants(temperature, instrument)
    determinant = scale_a * scale_b - instrument.cross_ab * instrument.cross_ba
    if np.any(determinant <= 0.0):
        raise ParameterError(
            "scale_a, scale_b", (instrument.scale_a, instrument.scale_b), "", "well above the cross terms"
        )
    a = np.asarray(tilt_a, dtype=np.float64) - zero_a
    b = np.asarray(tilt_b, dtype=np.float64) - zero_b
    return (
        (scale_b * a - instrument.cross_ab * b) / determinant,
        (scale_a * b - instrument.cross_ba * a) / determinant,
    )


def shown(
    tilt_a: npt.ArrayLike, tilt_b: npt.ArrayLike, temperature: npt.ArrayLike | None, instrument: Instrument
) -> tuple[Array, Array]:
    """Give what the instrument shows of true tilts.

    Parameters
    ----------
    tilt_a, tilt_b : array_like
        True [rad]; NaN gives NaN.
    temperature : array_like or None
        As for `corrected`.
    instrument : settings.Instrument

    Returns
    -------
    a, b : array
        Shown tilts [rad], broadcast.

    Notes
    -----
    shown A = z_A + k_A (T - T0) + s_A [1 + q (T - T0)] a + c_AB b, and the same with A and B exchanged: z zero,
    k its drift, s scale, q the scale's drift, c cross-axis term, T0 the reference temperature.
    """
    zero_a, zero_b, scale_a, scale_b = _constants(temperature, instrument)
    a, b = np.asarray(tilt_a, dtype=np.float64), np.asarray(tilt_b, dtype=np.float64)
    return zero_a + scale_a * a + instrument.cross_ab * b, zero_b + scale_b * b + instrument.cross_ba * a


def _constants(temperature: npt.ArrayLike | None, one: Instrument) -> tuple[Array, Array, Array, Array]:
    """Zeros and scales at a temperature."""
    warmer = np.zeros(())
    if temperature is not None and (one.zero_a_per_c or one.zero_b_per_c or one.scale_per_c):
        warmer = np.asarray(temperature, dtype=np.float64) - one.reference_temperature
    scale = 1.0 + one.scale_per_c * warmer
    return (
        one.zero_a + one.zero_a_per_c * warmer,
        one.zero_b + one.zero_b_per_c * warmer,
        one.scale_a * scale,
        one.scale_b * scale,
    )


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class FacePairs:
    """Readings of one axis in two faces, paired by depth.

    Parameters
    ----------
    depth : array, shape (n,)
        Mean of the two depths [m], rising.
    tilt : array, shape (n,)
        (a0 - a180)/2, free of the zero offset [rad].
    face_sum : array, shape (n,)
        a0 + a180 [rad]; twice the zero offset where the readings are good.
    suspect : array of bool, shape (n,)
        Face sums that stand apart from the others.
    mean, spread : float
        Of the face sums that are not suspect, and their standard deviation [rad].
    zero, u_zero : float
        Zero offset and its standard uncertainty from the spread [rad]; NaN from fewer than two good pairs.
    unpaired : int
        Readings without a partner near enough.
    """

    depth: Array
    tilt: Array
    face_sum: Array
    suspect: npt.NDArray[np.bool_]
    mean: float
    spread: float
    zero: float
    u_zero: float
    unpaired: int


def pair_faces(
    depth0: npt.ArrayLike,
    a0: npt.ArrayLike,
    depth180: npt.ArrayLike,
    a180: npt.ArrayLike,
    *,
    within: float = 0.05,
    u_tilt: float = 0.0,
) -> FacePairs:
    """Pair the readings of two faces and judge their sums.

    Parameters
    ----------
    depth0, a0 : array_like, shape (n0,)
        Depth [m] and shown tilt [rad] in the first face; NaN readings are left out.
    depth180, a180 : array_like, shape (n180,)
        The same with the instrument turned by 180°.
    within : float
        Largest difference of depth in a pair [m].
    u_tilt : float
        Standard uncertainty of one reading [rad]: sums are not called suspect for less than that explains.

    Returns
    -------
    FacePairs

    Raises
    ------
    ParameterError
        If `within` is negative, or depths and tilts differ in length.

    Notes
    -----
    A sum is suspect if it is more than 3.5 robust deviations from the median; the deviation is 1.4826 times the
    median absolute deviation, and not less than √2 `u_tilt`.
    """
    if not within >= 0.0:
        raise ParameterError("within", within, "m", "0 m or more")
    z0, first = _usable("a0", depth0, a0)
    z180, second = _usable("a180", depth180, a180)
    i, j = _nearest_pairs(z0, z180, within)
    total = first[i] + second[j]
    suspect = _stands_apart(total, np.sqrt(2.0) * u_tilt)
    good = total[~suspect]
    mean = float(good.mean()) if good.size else float("nan")
    spread = float(good.std(ddof=1)) if good.size > 1 else float("nan")
    return FacePairs(
        depth=0.5 * (z0[i] + z180[j]),
        tilt=0.5 * (first[i] - second[j]),
        face_sum=total,
        suspect=suspect,
        mean=mean,
        spread=spread,
        zero=0.5 * mean if good.size > 1 else float("nan"),
        u_zero=0.5 * spread / float(np.sqrt(max(good.size, 1))),
        unpaired=z0.size + z180.size - 2 * i.size,
    )


def _usable(name: str, depth: npt.ArrayLike, tilt: npt.ArrayLike) -> tuple[Array, Array]:
    z, a = np.asarray(depth, dtype=np.float64), np.asarray(tilt, dtype=np.float64)
    if z.ndim != 1 or z.shape != a.shape:
        raise ParameterError(name, a.shape, "", f"the shape of its depths, {z.shape}")
    good = np.isfinite(z) & np.isfinite(a)
    order = np.argsort(z[good], kind="stable")
    return z[good][order], a[good][order]


def _nearest_pairs(
    first: Array, second: Array, within: float
) -> tuple[npt.NDArray[np.intp], npt.NDArray[np.intp]]:
    """Match depths that are each other's nearest depth; both arrays rise."""
    if not first.size or not second.size:
        none = np.empty(0, dtype=np.intp)
        return none, none
    j = _nearest(second, first)
    i = np.arange(first.size)
    mutual = (_nearest(first, second)[j] == i) & (np.abs(first - second[j]) <= within)
    return i[mutual], j[mutual]


def _nearest(rising: Array, wanted: Array) -> npt.NDArray[np.intp]:
    above = np.searchsorted(rising, wanted)
    low, high = np.maximum(above - 1, 0), np.minimum(above, rising.size - 1)
    return np.where(np.abs(wanted - rising[low]) <= np.abs(rising[high] - wanted), low, high)


def _stands_apart(values: Array, floor: float) -> npt.NDArray[np.bool_]:
    if values.size < 3:
        return np.zeros(values.size, dtype=bool)
    away = np.abs(values - np.median(values))
    # A few ulp of the median's rounding are no deviation, even where all the others agree exactly.
    rounding = 8.0 * np.finfo(np.float64).eps * float(np.abs(values).max())
    limit = max(_SUSPECT * max(MAD_TO_SIGMA * float(np.median(away)), floor), rounding)
    return np.asarray(away > limit)
