"""What tells a free swing from something else, and the reckonings on paper that stand beside the least squares.

The tracker that asks is `swing`.
"""

from math import log, nan, pi, sqrt

import numpy as np
import numpy.typing as npt

from eastfall.physics.errors import ParameterError
from eastfall.physics.pendulum import Fit, Samples

Array = npt.NDArray[np.float64]

_PRESENT = 5.0  # F of the swing against the residuals, below which no swing is seen (p about 1e-5)
_FAR_OFF = 7.0
_MOST_SPOILED = 0.1


def axes(forward: complex, backward: complex) -> tuple[float, float]:
    """Half axes of the ellipse of A e^(iωt) + B e^(-iωt); the minor one is positive anticlockwise."""
    return abs(forward) + abs(backward), abs(forward) - abs(backward)


def swing_stands_out(samples: Samples, fit: Fit) -> bool:
    """Whether a swing stands out of the residuals, by an F test against a bob at rest."""
    mean = np.average(samples.value, weights=samples.weight)
    still = float(np.sum(samples.weight * np.abs(samples.value - mean) ** 2))
    freedom = max(2.0 * samples.time.size - 8.0, 1.0)
    return (still - fit.cost) / 6.0 > _PRESENT * fit.cost / freedom


def spoiled(samples: Samples, fit: Fit) -> npt.NDArray[np.bool_]:
    """Mark samples that a spike among their readings has thrown off the fit; none where many stand apart.

    Off means seven robust standard deviations, met by chance once in 10¹⁰ samples. Where more than a tenth of the
    samples is that far off it is the model that fails, not the readings.
    """
    away = np.abs(fit.residual) * np.sqrt(samples.weight)
    # The median of the length of two normal deviates is √(2 ln 2) of their deviation.
    limit = _FAR_OFF * float(np.median(away)) / sqrt(2.0 * log(2.0))
    apart = np.asarray(
        away > max(limit, _FAR_OFF * float(np.finfo(np.float64).eps * np.abs(samples.value).max()))
    )
    return apart if apart.mean() <= _MOST_SPOILED else np.zeros_like(apart)


def is_smooth(fit: Fit) -> bool:
    """Whether the residuals go on from sample to sample as something that was left out of the model would.

    Von Neumann's ratio of the mean square step to the mean square is 2 for white noise and near 0 for a slow or
    swinging misfit.
    """
    left = fit.residual
    return float(np.mean(np.abs(np.diff(left)) ** 2)) < float(np.mean(np.abs(left) ** 2))


def harmonic(samples: Samples, fit: Fit) -> float:
    """Second and third harmonic of the residuals against the swing [1]; 0 where they do not stand out."""
    total = samples.weight.sum()
    noise = sqrt(fit.cost / total / samples.time.size)
    left = samples.weight * fit.residual
    wave = np.exp(1j * fit.omega * (samples.time - fit.middle))
    waves = (wave * wave, wave * wave * wave)
    found = max(max(abs(np.dot(left, one)), abs(np.vdot(one, left))) for one in waves) / total
    return found / max(abs(fit.forward), abs(fit.backward)) if found > 5.0 * noise else 0.0


def schuler_rest(samples: Samples, fit: Fit) -> complex:
    """Schuler mean of the turning points, each the mean of the readings within a sixteenth of a swing."""
    period = 2.0 * pi / fit.omega
    # The far ends of the ellipse are where A e^(iωτ) and B e^(-iωτ) point the same way.
    first = fit.middle + float(np.angle(fit.backward) - np.angle(fit.forward)) / (2.0 * fit.omega)
    number = np.floor((samples.time - first) / (0.5 * period) + 0.5)
    near = np.abs(samples.time - first - 0.5 * period * number) <= period / 16.0
    place = (number[near] - number[0]).astype(np.intp)
    place -= place.min(initial=0)
    weight = np.bincount(place, samples.weight[near])
    if weight.size < 3 or not weight.all():
        return complex(nan, nan)
    value = samples.value[near] * samples.weight[near]
    points = (np.bincount(place, value.real) + 1j * np.bincount(place, value.imag)) / weight
    return complex(schuler_mean(points.real), schuler_mean(points.imag))


def schuler_mean(turning_points: npt.ArrayLike) -> float:
    """Rest reading from the turning points of a damped swing, as reckoned on paper.

    Parameters
    ----------
    turning_points : array_like, shape (v,)
        Readings a1 … av at the ends of successive single swings, 3 or more, any unit; NaN gives NaN.

    Returns
    -------
    float
        [a1 + 3 a2 + 4 a3 + … + 4 a(v-2) + 3 a(v-1) + av]/[4 (v - 2)], in the same unit; the mean of the means
        (a(i-1) + 2 a(i) + a(i+1))/4, which removes a decay up to second order in its step.

    Raises
    ------
    ParameterError
        If there are fewer than three.

    References
    ----------
    Schuler's mean, as printed in gyroscope and shaft plumbing handbooks; the first author's paper was not seen.
    """
    a = np.asarray(turning_points, dtype=np.float64)
    if a.ndim != 1 or a.size < 3:
        raise ParameterError("turning_points", a.size, "", "three or more turning points")
    return float(np.mean(0.25 * (a[:-2] + 2.0 * a[1:-1] + a[2:])))


def airy_precession(
    length: npt.ArrayLike, major: npt.ArrayLike, minor: npt.ArrayLike, period: npt.ArrayLike
) -> Array:
    """Turn of a pendulum's ellipse by its own width.

    Parameters
    ----------
    length : array_like
        L [m], more than 0.
    major, minor : array_like
        Half axes a, b [m]; b positive for an anticlockwise bob.
    period : array_like
        Of a full swing [s].

    Returns
    -------
    array
        (3/8) ω ab/L² [rad/s], in the bob's own sense: anticlockwise positive.

    Raises
    ------
    ParameterError
        If the length is not positive.

    References
    ----------
    Airy, G. B. (1851), Monthly Notices of the Royal Astronomical Society 11, 160 (from memory, unconfirmed).
    """
    L = np.asarray(length, dtype=np.float64)
    if np.any(L <= 0.0):
        raise ParameterError("length", length, "m", "more than 0 m")
    omega = 2.0 * pi / np.asarray(period, dtype=np.float64)
    rate: Array = 0.375 * omega * np.asarray(major, np.float64) * np.asarray(minor, np.float64) / L**2
    return rate
