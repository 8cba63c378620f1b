"""The plan without a screen: one length the same both ways, the wall, the swing."""

from collections.abc import Callable

import numpy as np
import pytest

from eastfall.physics.findings import RestPoint, Standing
from eastfall.tui.glyphs import BRAILLE
from eastfall.tui.raster import Cells, Raster
from eastfall.tui.roles import Role
from eastfall.tui.widgets.plan import Plan, PlanView

pytestmark = pytest.mark.invariant
Make = Callable[..., Standing]


class _Square(Plan):
    """A plan for cells twice as high as wide, whatever the application says."""

    aspect = 2.0


def drawn(view: PlanView, scope: str = "close", width: int = 44, height: int = 24) -> Cells:
    """Return a plan of a view."""
    plan = _Square()
    plan.view, plan.scope = view, scope  # type: ignore[assignment]
    sheet = Raster(width, height, BRAILLE)
    plan.draw(sheet)
    return sheet.cells()


def extent(cells: Cells, role: Role) -> tuple[int, int]:
    """Return width and height of a role's dots, in cells."""
    rows, columns = np.nonzero((cells.ink == role) & (cells.chars > 0x2800))
    return int(np.ptp(columns)) + 1, int(np.ptp(rows)) + 1


@pytest.mark.parametrize(("width", "height"), [(44, 24), (30, 24), (80, 20)])
def test_circle_is_round_where_a_cell_is_twice_as_high_as_wide(
    standing: Make, width: int, height: int
) -> None:
    """The action limit is twice as many columns wide as rows high, within a cell, in any window."""
    across, down = extent(drawn(PlanView(one=standing()), width=width, height=height), Role.ACTION)
    assert across == pytest.approx(2 * down, abs=2)


def test_marks_lie_where_the_offsets_are(standing: Make) -> None:
    """Measured north-east of expected is drawn up and to the right of it."""
    cells = drawn(PlanView(one=standing(measured_east=0.02, measured_north=0.02)))
    place = {mark: np.argwhere(cells.chars == ord(mark))[0] for mark in "●○"}
    up, right = place["○"][0] - place["●"][0], place["●"][1] - place["○"][1]
    assert up > 2
    assert right > 4


def test_wall_plan_puts_the_guide_at_its_residual(standing: Make) -> None:
    """The lean of a moving line is no place: a guide whose sum is all lean stands in the middle of the shaft."""
    one = standing(measured_east=2.0, measured_north=0.0, expected_east=2.0, expected_north=0.0)
    leaning = drawn(PlanView(one=one, leans=True, diameter=5.5), "wall")
    standing_off = drawn(PlanView(one=one, leans=False, diameter=5.5), "wall")
    assert np.argwhere(leaning.chars == ord("●"))[0][1] == pytest.approx(22, abs=1)
    assert np.argwhere(standing_off.chars == ord("●"))[0][1] > 32


def test_wall_plan_without_a_diameter_says_what_is_missing(standing: Make) -> None:
    """No diameter in the site file is told in words."""
    assert "no diameter in the site file" in "\n".join(drawn(PlanView(one=standing()), "wall").lines())


def test_clearance_stands_first_in_the_wall_plan(standing: Make) -> None:
    """The distance to the wall is written with its unit."""
    cells = drawn(PlanView(one=standing(), diameter=5.5, clearance=2.7), "wall")
    assert cells.lines()[-1].startswith("wall 2.70 m off")


@pytest.mark.parametrize("wide", [True, False])
def test_ellipse_of_the_rest_point_lies_along_its_larger_axis(standing: Make, wide: bool) -> None:
    """An uncertainty four times larger east than north is drawn wider than high, and turned the other way."""
    large, small = 8e-3, 2e-3
    east, north = (large, small) if wide else (small, large)
    rest = RestPoint(
        east=0.0, north=0.0, u_east=east, u_north=north, covariance_east_north=0.0, period=30.0, decay=300.0,
        swings=4.0, fits=True,
    )  # fmt: skip
    one = standing(measured_east=0.0, measured_north=0.0, expected_east=0.0)
    across, down = extent(drawn(PlanView(one=one, rest=rest)), Role.OK)
    assert (across > 2 * 2 * down) == wide


def test_landings_are_points_that_nothing_joins(standing: Make) -> None:
    """Two landings far apart leave the space between them empty."""
    one = standing(measured_east=0.0, measured_north=0.02, expected_east=0.0)
    cells = drawn(PlanView(one=one, landings=(np.array([-0.02, 0.02]), np.array([-0.01, -0.01]))))
    assert (cells.ink == Role.PAST).sum() == 2


@pytest.mark.parametrize(("width", "height"), [(1, 1), (13, 5), (14, 6)])
def test_small_windows_are_survived(standing: Make, width: int, height: int) -> None:
    """A plan of a few cells draws nothing or something, and fails at nothing."""
    assert drawn(PlanView(one=standing(), diameter=5.5), width=width, height=height).chars.shape == (
        height,
        width,
    )


def test_answer_that_is_no_number_leaves_axes_and_title(standing: Make) -> None:
    """NaN offsets have no place in the plan."""
    nan = float("nan")
    one = standing(measured_east=nan, measured_north=nan, expected_east=nan, expected_north=nan)
    cells = drawn(PlanView(one=one, diameter=5.5))
    assert "plan, " in cells.lines()[0]
    assert not (cells.chars[:-1] == ord("●")).any()


def test_wall_is_drawn_before_the_first_reading() -> None:
    """A drop that waits for its arming shows the shaft and its width, not a bare cross."""
    cells = drawn(PlanView(one=None, diameter=5.0, centre=(0.1, 0.0)), "wall")
    assert "shaft, 5.4 m across" in cells.lines()[0]
    across, down = extent(cells, Role.WALL)
    assert across == pytest.approx(2 * down, abs=2)
    assert across > 30
