"""The damped swing of a bob on a turning Earth, fitted to time-binned positions by separable least squares.

How sure the rest point is when the air is irregular is `scatter`; collecting the rows and judging the fit is `swing`.
"""

from dataclasses import dataclass

import numpy as np
import numpy.typing as npt

Array = npt.NDArray[np.float64]
Complex = npt.NDArray[np.complex128]

_STEPS = 15
_LOOK = 64  # samples in a first look at the frequency
_SETTLED = 1e-9
"""A step that lowers the sum of squares by less than this part of it ends the search: of 2000 samples, a
thousandth of the standard uncertainty."""


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class Samples:
    """Positions averaged over short stretches of time.

    Parameters
    ----------
    time : array, shape (n,)
        Mean time of each stretch, rising [s].
    spread : array, shape (n,)
        Variance of the times in it [s²].
    weight : array, shape (n,)
        Readings in it.
    value : array of complex, shape (n,)
        Mean of east + i north [m].
    """

    time: Array
    spread: Array
    weight: Array
    value: Complex

    def until(self, time: float) -> "Samples":
        """Return the part up to a time [s]."""
        return self[: int(np.searchsorted(self.time, time, side="right"))]

    def __getitem__(self, part: slice | npt.NDArray[np.bool_]) -> "Samples":
        return Samples(
            time=self.time[part], spread=self.spread[part], weight=self.weight[part], value=self.value[part]
        )

    @property
    def duration(self) -> float:
        """From the first to the last stretch [s]."""
        return float(self.time[-1] - self.time[0]) if self.time.size else 0.0


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class Fit:
    """A fitted swing ζ(t) = c + e^(-(γ + iΩ)τ) (A e^(iωτ) + B e^(-iωτ)), τ from `middle`.

    Parameters
    ----------
    middle : float
        Time that τ counts from [s].
    centre, forward, backward : complex
        c, A and B [m].
    omega, gamma : float
        ω and γ [rad/s, 1/s].
    turn : float
        Ω, the clockwise turning of the swing plane [rad/s].
    residual : array of complex, shape (n,)
        Samples less the fit [m].
    cost : float
        Weighted sum of their squares [m²].
    basis : array of complex, shape (3, n)
        Derivatives of the model by c, A and B.
    slopes : array of complex, shape (2, n)
        Derivatives by ω and γ.
    normal : array, shape (2, 2)
        Normal matrix of ω and γ, the linear parameters eliminated.
    """

    middle: float
    centre: complex
    forward: complex
    backward: complex
    omega: float
    gamma: float
    turn: float
    residual: Complex
    cost: float
    basis: Complex
    slopes: Complex
    normal: Array

    @property
    def inverse(self) -> Array:
        """Inverse of `normal`; of what can be told apart where ω and γ can not."""
        (a, b), (_, d) = self.normal
        determinant = a * d - b * b
        if determinant > 1e-12 * a * d > 0.0:
            return np.asarray(np.array([[d, -b], [-b, a]]) / determinant)
        return np.asarray(np.linalg.pinv(self.normal, hermitian=True))


class _Model:
    """The samples prepared for many trial values of ω and γ."""

    def __init__(self, samples: Samples, turn: float) -> None:
        self.samples = samples
        self.turn = turn
        self.middle = 0.5 * float(samples.time[0] + samples.time[-1])
        self.tau = samples.time - self.middle
        self.turned = np.exp(-1j * turn * self.tau)
        self.weight = samples.weight

    def basis(self, omega: float, gamma: float) -> Complex:
        """Return the three functions that the model is linear in, averaged over each stretch to second order."""
        damped = self.turned * np.exp(-gamma * self.tau)
        angle = omega * self.tau
        swung = np.empty(angle.size, dtype=np.complex128)
        swung.real, swung.imag = np.cos(angle), np.sin(angle)
        half = 0.5 * self.samples.spread
        basis = np.empty((3, angle.size), dtype=np.complex128)
        basis[0] = 1.0
        basis[1] = damped * swung * (1.0 + (-gamma - 1j * (self.turn - omega)) ** 2 * half)
        basis[2] = damped * swung.conj() * (1.0 + (-gamma - 1j * (self.turn + omega)) ** 2 * half)
        return basis

    def cost(self, omega: float) -> float:
        """Return the weighted sum of squares left by a swing without damping [m²]."""
        basis = self.basis(omega, 0.0)
        left = self.samples.value - Projection(basis, self.weight).onto(self.samples.value) @ basis
        return float(np.sum(self.weight * (left.real**2 + left.imag**2)))

    def fit(self, omega: float, gamma: float) -> Fit:
        """Solve for c, A and B, and linearise in ω and γ."""
        basis = self.basis(omega, gamma)
        solve = Projection(basis, self.weight)
        linear = solve.onto(self.samples.value)
        first, second = linear[1] * basis[1], linear[2] * basis[2]
        residual = self.samples.value - linear[0] - first - second
        slopes = np.stack([1j * self.tau * (first - second), -self.tau * (first + second)])
        free = [one - solve.onto(one) @ basis for one in slopes]
        normal = [[np.vdot(one, self.weight * other).real for other in free] for one in free]
        return Fit(
            middle=self.middle,
            centre=complex(linear[0]),
            forward=complex(linear[1]),
            backward=complex(linear[2]),
            omega=omega,
            gamma=gamma,
            turn=self.turn,
            residual=residual,
            cost=float(np.sum(self.weight * (residual.real**2 + residual.imag**2))),
            basis=basis,
            slopes=slopes,
            normal=np.array(normal),
        )


class Projection:
    """Weighted least squares onto a few complex functions, also where they can hardly be told apart.

    Parameters
    ----------
    basis : array of complex, shape (k, n)
    weight : array, shape (n,)
    """

    def __init__(self, basis: Complex, weight: Array) -> None:
        # einsum, not a matrix product: the products are thin, and a threaded library costs more than it saves.
        self.weighted = basis.conj() * weight
        gram = np.einsum("in,jn->ij", self.weighted, basis)
        self._size = np.sqrt(np.maximum(gram.diagonal().real, np.finfo(np.float64).tiny))
        gram = gram / (self._size[:, None] * self._size)
        gram[np.diag_indices(len(gram))] += 1e-14
        self._inverse = np.linalg.inv(gram) / (self._size[:, None] * self._size)

    def onto(self, values: Complex) -> Complex:
        """Return the coefficients, shape (k,), of values, shape (n,)."""
        return np.asarray(self._inverse @ np.array([np.dot(row, values) for row in self.weighted]))

    def first_row(self) -> Complex:
        """Return the weights, shape (n,), that give the first coefficient."""
        return np.asarray(self._inverse[0] @ self.weighted)


def refine(samples: Samples, turn: float, omega: float, gamma: float) -> tuple[Fit, bool]:
    """Least squares from a start value.

    Parameters
    ----------
    samples : Samples
    turn : float
        Ω [rad/s].
    omega, gamma : float
        Where to start [rad/s, 1/s]: ω within about 1/T of the truth for samples of length T.

    Returns
    -------
    fit : Fit
    settled : bool
        Whether the search ended at a minimum.

    Notes
    -----
    Gauss-Newton on ω and γ with c, A and B eliminated at every step (variable projection); steps are kept under
    half a radian over the record and halved until the sum of squares falls.

    References
    ----------
    Golub, G. H. & Pereyra, V. (1973), SIAM Journal on Numerical Analysis 10(2), 413-432.
    """
    model = _Model(samples, turn)
    longest = 1.0 / max(samples.duration, 1e-9)
    best = model.fit(omega, gamma)
    for _ in range(_STEPS):
        step, gain = _step(best, samples.weight)
        if gain <= _SETTLED * best.cost:
            return best, True
        step *= min(1.0, longest / max(float(np.abs(step).max()), 1e-300))
        better = _descend(model, best, step)
        if better is None:
            # No descent along a descent direction: the bottom, to rounding.
            return best, gain <= 1e-6 * best.cost
        best = better
    return best, False


def _descend(model: _Model, fit: Fit, step: Array) -> Fit | None:
    for _ in range(8):
        # A negative frequency is the same swing with its two circles exchanged.
        trial = model.fit(abs(fit.omega + step[0]), fit.gamma + step[1])
        if trial.cost < fit.cost:
            return trial
        step = 0.5 * step
    return None


def _step(fit: Fit, weight: Array) -> tuple[Array, float]:
    """Gauss-Newton step of (ω, γ), and the fall of the sum of squares that it promises."""
    # The residual is orthogonal to the basis, so the slopes need no projection here.
    weighted = weight * fit.residual
    right = np.array([np.vdot(one, weighted).real for one in fit.slopes])
    step = fit.inverse @ right
    return step, float(step @ right)


def scan(samples: Samples, turn: float, omegas: Array) -> tuple[float, float]:
    """Return the best of several trial values of ω without damping [rad/s], and its sum of squares [m²]."""
    model = _Model(samples, turn)
    costs = [model.cost(float(one)) for one in omegas]
    best = int(np.argmin(costs))
    return float(omegas[best]), costs[best]


def rough_omega(samples: Samples, turn: float) -> float:
    """Find ω of samples of which nothing is known.

    Parameters
    ----------
    samples : Samples
        1.5 swings or more.
    turn : float
        Ω [rad/s].

    Returns
    -------
    float
        [rad/s], of the stretch at the start that a swing explains best.

    Notes
    -----
    Stretches of 64 samples, then of twice the length joined to 64 again, and so on to the whole; each is searched
    from 1.5 to 16 swings, so that four samples or more fall into a swing.
    """
    best, explained = 2.0 * np.pi / samples.duration, 0.0
    size = _LOOK
    while True:
        n = min(size, samples.time.size)
        part = coarse(samples.until(float(samples.time[n - 1])), _LOOK)
        turns = np.arange(1.4, 0.25 * part.time.size, 0.15)
        omega, cost = scan(part, turn, 2.0 * np.pi * turns / part.duration)
        still = float(
            np.sum(part.weight * np.abs(part.value - np.average(part.value, weights=part.weight)) ** 2)
        )
        if still > 0.0 and 1.0 - cost / still > explained:
            best, explained = omega, 1.0 - cost / still
        if n == samples.time.size:
            return best
        size *= 2


def search(samples: Samples, turn: float, expected: float | None) -> tuple[Fit, bool]:
    """Least squares without a start value from an earlier fit.

    Parameters
    ----------
    samples : Samples
        1.5 swings or more.
    turn : float
        Ω [rad/s].
    expected : float or None
        ω of the free line [rad/s]; the search then looks from 0.5 to 2 times that.

    Returns
    -------
    fit : Fit
    settled : bool

    Notes
    -----
    ω is found on the first two swings, then on stretches twice as long each time, so that the start value is
    always close enough.
    """
    about = rough_omega(samples, turn) if expected is None else expected
    end = min(samples.duration, 2.0 * 2.0 * np.pi / about)
    start = samples.until(float(samples.time[0]) + end)
    omega, _ = scan(coarse(start, _LOOK), turn, about * np.geomspace(0.5, 2.0, 29))
    gamma = 0.0
    while end < samples.duration:
        fit, _ = refine(samples.until(float(samples.time[0]) + end), turn, omega, gamma)
        omega, gamma = fit.omega, fit.gamma
        end *= 2.0
    return refine(samples, turn, omega, gamma)


def coarse(samples: Samples, most: int) -> Samples:
    """Join neighbouring samples into `most` stretches of equal time or fewer."""
    starts = stretches(samples.time, most)
    weight = np.add.reduceat(samples.weight, starts)
    time = np.add.reduceat(samples.weight * samples.time, starts) / weight
    square = np.add.reduceat(
        samples.weight * (samples.spread + (samples.time - samples.time[0]) ** 2), starts
    )
    value = np.asarray(np.add.reduceat(samples.weight * samples.value, starts) / weight, dtype=np.complex128)
    spread = np.maximum(square / weight - (time - samples.time[0]) ** 2, 0.0)
    return Samples(time=time, spread=spread, weight=weight, value=value)


def stretches(time: Array, most: int) -> npt.NDArray[np.intp]:
    """Return the first index of each of `most` equal stretches of time that is not empty."""
    place = np.minimum((time - time[0]) * (most / max(float(time[-1] - time[0]), 1e-300)), most - 1).astype(
        np.intp
    )
    return np.concatenate([[0], np.flatnonzero(np.diff(place)) + 1])
