"""Integration matrices on Gauss-Legendre nodes."""

from itertools import pairwise

import numpy as np
import pytest
from numpy.polynomial import Polynomial, chebyshev

from eastfall.physics.collocation import gauss_rule


@pytest.mark.invariant
@pytest.mark.parametrize("count", [2, 5, 12, 20, 28])
def test_rule_integrates_polynomials_exactly(count: int) -> None:
    """Polynomials of degree n - 1 are integrated to every node, into a series and, to 2n - 1, over the whole."""
    rule = gauss_rule(count)
    rng = np.random.default_rng(count)
    inner = Polynomial(rng.standard_normal(count))
    exact = inner.integ(lbnd=-1.0)
    assert rule.to_nodes @ inner(rule.nodes) == pytest.approx(exact(rule.nodes), abs=1e-12)
    series = rule.to_series @ inner(rule.nodes)
    points = np.linspace(-1.0, 1.0, 41)
    assert chebyshev.chebval(points, series) == pytest.approx(exact(points), abs=1e-12)
    highest = Polynomial(rng.standard_normal(2 * count))
    assert rule.weights @ highest(rule.nodes) == pytest.approx(highest.integ(lbnd=-1.0)(1.0), abs=1e-12)


@pytest.mark.invariant
def test_error_falls_geometrically_with_the_nodes() -> None:
    """Each further node shrinks the error of a smooth integral by more than ten, down to rounding."""
    errors = [
        abs(float(gauss_rule(count).weights @ np.exp(gauss_rule(count).nodes)) - 2.0 * np.sinh(1.0))
        for count in (2, 3, 4, 5, 6)
    ]
    assert all(after < 0.1 * before for before, after in pairwise(errors))
