"""How sure a rest point is under air with a memory: against restricted likelihood written with whole matrices."""

from math import pi, sqrt

import numpy as np
import pytest

from eastfall.physics.pendulum import Samples, refine
from eastfall.physics.scatter import centre_response, rest_point_scatter

TURN = 6.1e-5
PERIOD = 50.0
OMEGA = 2.0 * pi / PERIOD
SHARES, MEMORIES, ODDS = (0.3, 0.7, 0.95, 0.995), 5, 0.03  # as the docstrings say


def readings(swings, memory, seed):
    """Give samples of a swing with unequal weights, under noise of which 60 % has a memory [s]."""
    rng = np.random.default_rng(seed)
    time = np.arange(0.0, swings * PERIOD, 0.5)
    weight = rng.integers(1, 5, time.size).astype(float)
    noise = sqrt(0.4) * rng.normal(size=(2, time.size)) / np.sqrt(weight)
    keep = np.exp(-0.5 / memory)
    walked = rng.normal(size=(2, time.size))
    for at in range(1, time.size):
        walked[:, at] = keep * walked[:, at - 1] + sqrt(1.0 - keep**2) * walked[:, at]
    noise = 3e-4 * (noise + sqrt(0.6) * walked)
    plane = (0.03 + 0.01j) * np.exp(1j * OMEGA * time) + (0.02j - 0.008) * np.exp(-1j * OMEGA * time)
    value = 0.012 - 0.007j + np.exp(-(2.5e-4 + 1j * TURN) * time) * plane + noise[0] + 1j * noise[1]
    samples = Samples(time=time, spread=np.zeros(time.size), weight=weight, value=value)
    return samples, refine(samples, TURN, OMEGA, 0.0)[0]


def averaged(samples, count):
    """Give a matrix that averages samples over equal stretches of time, by weight, and the weight of each."""
    span = samples.time[-1] - samples.time[0]
    place = np.minimum(((samples.time - samples.time[0]) / span * count).astype(int), count - 1)
    rows = [place == one for one in np.unique(place)]
    weight = np.array([samples.weight[one].sum() for one in rows])
    return np.array([samples.weight * one for one in rows]) / weight[:, None], weight


def jacobian(samples, fit):
    """Give derivatives of east, then north, of every sample by the eight numbers of a swing; by differences."""

    def model(p):
        tau = samples.time - fit.middle
        turning = np.exp(-(p[3] + 1j * TURN) * tau)
        plane = (p[4] + 1j * p[5]) * np.exp(1j * p[2] * tau) + (p[6] + 1j * p[7]) * np.exp(-1j * p[2] * tau)
        return p[0] + 1j * p[1] + turning * plane

    at = np.array([fit.centre, fit.forward, fit.backward]).view(float)
    start, columns = np.array([at[0], at[1], fit.omega, fit.gamma, *at[2:]]), []
    for row, size in enumerate([1e-3, 1e-3, 1e-6, 1e-6, 1e-3, 1e-3, 1e-3, 1e-3]):
        step = np.zeros(8)
        step[row] = size
        change = (model(start + step) - model(start - step)) / (2.0 * size)
        columns.append(np.concatenate([change.real, change.imag]))
    return np.array(columns).T


def followed(samples, fit):
    """Give how the centre follows each sample's east, then north, shape (2, 2n): rows of (JᵀWJ)⁻¹JᵀW."""
    columns, weight = jacobian(samples, fit), np.tile(samples.weight, 2)
    size = np.linalg.norm(columns, axis=0)
    columns = columns / size
    inverse = np.linalg.inv(columns.T @ (weight[:, None] * columns))
    return ((inverse @ columns.T * weight) / size[:, None])[:2]


@pytest.mark.independent
def test_the_rest_point_follows_an_error_as_the_normal_equations_of_all_eight_numbers_say():
    """The response with ω and γ free, to what differences leave."""
    samples, fit = readings(2.5, 20.0, 1)
    whole = followed(samples, fit).reshape(2, 2, -1)
    np.testing.assert_allclose(centre_response(samples, fit), whole, atol=1e-7 * np.abs(whole).max())


@pytest.mark.independent
@pytest.mark.parametrize(
    ("swings", "memory", "count"), [(2.5, 20.0, 40), (3.95, 8.0, 40), (4.1, 8.0, 24), (6.0, 60.0, 24)]
)
def test_covariance_colour_and_widening_are_those_of_restricted_likelihood_with_whole_matrices(
    swings, memory, count
):
    """Patterson & Thompson (1971): ln L = -½ [ln|V| + ln|X'V⁻¹X| + (n - p) ln y'Py], V for both axes together.

    P = V⁻¹ - V⁻¹X(X'V⁻¹X)⁻¹X'V⁻¹. Stretches, trials and odds are those the docstrings state.
    """
    samples, fit = readings(swings, memory, 2)
    mean, weight = averaged(samples, count)
    both = np.kron(np.eye(2), mean)
    design = both @ jacobian(samples, fit)
    design /= np.linalg.norm(design, axis=0)
    left = both @ np.concatenate([fit.residual.real, fit.residual.imag])
    time, rows = mean @ samples.time, weight.size
    span = time[-1] - time[0]
    trials = [(0.0, span)] + [
        (share, span * (1.0 / rows) ** (1.0 - at / (MEMORIES - 1.0)))
        for share in SHARES
        for at in range(MEMORIES)
    ]
    fine = followed(samples, fit)
    summed = np.array([[one[place > 0.0].sum() for place in both] for one in fine])
    # Within a stretch the response is not flat: white noise of the samples sees all of it.
    lost = np.sum(fine**2 / np.tile(samples.weight, 2)) / np.sum(summed**2 / np.tile(weight, 2))
    scores, covariances, freedom = [], [], 2 * rows - 8
    for share, tau in trials:
        one = share * np.exp(-np.abs(time[:, None] - time) / tau) + (1.0 - share) * np.diag(
            weight.mean() / weight
        )
        inverse = np.linalg.inv(np.kron(np.eye(2), one))
        normal = design.T @ inverse @ design
        free = left - design @ np.linalg.solve(normal, design.T @ inverse @ left)
        squares = np.array(
            [free[:rows] @ np.linalg.inv(one) @ free[:rows], free[rows:] @ np.linalg.inv(one) @ free[rows:]]
        )
        logs = 2.0 * np.linalg.slogdet(one)[1] + np.linalg.slogdet(normal)[1]
        scores.append(-0.5 * (logs + freedom * np.log(squares.sum())))
        size = squares / (0.5 * freedom - 1.0)
        spread = np.kron(np.diag(size), one)
        covariances.append(lost * summed @ spread @ summed.T)
    odds = np.array([1.0] + [ODDS / (len(trials) - 1)] * (len(trials) - 1))
    chance = odds * np.exp(np.array(scores) - max(scores))
    chance /= chance.sum()
    wanted = np.einsum("g,gij->ij", chance, covariances)
    found = rest_point_scatter(samples, fit)
    np.testing.assert_allclose(found.covariance, wanted, rtol=1e-6, atol=1e-6 * wanted[0, 0])
    assert found.colour == pytest.approx(chance[1:].sum(), abs=1e-7)
    assert found.widening == pytest.approx(sqrt(np.trace(wanted) / np.trace(covariances[0])), rel=1e-6)
