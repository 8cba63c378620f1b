"""The drop planner: what it says against the models, and the screen driven by keys, also from a drop run."""

from dataclasses import replace

import numpy as np
import pytest
from screen_harness import settled, text_of

from eastfall.io.sitefile import parse_site
from eastfall.physics.errors import ParameterError
from eastfall.physics.expected import expected_curve
from eastfall.physics.models import Models
from eastfall.physics.settings import Shaft
from eastfall.tui import drop
from eastfall.tui.app import Dashboard
from eastfall.tui.glyphs import GLYPHS
from eastfall.tui.preferences import Remembered
from eastfall.tui.screens.planner import CLEAR, PlannerScreen
from eastfall.tui.screens.watch import WatchScreen
from eastfall.tui.units import FEET, UNITS
from eastfall.tui.widgets.cloud import Cloud

pytestmark = pytest.mark.invariant

SITE = """
[site]
latitude_deg = 51.35
[shaft]
depth_m = 210.0
diameter_m = 5.2
[run]
kind = "drop"
[body]
mass_kg = 0.514
diameter_mm = 50.0
u_release_mm = 0.4
u_release_speed_mmps = 0.3
[air]
density_kgm3 = 1.15
"""
BASE = parse_site(SITE, "site").assumptions
assert BASE.body is not None
BODY = BASE.body


@pytest.fixture(scope="module")
def planned() -> drop.Plan:
    """Plan the drop to the bottom once."""
    return drop.plan(BASE, 210.0)


def test_landing_is_where_the_expected_curve_has_the_body(planned: drop.Plan) -> None:
    """Planner and prediction give the same landing: interpolation of the curve's table is within 0.4 µm."""
    curve = expected_curve(BASE)
    east, north = curve.look_up(curve.body, np.array([210.0]))[:, 0]
    assert planned.landing == pytest.approx((east, north), abs=4e-7)


@pytest.mark.independent
def test_cloud_has_the_spread_of_the_linear_propagation(planned: drop.Plan) -> None:
    """Of 400 drops the standard deviation is within four of its own standard errors, σ/√(2n), of the propagated one."""
    for axis in (0, 1):
        sigma = float(np.sqrt(planned.covariance[axis, axis]))
        assert abs(np.std(planned.cloud[axis], ddof=1) - sigma) < 4.0 * sigma / np.sqrt(2.0 * drop.DROPS)
        assert abs(np.mean(planned.cloud[axis]) - planned.landing[axis]) < 4.0 * sigma / np.sqrt(drop.DROPS)


def test_same_inputs_give_the_same_cloud(planned: drop.Plan) -> None:
    """The picture does not flicker: the draws are the same every time."""
    assert np.array_equal(drop.plan(BASE, 210.0).cloud, planned.cloud)


def test_release_at_the_best_point_keeps_the_clearance_that_was_promised(planned: drop.Plan) -> None:
    """Verticals converge by less than 0.2 mm in 1 km over a metre, so that the promise holds to 0.1 mm here."""
    best = planned.best
    assert best is not None
    moved = replace(BASE, body=replace(BODY, release_east=best.east, release_north=best.north))
    again = drop.plan(moved, 210.0)
    assert again.clearance == pytest.approx(best.clearance, abs=1e-4)
    assert again.clearance is not None
    assert planned.clearance is not None
    assert again.clearance > planned.clearance
    assert again.best is not None
    assert again.best.east == pytest.approx(best.east, abs=1e-4)


def test_release_moved_sideways_moves_the_landing_and_the_wall_comes_closer(planned: drop.Plan) -> None:
    """Two metres east of the centre: the landing is two metres farther east, less the verticals' convergence."""
    there = drop.plan(replace(BASE, body=replace(BODY, release_east=2.0)), 210.0)
    assert there.landing[0] - planned.landing[0] == pytest.approx(2.0, abs=2e-4)
    assert there.clearance == pytest.approx(2.575 - there.landing[0], abs=1e-6)


def test_body_that_meets_the_wall_is_said_with_its_depth_and_share() -> None:
    """Released 30 mm from the wall on the east side it meets it on the way, and so do nearly all simulated drops."""
    near = drop.plan(replace(BASE, body=replace(BODY, release_east=2.575 - 0.030)), 210.0)
    said, in_the_way = drop.wall(near)
    assert in_the_way
    assert near.contact is not None
    path = Models.of(near.assumptions).body(210.0)
    assert float(path.at(near.contact).east) == pytest.approx(2.575, abs=1e-6)
    assert f"MEETS THE WALL at {near.contact:.1f} m" in said
    assert near.touching is not None
    assert near.touching > 0.9 * drop.DROPS


def test_release_beyond_the_wall_is_said_as_that() -> None:
    """A contact at the collar is no fall that meets the wall: the release point is wrong."""
    outside = drop.plan(replace(BASE, body=replace(BODY, release_east=2.6)), 210.0)
    assert drop.wall(outside) == ("THE RELEASE POINT itself touches the wall or lies beyond it.", True)


def test_level_above_the_contact_is_clear() -> None:
    """The contact below the level looked at does not hinder a drop to that level."""
    near = replace(BASE, body=replace(BODY, release_east=2.575 - 0.030))
    deep = drop.plan(near, 210.0)
    assert deep.contact is not None
    shallow = drop.plan(near, deep.contact / 3.0)
    said, _ = drop.wall(shallow)
    assert "MEETS" not in said
    assert shallow.touching == 0


def test_without_a_diameter_nothing_is_claimed_of_the_wall() -> None:
    """No contact, no clearance, no best point: each is said to be unknown."""
    unknown = drop.plan(replace(BASE, shaft=Shaft(depth=210.0)), 100.0)
    assert unknown.touching is None
    assert unknown.clearance is None
    assert "nothing is known of the wall" in drop.wall(unknown)[0]
    assert "give the shaft's diameter" in drop.best(unknown)


def test_without_a_body_the_plan_asks_for_one() -> None:
    """A point in vacuum has no release errors to spread."""
    with pytest.raises(ParameterError, match="its mass and diameter"):
        drop.plan(replace(BASE, body=None), 210.0)


def test_lines_fit_eighty_columns_in_both_units(planned: drop.Plan) -> None:
    """What is said needs no second row on the smallest screen."""
    said = [CLEAR]
    for units in UNITS.values():
        said += [drop.landing(planned, units), drop.wall(planned, units)[0], drop.best(planned, units)]
    assert [one for one in said if len(one) > 80] == []
    assert drop.landing(planned, FEET).startswith("LANDS at 689.0 ft: E +1.64")


# The screen.


@pytest.mark.parametrize(("width", "height"), [(80, 24), (120, 40), (200, 60)])
@pytest.mark.parametrize("glyphs", ["braille", "half", "ascii"])
async def test_caution_landing_wall_best_point_and_cloud_are_on_every_size(
    width: int, height: int, glyphs: str
) -> None:
    """The clear-shaft caution stands above everything; the plan names what is in view."""
    app = Dashboard(PlannerScreen(BASE, name="Carnwick Pit"), glyphs=GLYPHS[glyphs])
    async with app.run_test(size=(width, height)) as pilot:
        text = await settled(pilot)
    for words in (
        "Nobody below a dropped load",
        "LANDS at 210.0 m: E +41.7",
        "Clear of the wall by 2.53 m; 0 of 400",
        "Best release point: E -20.8",
        "! Reynolds number",
        "release east",
        "x lands (95 %)",
        "mm across",
    ):
        assert words in text, words
    assert ("R release" in text) == (width >= 110)


async def test_best_point_is_taken_by_a_key_and_the_wall_view_by_another() -> None:
    """G writes the best release into the inputs; w shows shaft, release and best point at the scale of the wall."""
    app = Dashboard(PlannerScreen(BASE))
    async with app.run_test(size=(80, 24)) as pilot:
        await settled(pilot)
        text = await settled(pilot, "g", "w")
        assert "*release east           -20.8 mm" in text
        assert "Clear of the wall by 2.55 m" in text
        assert "shaft, 5.6 m across" in text
        assert "R release" in text
        assert "wall" in text


async def test_level_is_typed_and_one_below_the_shaft_is_refused() -> None:
    """A hundred metres is worked out; five hundred is a line in words and the last plan stays."""
    app = Dashboard(PlannerScreen(BASE))
    async with app.run_test(size=(80, 24)) as pilot:
        await settled(pilot)
        assert "LANDS at 100.0 m" in await settled(pilot, *"100")
        text = await settled(pilot, "r", *"500")
        assert "! level looked at: 500; expected at most the shaft's 210.0 m" in text
        assert "LANDS at 50.0 m" in text


async def test_cloud_in_feet_and_inches_names_them() -> None:
    """The plan's scale and the landing are in inches and feet when the reader wants them."""
    app = Dashboard(PlannerScreen(BASE, units=FEET), remembered=Remembered())
    async with app.run_test(size=(80, 24)) as pilot:
        text = await settled(pilot)
    assert "in across" in text
    assert "LANDS at 689.0 ft" in text
    assert " mm " not in text


async def test_cloud_is_round_whatever_the_cell(tmp_path) -> None:
    """Equal spreads draw an ellipse whose height in dots is its width over the cell's aspect, within two dots."""
    drawn = {}
    for aspect in (1.5, 2.5):
        remembered = Remembered(tmp_path / f"{aspect}.toml")
        remembered.change(cell_aspect=aspect)
        app = Dashboard(PlannerScreen(BASE), remembered=remembered, glyphs=GLYPHS["half"])
        async with app.run_test(size=(120, 60)) as pilot:
            await settled(pilot)
            cells = app.screen.query_one("#plan-view", Cloud)._cells
            from eastfall.tui.roles import Role

            hit = (cells.ink == Role.EXPECTED) & (np.arange(cells.ink.shape[0]) < cells.ink.shape[0] - 1)[
                :, None
            ]
            rows, columns = np.nonzero(hit)
            drawn[aspect] = (np.ptp(columns) + 1, np.ptp(rows) + 1)
    for aspect, (width, height) in drawn.items():
        assert abs(width / height / aspect - 1.0) < 0.12, (aspect, width, height)


async def test_planner_opens_at_the_start_of_a_drop_run_and_only_there(session, snapshot) -> None:
    """Before arming, the screen names the key; p opens the planner; a guided run has none."""
    made = session(kind="drop")
    made = replace(made, assumptions=BASE)
    app = Dashboard(WatchScreen(made))
    async with app.run_test(size=(80, 24)) as pilot:
        app.take(snapshot(armed=False, standing=None))
        await pilot.pause()
        assert "p plans the release" in text_of(app)
        assert "LANDS at 210.0 m" in await settled(pilot, "p")
        await settled(pilot, "escape")
        assert app.screen is app.first
    app = Dashboard(WatchScreen(session()))
    async with app.run_test(size=(80, 24)) as pilot:
        await settled(pilot, "p")
        assert app.screen is app.first
