"""Where things are in the shaft, the gap to its wall, contact of a falling body, best release."""

import numpy as np
import pytest

from eastfall.physics.air import air_column
from eastfall.physics.errors import ParameterError
from eastfall.physics.fall import Release, fall
from eastfall.physics.field import local_field
from eastfall.physics.settings import Air, Body, Shaft, Site
from eastfall.physics.wall import best_release, gap, place, smallest_circle, wall_contact

FIELD = local_field(Site(latitude=np.radians(50.9)))
AIR = air_column(Air(), FIELD)
BODY = Body(mass=0.514, diameter=0.05)


def test_a_guide_is_where_its_residual_is_and_anything_else_where_it_was_measured() -> None:
    """A sum of 12 mm of which a plumb guide shows 5: the guide is 7 mm off; a bob or a mark of 12 mm is at 12 mm."""
    measured, expected = np.array([0.012]), np.array([0.005])
    assert place("guided", measured, expected) == pytest.approx(0.007, abs=1e-17)
    assert place("hung", measured, expected) == place("drop", measured, expected) == 0.012


def test_the_gap_is_counted_from_the_surface_of_the_body_to_the_wall_on_its_side() -> None:
    """6 m, centre 0.3 m east and 0.4 m north: a point at the reference has 2.5 m, a body of 50 mm half of that less."""
    shaft = Shaft(depth=100.0, diameter=6.0, centre_east=0.3, centre_north=0.4)
    assert gap(shaft, 0.0, 0.0) == pytest.approx(2.5, abs=1e-15)
    assert gap(shaft, [0.0, 0.3], [0.0, 3.9], 0.05) == pytest.approx([2.475, -0.525], abs=1e-15)
    assert np.isnan(gap(Shaft(depth=100.0), 0.0, 0.0))
    with pytest.raises(ParameterError, match=r"body_diameter is -0\.1 m; expected 0 m or more"):
        gap(shaft, 0.0, 0.0, -0.1)


@pytest.mark.invariant
@pytest.mark.parametrize("body_diameter", [0.0, 0.05])
def test_body_touches_the_wall_where_its_offset_uses_up_the_room(body_diameter: float) -> None:
    """At the contact depth centre distance plus radius is the shaft's radius, and less everywhere above."""
    path = fall(FIELD, to_depth=900.0)
    shaft = Shaft(depth=900.0, diameter=0.5, centre_east=0.02, centre_north=-0.01)
    depth = wall_contact(path, shaft, body_diameter)
    assert depth is not None
    there = path.at(depth)
    reach = np.hypot(there.east - 0.02, there.north + 0.01) + 0.5 * body_diameter
    assert float(reach) == pytest.approx(0.25, abs=1e-9)
    above = path.at(np.linspace(0.0, depth - 1e-3, 500))
    assert np.all(np.hypot(above.east - 0.02, above.north + 0.01) + 0.5 * body_diameter < 0.25)


@pytest.mark.invariant
def test_no_contact_is_told_from_contact_at_the_release() -> None:
    """None for a wide, an unknown and a too short shaft; 0 for a release inside the wall."""
    path = fall(FIELD, to_depth=900.0)
    assert wall_contact(path, Shaft(depth=900.0, diameter=6.0)) is None
    assert wall_contact(path, Shaft(depth=900.0)) is None
    assert wall_contact(path, Shaft(depth=100.0, diameter=0.5)) is None
    assert wall_contact(path, Shaft(depth=900.0, diameter=0.5, centre_east=1.0)) == 0.0
    with pytest.raises(ParameterError, match=r"body_diameter is -0\.1 m; expected 0 m or more"):
        wall_contact(path, Shaft(depth=900.0, diameter=0.5), -0.1)


@pytest.mark.invariant
def test_best_release_keeps_the_promised_clearance() -> None:
    """Dropped from there the least gap is the stated one, and 5 mm to any side it is smaller."""
    shaft = Shaft(depth=900.0, diameter=1.0, centre_east=0.1, centre_north=0.05)
    best = best_release(fall(FIELD, to_depth=900.0, body=BODY, air=AIR), shaft, BODY.diameter)

    def least_gap(east: float, north: float) -> float:
        release = Release(east=east, north=north)
        path = fall(FIELD, to_depth=900.0, body=BODY, air=AIR, release=release).at(
            np.linspace(0.0, 900.0, 400)
        )
        return float(np.min(0.475 - np.hypot(path.east - 0.1, path.north - 0.05)))

    # Verticals converge: 0.2 mm per metre of shift in a kilometre.
    assert least_gap(best.east, best.north) == pytest.approx(best.clearance, abs=1e-4)
    for east, north in ((0.005, 0.0), (-0.005, 0.0), (0.0, 0.005), (0.0, -0.005)):
        assert least_gap(best.east + east, best.north + north) < best.clearance - 1e-6
    assert best.east < shaft.centre_east
    assert best.depth in (0.0, 900.0)
    with pytest.raises(ParameterError, match="the diameter of the shaft"):
        best_release(fall(FIELD, to_depth=100.0), Shaft(depth=100.0))


@pytest.mark.independent
def test_smallest_circle_agrees_with_a_direct_search() -> None:
    """For random points the radius is that of scipy's minimisation of the largest distance, to 1e-6."""
    from scipy.optimize import minimize

    rng = np.random.default_rng(9)
    for points in (
        rng.normal(size=(40, 2)),
        rng.uniform(size=(7, 2)),
        np.array([[0.0, 0.0], [1.0, 0.0], [0.2, 0.1]]),
    ):
        centre, radius = smallest_circle(points)
        found = minimize(
            lambda at, points=points: np.hypot(*(points - at).T).max(),
            points.mean(axis=0),
            method="Nelder-Mead",
            options={"xatol": 1e-10, "fatol": 1e-12, "maxiter": 4000},
        )
        assert radius == pytest.approx(found.fun, rel=1e-6)
        assert radius <= found.fun * (1.0 + 1e-9)
        assert np.all(np.hypot(*(points - centre).T) <= radius * (1.0 + 1e-9))


@pytest.mark.invariant
def test_smallest_circle_of_points_in_a_line_spans_them() -> None:
    """Points in a line, repeated ones and a single one are no special case for the caller."""
    centre, radius = smallest_circle(np.array([[0.0, 0.0], [1.0, 1.0], [3.0, 3.0], [3.0, 3.0]]))
    assert centre == pytest.approx([1.5, 1.5])
    assert radius == pytest.approx(1.5 * np.sqrt(2.0))
    assert smallest_circle(np.array([[2.0, 1.0]]))[1] == 0.0
