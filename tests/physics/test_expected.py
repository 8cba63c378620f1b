"""The expected curve: against hand formulas, its own models, and perturbation by another road."""

from dataclasses import replace
from math import cos, radians, sin

import numpy as np
import pytest

from eastfall.physics.errors import ParameterError
from eastfall.physics.expected import expected_curve
from eastfall.physics.models import Models, reach
from eastfall.physics.settings import Air, Body, Guide, Line, Run, Site

OMEGA = 7.292115e-5  # GRS80, Moritz (1980)
DEPTHS = np.array([0.0, 3.7, 50.0, 123.4, 299.0, 300.0])


@pytest.mark.published
def test_a_probe_at_ten_metres_a_second_at_sixty_degrees_seems_to_lean_west_by_74_mm_per_km(shaft):
    """ε = 2ωv cos φ/g: 74 µrad at 10 m/s and 60°, so 74 mm west at 1000 m going down and 149 mm between the passes.

    The formula is the Coriolis acceleration over gravity (any mechanics text); the numbers are a calculation.
    """
    curve = expected_curve(shaft(latitude=60.0, depth=1000.0))
    down = curve.expected([1000.0], 10.0)[0, 0]
    up = curve.expected([1000.0], -10.0)[0, 0]
    assert down * 1e3 == pytest.approx(-74.3, abs=0.05)
    assert (up - down) * 1e3 == pytest.approx(148.6, abs=0.1)


def test_a_plumb_guide_shows_the_curved_vertical_with_the_opposite_sign(shaft):
    """Tilt is summed from the field line: at 1 km and 45° a plumb guide shows -½κz², 0.415 mm toward the equator.

    κ = 0.1713"/km from GRS80 (calculation; Heiskanen & Moritz print -0.17"/km, from memory).
    """
    curve = expected_curve(shaft(latitude=45.0, depth=1000.0))
    east, north = curve.expected([1000.0])[:, 0]
    assert north * 1e3 == pytest.approx(-0.415, abs=0.001)
    assert east == 0.0


@pytest.mark.parametrize("hemisphere", [1.0, -1.0])
def test_the_reference_lines_convert_into_each_other_exactly(shaft, hemisphere):
    """Against the field line a bob and a body are where they are against the straight vertical, less the field line."""
    base = shaft("hung", latitude=hemisphere * 57.3)
    curves = {
        name: expected_curve(replace(base, run=Run(kind="hung", reference=name)))
        for name in ("straight", "field-line", "hung-line")
    }
    straight = curves["straight"]
    for name in ("field-line", "hung-line"):
        other = curves[name]
        for table in ("bob", "body", "field_line"):
            moved = getattr(straight, table) - other.reference
            np.testing.assert_allclose(getattr(other, table), moved, atol=1e-15)
    assert np.all(curves["hung-line"].plumb == 0.0)
    assert np.all(curves["field-line"].field_line == 0.0)


@pytest.mark.parametrize("kind", ["guided", "hung", "drop"])
def test_interpolation_is_within_a_micrometre_of_the_models_to_four_kilometres(shaft, kind):
    """Looking a depth up in the table gives what the models give there, to 1 µm."""
    base = shaft(kind, depth=4000.0)
    curve, models = expected_curve(base), Models.of(base)
    depth = np.concatenate([np.linspace(0.0, 3.0, 301), np.linspace(3.0, 4000.0, 1777)])
    there = models.body(4000.0).at(depth)
    body = np.stack([there.east, there.north])
    plumb = body - models.reference(depth) if kind == "drop" else models.stated(depth)
    np.testing.assert_allclose(curve.look_up(curve.plumb, depth), plumb, atol=1e-6)
    np.testing.assert_allclose(curve.look_up(curve.body, depth), body, atol=1e-6)
    np.testing.assert_allclose(curve.look_up(curve.bob, depth), models.bob(depth), atol=1e-6)


@pytest.mark.independent
def test_the_fall_in_vacuum_keeps_to_the_first_order_formula_within_its_own_error(shaft):
    """Vacuum, 300 m: E = ⅓ω cos φ √(8h³/g) to a few parts in 1e5, the size of the terms it leaves out."""
    curve = expected_curve(shaft("drop", body=None))
    depth = np.array([50.0, 150.0, 300.0])
    formula = OMEGA * cos(radians(57.3)) * np.sqrt(8.0 * depth**3 / 9.8167) / 3.0
    np.testing.assert_allclose(curve.look_up(curve.body, depth)[0], formula, rtol=5e-5)


def test_a_light_wire_in_vacuum_hangs_at_kappa_l_squared(shaft):
    """A weightless wire without air: κL² toward the pole, κ from the field at the collar."""
    base = shaft("hung", latitude=-33.0, line=Line(), air=Air(density=0.0))
    curve, field = expected_curve(base), Models.of(base).field
    np.testing.assert_allclose(
        curve.look_up(curve.plumb, DEPTHS)[1], field.curvature * DEPTHS**2, rtol=2e-4, atol=1e-9
    )
    assert field.curvature < 0.0, "in the southern hemisphere the vertical bends south"


def test_nothing_is_extrapolated(shaft):
    """Below the table and well above the collar there is no answer; a little above it is the collar."""
    base = shaft()
    curve = expected_curve(base)
    found = curve.look_up(curve.plumb, [-5.0, -0.5, reach(base) + 0.1])
    assert np.isnan(found[:, 0]).all()
    assert (found[:, 1] == 0.0).all()
    assert np.isnan(found[:, 2]).all()


FLOWS = ((20.0, 90.0, 0.5, radians(70.0)), (200.0, 260.0, 0.3, radians(200.0)))


def with_one_input_moved(base, gravity):
    """Give the assumptions of an own prediction for each input, moved by its standard uncertainty; gravity as it is."""
    site, body, air, line = base.site, base.body, base.air, base.line
    stronger = 1.0 + air.u_cross_flow_fraction
    return {
        "latitude": replace(base, site=replace(site, latitude=site.latitude + site.u_latitude)),
        "gravity": replace(base, site=replace(site, gravity=gravity + site.u_gravity)),
        "elevation": replace(base, site=replace(site, elevation=site.elevation + site.u_elevation)),
        "rock density": replace(
            base, site=replace(site, rock_density=((0.0, 2670.0 + site.u_rock_density),))
        ),
        "air density": replace(base, air=replace(air, density=air.density + air.u_density)),
        "air moving in the shaft": replace(base, air=replace(air, vertical=air.vertical + air.u_vertical)),
        "cross-flow": replace(
            base, air=replace(air, cross_flow=tuple((a, b, v * stronger, to) for a, b, v, to in FLOWS))
        ),
        "bob mass": replace(base, line=replace(line, bob_mass=line.bob_mass + line.u_bob_mass)),
        "release speed east": replace(base, body=replace(body, release_speed_east=body.u_release_speed)),
        "release speed north": replace(base, body=replace(body, release_speed_north=body.u_release_speed)),
        "release point east": replace(base, body=replace(body, release_east=body.u_release)),
        "release point north": replace(base, body=replace(body, release_north=body.u_release)),
        "drag": replace(
            base, body=replace(body, drag_coefficient=body.drag_coefficient * (1.0 + body.u_drag_fraction))
        ),
    }


@pytest.mark.independent
@pytest.mark.parametrize("reference", ["straight", "field-line", "hung-line"])
@pytest.mark.parametrize("kind", ["guided", "hung", "drop"])
def test_each_part_of_a_budget_is_what_a_whole_new_prediction_moves_by(shaft, kind, reference):
    """Every input moved by its uncertainty in the site itself: the stated part is the step of what is expected.

    In windy air with the line at its stated speed; inputs that move nothing are not in the budget.
    """
    base = shaft(
        kind,
        site=Site(latitude=radians(57.3), elevation=210.0, u_elevation=400.0),
        body=Body(mass=0.514, diameter=0.05, drag_coefficient=0.45),
        line=Line(mass_per_length=0.006165, line_speed=1.5, u_bob_mass=0.5),
        guide=Guide(line_speed=10.0),
        air=Air(temperature=281.15, cross_flow=FLOWS, u_vertical=0.5),
        run=Run(kind=kind, reference=reference),
    )
    curve, depth, speed = expected_curve(base), [240.0, 300.0], base.line_speed
    parts = dict(zip(curve.budget.names, curve.budget.at(depth), strict=True))
    for name, changed in with_one_input_moved(base, curve.models.field.gravity).items():
        step = expected_curve(changed).expected(depth, speed) - curve.expected(depth, speed)
        # Between the 65 depths of the budget, and for a body to second order in the step.
        np.testing.assert_allclose(
            parts.get(name, np.zeros((2, 2))), step, rtol=0.01, atol=2e-8, err_msg=name
        )


@pytest.mark.parametrize(("latitude", "moved"), [(90.0, 88.0), (89.0, 87.0), (87.0, 89.0), (-89.0, -87.0)])
def test_a_latitude_that_could_lie_beyond_the_pole_is_moved_toward_the_equator(shaft, latitude, moved):
    """Known to 2°, at 90° and 89° it is moved to 88° and 87°: there is no latitude beyond the pole."""
    base = shaft("hung", depth=1000.0, line=Line(line_speed=1.0))
    site = replace(base.site, latitude=radians(latitude), u_latitude=radians(2.0))
    budget = expected_curve(replace(base, site=site)).budget
    found = budget.at([1000.0])[budget.names.index("latitude"), :, 0]
    here, there = (
        expected_curve(replace(base, site=replace(site, latitude=radians(one)))).expected([1000.0], 1.0)[:, 0]
        for one in (latitude, moved)
    )
    # Between the 65 depths of the budget a parabola is read along its chord.
    np.testing.assert_allclose(found, there - here, rtol=1e-3, atol=1e-12)


def test_the_bottom_of_any_shaft_is_in_the_table_and_what_lies_below_it_is_no_matter(shaft):
    """3 m or 4 km: there is an answer at the stated depth. Air that blows below it swamps nothing."""
    for depth in (3.0, 90.0, 4000.0):
        assert np.isfinite(expected_curve(shaft("hung", depth=depth)).expected([depth], 1.0)).all()
    below = Air(cross_flow=((100.5, 104.0, 5.0, 0.0),))
    assert expected_curve(shaft("hung", depth=100.0, air=below)).warnings == ()
    assert expected_curve(shaft("hung", depth=103.0, air=below)).warnings != ()


def test_the_lean_of_the_moving_line_is_in_the_budget_of_a_guided_run(shaft):
    """2 m/s over 1000 m at 57.3°, latitude known to 1°: d/dφ of 2ωv cos φ·z/g is 0.44 mm."""
    base = shaft(depth=1000.0, guide=Guide(line_speed=2.0))
    base = replace(base, site=replace(base.site, u_latitude=radians(1.0)))
    budget = expected_curve(base).budget
    part = budget.at([1000.0])[budget.names.index("latitude"), 0, 0]
    formula = 2.0 * OMEGA * 2.0 * sin(radians(57.3)) * 1000.0 / 9.8167 * radians(1.0)
    assert part == pytest.approx(formula, rel=0.02)
    assert part * 1e3 == pytest.approx(0.44, abs=0.01)


def test_unknown_bending_of_the_vertical_is_in_every_kind(shaft):
    """1" over 300 m moves a guided sum by ½·1"·300 m = 0.727 mm, and a light wire's bob by twice that."""
    guided = expected_curve(shaft())
    hung = expected_curve(shaft("hung", line=Line(), air=Air(density=0.0)))
    names = guided.budget.names
    part = guided.budget.at([300.0])[names.index("vertical bent east"), 0, 0]
    bob = hung.budget.at([300.0])[hung.budget.names.index("vertical bent east"), 0, 0]
    assert abs(part) == pytest.approx(0.5 * 300.0 * radians(1 / 3600), rel=1e-3)
    assert bob == pytest.approx(300.0 * radians(1 / 3600), rel=1e-3)


def test_measured_deflections_replace_the_normal_curvature(shaft):
    """A vertical that turns 5" north and 3" west over 300 m bends the field line by half of that times the depth."""
    arcsecond = radians(1 / 3600)
    site = Site(latitude=radians(57.3), deflections=((0.0, 0.0, 0.0), (300.0, 5 * arcsecond, -3 * arcsecond)))
    curve = expected_curve(shaft(site=site))
    east, north = curve.look_up(curve.field_line, [300.0])[:, 0]
    # A nanometre is what the table's linear interpolation leaves of a parabola here.
    assert north == pytest.approx(0.5 * 300.0 * 5 * arcsecond, abs=1e-9)
    assert east == pytest.approx(-0.5 * 300.0 * 3 * arcsecond, abs=1e-9)


def test_a_narrow_shaft_is_met_by_a_falling_body_where_the_room_is_used_up(shaft):
    """In a shaft with 20 mm of room the body touches where it has gone 20 mm east, and not below the bottom."""
    base = shaft("drop", depth=300.0)
    narrow = replace(base, shaft=replace(base.shaft, diameter=0.05 + 0.04))
    curve = expected_curve(narrow)
    assert curve.wall_contact_depth is not None
    east, north = curve.look_up(curve.body, [curve.wall_contact_depth])[:, 0]
    assert np.hypot(east, north) == pytest.approx(0.020, abs=1e-6)
    assert expected_curve(base).wall_contact_depth is None


def test_air_that_swamps_the_rest_is_pointed_out_for_a_hung_line_only(shaft):
    """1 m/s across 20 m of a wire moves its bob more than the curved vertical does: said, with what is usually done."""
    air = Air(cross_flow=((100.0, 120.0, 1.0, 0.0),))
    assert any("stop the fan" in one for one in expected_curve(shaft("hung", air=air)).warnings)
    assert expected_curve(shaft("hung")).warnings == ()
    assert expected_curve(shaft("guided", air=air)).warnings == ()


@pytest.mark.invariant
def test_north_and_south_of_the_equator_mirror_each_other(shaft):
    """East offsets are the same at ±φ and north offsets change sign."""
    north, south = (expected_curve(shaft("drop", latitude=sign * 40.0)) for sign in (1.0, -1.0))
    np.testing.assert_allclose(south.body[0], north.body[0], rtol=1e-12, atol=1e-13)
    np.testing.assert_allclose(south.body[1], -north.body[1], rtol=1e-9, atol=1e-13)


@pytest.mark.invariant
def test_a_bob_on_either_side_of_a_flow_edge_hangs_where_the_model_says_not_between(shaft):
    """A bob leaves the push of the air at the edge at once: 1 mm beside it the table is within 1 µm of the model."""
    blown = Air(cross_flow=((0.0, 480.0, 1.0, radians(90.0)), (500.0, 700.0, 0.5, radians(200.0))))
    assumptions = replace(shaft("hung", depth=1000.0), air=blown)
    curve = expected_curve(assumptions)
    depth = np.array([479.999, 480.0, 480.001, 499.999, 500.0, 500.001, 699.999, 700.0, 700.001])
    assert np.abs(curve.expected(depth) - curve.models.bob(depth)).max() < 1e-6
    jump = curve.expected(depth)[0, 1] - curve.expected(depth)[0, 0]
    assert jump < -1e-3, "the bob itself feels the flow"


@pytest.mark.invariant
def test_the_uncertainty_at_any_depth_is_what_its_budget_adds_up_to(shaft):
    """Also between the depths at which the budget is worked out: within a ten-thousandth, the table's own step."""
    blown = Air(cross_flow=((480.0, 500.0, 1.0, radians(90.0)), (700.0, 900.0, 0.4, radians(200.0))))
    curve = expected_curve(replace(shaft("hung", depth=1000.0), air=blown))
    depth = np.array([470.0, 485.0, 505.0, 550.0, 710.0, 800.0, 910.0, 1000.0])
    combined = np.sqrt(np.sum(curve.budget.at(depth) ** 2, axis=0))
    assert curve.look_up(curve.u, depth) == pytest.approx(combined, rel=1e-4)


@pytest.mark.parametrize("gradient", [-0.05, 0.08])
def test_air_that_no_shaft_has_at_its_bottom_is_refused(shaft, gradient):
    """50 K colder a kilometre would pass absolute zero at 5.6 km: refused, where there was NaN without a word."""
    air = Air(temperature=281.15, temperature_gradient=gradient)
    with pytest.raises(
        ParameterError, match=r"temperature_gradient .* expected air of -100 to 200 °C at the bottom"
    ):
        Models.of(shaft("hung", depth=6000.0, air=air))
    assert Models.of(shaft("hung", depth=1000.0, air=air)).air is not None
