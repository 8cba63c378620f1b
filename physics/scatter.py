"""The covariance of a fitted rest point when what is left over is not white: irregular air has a memory.

The fit itself is `pendulum`.
"""

from dataclasses import dataclass

import numpy as np
import numpy.typing as npt

from eastfall.physics.pendulum import Fit, Projection, Samples, stretches

Array = npt.NDArray[np.float64]

_SHORT = 4.0  # swings
_STRETCHES = (40, 24)
"""Of a short record, where every bit of evidence counts, and of a longer one."""
_SHARES = np.array([0.3, 0.7, 0.95, 0.995])
_MEMORIES = 5
_COLOURED = 0.03
"""Odds of a memory before the residuals are seen: high enough to be found, low enough not to widen white noise."""


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class Scatter:
    """What the residuals say about the rest point.

    Parameters
    ----------
    covariance : array, shape (2, 2)
        Of the rest point, east first [m²].
    colour : float
        Probability that more than a fifth of the residuals' variance has a memory, 0 to 1.
    widening : float
        Standard uncertainty over that for white residuals of the same size.
    """

    covariance: Array
    colour: float
    widening: float


def rest_point_scatter(samples: Samples, fit: Fit) -> Scatter:
    """Covariance of the fitted rest point under noise with a memory.

    Parameters
    ----------
    samples : Samples
    fit : Fit
        Of those samples by least squares.

    Returns
    -------
    Scatter

    Notes
    -----
    The residuals are averaged over 24 equal stretches, 40 for less than four swings. Their covariance is taken as
    s² [(1 - r) I + r e^(-|Δt|/τ)], the part r of the variance having a memory τ of one stretch to the whole record.
    Every pair (r, τ) of a grid is weighed by its restricted likelihood, which allows for what the fit has absorbed;
    s² is found for east and north apart. The covariance is the weighted mean of those of the least-squares estimate
    under each pair.

    References
    ----------
    Patterson, H. D. & Thompson, R. (1971), Biometrika 58(3), 545-554 (restricted likelihood).
    """
    swings = samples.duration * fit.omega / (2.0 * np.pi)
    starts = stretches(samples.time, _STRETCHES[0] if swings < _SHORT else _STRETCHES[1])
    weight = np.add.reduceat(samples.weight, starts)
    time = np.add.reduceat(samples.weight * samples.time, starts) / weight
    residual = np.add.reduceat(samples.weight * fit.residual, starts) / weight
    design = _design(samples, fit, starts, weight)
    shares, kernels = _kernels(time, weight)
    scores, scale = _restricted(kernels, design, np.concatenate([residual.real, residual.imag]))
    prior = np.where(shares == 0.0, 1.0, _COLOURED / (kernels.shape[0] - 1))
    chance = prior * np.exp(scores - scores.max())
    chance /= chance.sum()
    variances = _propagated(samples, fit, starts, weight, kernels, scale)
    covariance = np.einsum("g,gij->ij", chance, variances)
    white = variances[0]
    return Scatter(
        covariance=covariance,
        colour=float(chance[shares > 0.2].sum()),
        widening=float(
            np.sqrt(np.trace(covariance) / max(float(np.trace(white)), np.finfo(np.float64).tiny))
        ),
    )


def _design(samples: Samples, fit: Fit, starts: npt.NDArray[np.intp], weight: Array) -> Array:
    """Orthonormal real design of the averaged samples, shape (2, stretches, parameters): east, then north rows."""
    mean = np.add.reduceat(samples.weight * np.concatenate([fit.basis, fit.slopes]), starts, axis=1) / weight
    both = np.concatenate([mean, 1j * mean[: len(fit.basis)]])
    real = np.concatenate([both.real, both.imag], axis=1).T
    size = np.sqrt(np.sum(real**2, axis=0))
    unit = np.linalg.qr(real[:, size > 0.0] / size[size > 0.0])[0]
    return np.asarray(unit.reshape(2, weight.size, -1))


def _kernels(time: Array, weight: Array) -> tuple[Array, Array]:
    """Share with a memory and correlation matrix of every trial; the first is white."""
    apart = np.abs(time[:, None] - time)
    span = float(time[-1] - time[0])
    memories = np.geomspace(span / weight.size, span, _MEMORIES)
    remembered = np.exp(-apart / memories[:, None, None])
    white = np.diag(weight.mean() / weight)
    shares = np.concatenate([[0.0], np.repeat(_SHARES, _MEMORIES)])[:, None, None]
    grid = np.concatenate([remembered[:1], np.tile(remembered, (_SHARES.size, 1, 1))])
    return shares[:, 0, 0], (1.0 - shares) * white + shares * grid


def _restricted(kernels: Array, design: Array, residual: Array) -> tuple[Array, Array]:
    """Restricted log likelihood of each trial, and the variance s² of east and north under it."""
    rows, parameters = design.shape[1:]
    freedom = 2 * rows - parameters
    inverse = np.linalg.inv(kernels)
    columns = np.concatenate([design, residual.reshape(2, rows, 1)], axis=2)
    inner = sum(columns[axis].T @ (inverse @ columns[axis]) for axis in (0, 1))
    inner = np.asarray(inner)
    gram, right = inner[:, :-1, :-1], inner[:, :-1, -1]
    found = np.linalg.solve(gram, right[..., None])
    left = residual.reshape(2, rows) - np.moveaxis((design @ found[:, None])[..., 0], 0, 1).swapaxes(0, 1)
    squares = np.sum((left @ inverse) * left, axis=2)
    total = np.maximum(squares.sum(axis=1), np.finfo(np.float64).tiny)
    scores = -np.linalg.slogdet(kernels)[1] - 0.5 * np.linalg.slogdet(gram)[1] - 0.5 * freedom * np.log(total)
    # Two degrees fewer: the mean of the scaled inverse chi-square, the spread of s² being unknown itself.
    return scores, squares / max(0.5 * freedom - 1.0, 1.0)


def _propagated(
    samples: Samples,
    fit: Fit,
    starts: npt.NDArray[np.intp],
    weight: Array,
    kernels: Array,
    scale: Array,
) -> Array:
    """Covariance of the rest point under each trial, shape (trials, 2, 2)."""
    fine = centre_response(samples, fit)
    summed = np.add.reduceat(fine, starts, axis=2)
    # Within a stretch the response is not quite flat, which white noise does notice.
    lost = np.sum(fine**2 / samples.weight) / np.sum(summed**2 / weight)
    each = [summed[:, axis] @ kernels @ summed[:, axis].T for axis in (0, 1)]
    return np.asarray(lost * (scale[:, 0, None, None] * each[0] + scale[:, 1, None, None] * each[1]))


def centre_response(samples: Samples, fit: Fit) -> Array:
    """How the fitted rest point follows an error in each sample.

    Parameters
    ----------
    samples : Samples
    fit : Fit

    Returns
    -------
    array, shape (2, 2, n)
        Rest point east, north by error east, north of each sample [m/m], to first order.
    """
    solve = Projection(fit.basis, samples.weight)
    direct = solve.first_row()
    response = np.array([[direct.real, -direct.imag], [direct.imag, direct.real]])
    if len(fit.slopes):
        free = np.array([one - solve.onto(one) @ fit.basis for one in fit.slopes])
        moved = fit.inverse @ (free * samples.weight)
        # What ω and γ take up, the real inner product with the complex error.
        pulled = np.array([np.dot(direct, one) for one in fit.slopes])
        response[0] -= np.stack([pulled.real @ moved.real, pulled.real @ moved.imag])
        response[1] -= np.stack([pulled.imag @ moved.real, pulled.imag @ moved.imag])
    return response
